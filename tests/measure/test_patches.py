"""Labels taken apart into patches, and sizes of these."""

from __future__ import annotations

import numpy as np
import pytest

from spheru.measure.labels import connected_patches
from spheru.measure.sizes import measure_sizes
from tests.measure.reference import image_of, patches, voronoi

RNG = np.random.default_rng(7)
CASES = {
    "one pixel": (np.ones((1, 1), dtype=int), (False, False)),
    "empty": (np.zeros((3, 4), dtype=int), (False, True)),
    "ring": (np.array([[7, 2, 2, 7]]), (False, True)),
    "row": (np.array([[7, 2, 0, 7]]), (False, False)),
    "noise": (RNG.integers(0, 4, (9, 11)), (False, False)),
    "periodic noise": (RNG.integers(0, 4, (9, 8)), (True, True)),
    "noise without gaps": (RNG.integers(1, 3, (8, 9)), (True, False)),
    "comb": (np.array([[1, 0, 1, 0, 1], [1, 0, 1, 0, 1], [1, 1, 1, 1, 1]]), (False, False)),
    "body": (RNG.integers(0, 4, (4, 5, 6)), (False, False, False)),
    "periodic body": (RNG.integers(0, 3, (5, 4, 5)), (True, True, False)),
    "thin body": (RNG.integers(1, 4, (1, 6, 5)), (True, False, True)),
    "column": (RNG.integers(0, 3, (6, 1, 1)), (True, True, True)),
    "section": (np.array(voronoi(5, side=5, across=8, section=True).labels), (True, True)),
}


@pytest.mark.kernel
@pytest.mark.parametrize("case", CASES)
def test_patches_agree_with_the_slow_twin(case):
    labels, periodic = CASES[case]
    found, owner = connected_patches(image_of(labels, periodic=periodic))
    expected, owners = patches(labels, periodic)
    np.testing.assert_array_equal(found.labels, expected)
    assert owner.tolist() == owners


@pytest.mark.kernel
def test_a_staircase_does_not_cut_off_pixels_but_a_thin_line_parts():
    stairs = np.array([[1, 1, 2], [1, 2, 1], [2, 1, 1]])
    assert len(connected_patches(image_of(stairs))[1]) - 1 == 2  # the two corners of 1 touch at 2
    line = np.ones((5, 5), dtype=int)
    line[np.arange(5), np.arange(5)] = 0
    assert len(connected_patches(image_of(line))[1]) - 1 == 2


def test_shifting_a_periodic_map_keeps_its_patches():
    image = voronoi(3, side=6, across=8, section=True)
    before = np.sort(np.bincount(connected_patches(image)[0].labels.ravel()))
    for shift in ((1, 0), (5, 17), (0, 47)):
        moved = image_of(np.roll(image.labels, shift, (0, 1)), periodic=True)
        after = np.sort(np.bincount(connected_patches(moved)[0].labels.ravel()))
        assert after.tolist() == before.tolist()


@pytest.mark.kernel
def test_sizes_say_whether_they_are_of_labels_or_of_patches():
    labels = np.array([[7, 7, 7, 2, 2, 7]])
    as_labels = measure_sizes(image_of(labels), edges="none")
    as_patches = measure_sizes(image_of(labels), edges="none", kind="patch")
    assert (as_labels.kind, as_labels.pixels.tolist()) == ("label", [2, 4])
    assert (as_patches.kind, as_patches.pixels.tolist()) == ("patch", [3, 2, 1])
