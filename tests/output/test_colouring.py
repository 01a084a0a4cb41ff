"""Colours of neighbours differ."""

from __future__ import annotations

import numpy as np
import pytest
from skimage.color import rgb2lab

from spheru.output.plots.colouring import COLOURS, colour_codes, neighbour_pairs, palette
from tests.output.reference import neighbour_pairs as slow_pairs
from tests.output.reference import voronoi_map


@pytest.mark.parametrize("periodic", [(False, False), (True, False), (True, True)])
@pytest.mark.parametrize("shape", [(1, 1), (1, 9), (23, 31)])
def test_pairs_are_those_of_the_slow_twin(shape, periodic):
    labels = np.random.default_rng(5).integers(0, 9, size=shape)
    found = neighbour_pairs(labels, periodic=periodic)
    assert [tuple(pair) for pair in found.tolist()] == slow_pairs(labels, periodic)


@pytest.mark.parametrize("periodic", [False, True])
def test_neighbours_differ_in_a_voronoi_map_with_ten_colours(periodic):
    image = voronoi_map((300, 300), 2000, periodic=periodic)
    pairs = neighbour_pairs(image.labels, periodic=image.frame.periodic)
    codes = colour_codes(pairs, 2000)
    assert (codes[pairs[:, 0]] != codes[pairs[:, 1]]).all()
    assert codes[0] == -1
    assert codes[1:].max() == COLOURS - 1
    assert np.bincount(codes[1:]).min() > 0.8 * 2000 / COLOURS  # all of them are used alike


def test_a_map_that_needs_more_colours_gets_them():
    everyone = np.array([(i, j) for j in range(1, 14) for i in range(1, j)])
    assert len(set(colour_codes(everyone, 13)[1:].tolist())) == 13


def test_a_single_label_has_a_colour():
    assert colour_codes(np.zeros((0, 2), dtype=np.int64), 1).tolist() == [-1, 0]


def test_colours_of_the_palette_stand_apart_in_hue_and_from_grey():
    lab = rgb2lab(palette(COLOURS)[None] / 255)[0]
    chroma = np.hypot(lab[:, 1], lab[:, 2])
    np.testing.assert_allclose(chroma, 35, atol=1)  # none was cut at the edge of sRGB
    apart = np.linalg.norm(lab[:, None] - lab[None], axis=2)[~np.eye(COLOURS, dtype=bool)]
    assert apart.min() > 20  # a difference of 2.3 is just noticeable
