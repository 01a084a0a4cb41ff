from __future__ import annotations

import numpy as np
import pytest

from spheru.measure.labels import cut_axes, sum_labels
from tests.measure.reference import face_counts, image_of, label_sums, voronoi

CASES = {
    "one pixel": (np.ones((1, 1), dtype=int), (False, False)),
    "empty": (np.zeros((3, 4), dtype=int), (False, True)),
    "row": (np.array([[3, 3, 0, 1, 1, 3]]), (False, True)),
    "column": (np.array([[3], [3], [0], [1], [3]]), (True, False)),
    "checker of one-pixel grains": (np.arange(1, 36).reshape(5, 7), (True, True)),
    "two wide": (np.array([[1, 2], [2, 1]]), (True, True)),
    "gaps in numbering": (np.array([[9, 9, 0], [4, 9, 4], [4, 4, 4]]), (False, False)),
    "plane voronoi": (np.array(voronoi(1, side=5, across=5).labels), (True, True)),
    "cut voronoi": (np.array(voronoi(2, side=5, across=5, cut=True).labels), (False, False)),
    "solid voronoi": (
        np.array(voronoi(3, side=6, across=3, dimension=3).labels),
        (True, True, True),
    ),
    "box with gaps": (
        np.random.default_rng(4).integers(0, 3, (2, 5, 3)),
        (False, True, False),
    ),
}


@pytest.mark.kernel
@pytest.mark.parametrize("case", CASES)
def test_pixels_and_faces_agree_with_the_slow_twin(case):
    labels, periodic = CASES[case]
    sums = sum_labels(image_of(labels, periodic=periodic))
    faces, pairs = face_counts(labels, periodic)
    assert sums.faces.sum(axis=0).tolist() == faces
    assert sums.pairs.sum(axis=0).tolist() == pairs
    expected = label_sums(labels, periodic)
    assert sums.label.tolist() == list(expected)
    assert sums.pixels.tolist() == [row[0] for row in expected.values()]


@pytest.mark.kernel
@pytest.mark.parametrize("case", ["plane voronoi", "cut voronoi", "solid voronoi", "column"])
def test_centres_and_boxes_of_grains_below_half_the_period_agree_with_the_slow_twin(case):
    labels, periodic = CASES[case]
    sums = sum_labels(image_of(labels, periodic=periodic))
    compared = 0
    for k, (number, first, total, low, high) in enumerate(label_sums(labels, periodic).values()):
        extent = high - low + 1
        if (extent[list(periodic)] * 2 < np.array(labels.shape)[list(periodic)]).all():
            centre = first + total / number + 0.5
            centre = np.where(periodic, centre % labels.shape, centre)
            assert sums.centre[k] == pytest.approx(centre)
            assert sums.low[k].tolist() == (first + low).tolist()
            assert sums.high[k].tolist() == (first + high).tolist()
            compared += 1
    assert compared > 0


@pytest.mark.kernel
def test_shifting_a_periodic_map_shifts_the_centres_and_nothing_else():
    image = voronoi(5, side=6, across=6)
    shifted = image_of(np.roll(image.labels, (5, 17), (0, 1)), periodic=True)
    before, after = sum_labels(image), sum_labels(shifted)
    assert after.pixels.tolist() == before.pixels.tolist()
    assert after.faces.sum(0).tolist() == before.faces.sum(0).tolist()
    moved = (after.centre - before.centre - (5, 17) + 18) % 36 - 18
    assert np.abs(moved).max() < 1e-9
    assert (after.high - after.low).tolist() == (before.high - before.low).tolist()


@pytest.mark.kernel
def test_faces_lie_in_the_tile_of_their_upper_pixel():
    labels = np.ones((16, 16), dtype=int)
    labels[5:, :] = 2
    faces = sum_labels(image_of(labels)).faces.reshape(8, 8, 2)
    assert faces[2, :, 0].tolist() == [2] * 8  # row 5 of 16 lies in the third of 8 tiles
    assert faces.sum() == 16


@pytest.mark.kernel
def test_labels_far_above_the_number_of_pixels_keep_their_names():
    labels = np.array([[4_000_000_000, 4_000_000_000, 7]], dtype=np.uint32)
    sums = sum_labels(image_of(labels))
    assert sums.label.tolist() == [7, 4_000_000_000]
    assert sums.pixels.tolist() == [1, 2]
    assert sums.faces.sum(0).tolist() == [0, 1]


@pytest.mark.kernel
def test_cut_axes_are_neither_periodic_nor_closed():
    frame = image_of(np.ones((2, 2, 2), int), periodic=(True, 0, 0), closed=(0, True, 0)).frame
    assert cut_axes(frame).tolist() == [False, False, True]
