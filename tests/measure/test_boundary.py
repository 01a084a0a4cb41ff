from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.measure.boundary import boundary_density
from tests.measure.reference import image_of, voronoi


@pytest.mark.kernel
def test_straight_stripes_read_pi_over_4_of_their_length():
    # stripes of 5 pixels of 2 um, periodic: true length per area 1/(10 um)
    labels = np.repeat(np.arange(1, 9), 5)[None, :].repeat(20, axis=0)
    value = boundary_density(image_of(labels, pixel=2e-6, periodic=True)).value
    assert value == pytest.approx(math.pi / 4 * 1e5)


@pytest.mark.kernel
def test_squares_read_pi_over_4_of_their_length_and_cubes_two_thirds():
    row = np.repeat(np.arange(4), 5)
    squares = 1 + row[:, None] + 4 * row[None, :]
    cubes = squares[None] + 16 * row[:, None, None]
    # squares of edge 5: length per area 2/5; cubes of edge 5: area per volume 3/5
    assert boundary_density(image_of(squares, periodic=True)).value == pytest.approx(
        math.pi / 4 * 2 / 5
    )
    assert boundary_density(image_of(cubes, periodic=True)).value == pytest.approx(2 / 3 * 3 / 5)


@pytest.mark.kernel
def test_the_front_against_the_melt_is_no_boundary():
    labels = np.zeros((20, 20), dtype=int)
    labels[5:15, 5:10] = 1
    labels[5:15, 12:15] = 2
    assert boundary_density(image_of(labels)).value == 0.0
    labels[5:15, 10:12] = 1
    assert boundary_density(image_of(labels)).value == pytest.approx(
        math.pi / 4 * 10 / (20 * 19)  # 10 faces; 20 rows of 19 pairs; no crossing down the columns
    )


@pytest.mark.kernel
def test_a_single_pixel_has_no_test_line():
    assert math.isnan(boundary_density(image_of(np.ones((1, 1), dtype=int))).value)


def test_a_circle_reads_its_length():
    # P1: neighbour pairs miss what leaves and enters a row between two centres, O(pixel)
    y, x = np.ogrid[:401, :401]
    labels = np.where((x - 200) ** 2 + (y - 200.0) ** 2 < 150.0**2, 1, 2)
    length = boundary_density(image_of(labels, periodic=True)).value * 401**2
    assert length == pytest.approx(2 * math.pi * 150, rel=0.01)


# Meijering 1953 (memory; verified by quadrature): L_A = 2 lambda^(1/2), S_V = 2.910436
# lambda^(1/3); a plane section has (pi/4) S_V. Pixels read low in proportion to the pixel: 1 to
# 2 % at 20 to 25 pixels per mean chord, 2 % at 13 voxels (5 % at 6). Chords: 0.785 and 0.687.
@pytest.mark.parametrize(
    ("make", "expected", "low"),
    [
        pytest.param({"side": 20, "across": 25}, 2.0, 0.98, id="plane"),
        pytest.param({"side": 8.5, "across": 9, "dimension": 3}, 2.910436, 0.94, id="solid"),
        pytest.param({"side": 20, "across": 25, "section": True}, 2.285851, 0.97, id="section"),
    ],
)
def test_voronoi_maps_read_the_known_density_a_little_low(make, expected, low):
    found = boundary_density(voronoi(11, **make))
    error = (found.high - found.low) / 4
    assert low * expected - 4 * error < found.value < expected + 4 * error
    assert error < 0.05 * expected
