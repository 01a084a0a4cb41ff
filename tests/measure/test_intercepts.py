from __future__ import annotations

import math
import os
from pathlib import Path

import numpy as np
import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.fields import Field
from spheru.measure.grain_number import number_from_count
from spheru.measure.intercepts import _count, _Path, count_intercepts
from spheru.measure.kernels import smooth_label_kernel
from spheru.measure.planimetric import count_grains
from tests.measure.reference import image_of, voronoi

TURNS = [0.0, 0.2, 0.7, 1.1]  # rad


def turned(turn, side):
    """Return the places of the pixels of a square picture in axes turned about its middle."""
    y, x = np.mgrid[:side, :side] + 0.5 - side / 2
    return math.cos(turn) * x + math.sin(turn) * y, math.cos(turn) * y - math.sin(turn) * x


def squares(turn, *, side=600, edge=30.0):
    u, v = (np.floor(w / edge + 0.37).astype(int) + 100 for w in turned(turn, side))
    return image_of(1 + u + 1000 * v)


def hexagons(turn, *, side=600, height=30.0):
    u, v = turned(turn, side)
    # nearest point of the triangular lattice with spacing `height`, by cube rounding
    a, b = u / height - v / (3**0.5 * height), 2 * v / (3**0.5 * height)
    c = -a - b
    whole = [np.round(w) for w in (a, b, c)]
    off = np.array([np.abs(w - r) for w, r in zip((a, b, c), whole, strict=True)])
    first = np.where((off.argmax(0) == 0), -whole[1] - whole[2], whole[0])
    second = np.where((off.argmax(0) == 1), -whole[0] - whole[2], whole[1])
    return image_of(1 + (first + 200).astype(int) + 1000 * (second + 200).astype(int))


@pytest.mark.parametrize("turn", TURNS)
def test_squares_have_a_mean_intercept_of_pi_over_4_edges_over_all_directions(turn):
    directions = np.linspace(0, math.pi, 12, endpoint=False) + 0.05
    count = count_intercepts(squares(turn), directions=directions, split=1, spacing=17.3)
    # mean chord pi A/P = pi/4 of the edge
    assert count.mean_intercept.value == pytest.approx(math.pi / 4 * 30, rel=0.015)
    assert count.boundary_density.value == pytest.approx(2 / 30, rel=0.015)


@pytest.mark.parametrize("turn", TURNS)
def test_squares_by_direction_follow_their_projection(turn):
    # lines at an angle a to the edges: edge/(|sin a| + |cos a|)
    count = count_intercepts(squares(turn), directions=[0.1, 0.5, 0.9, 1.3], split=1, spacing=7.3)
    for mean in count.by_direction:
        a = mean.direction - turn
        expected = 30 / (abs(math.sin(a)) + abs(math.cos(a)))
        # lines almost along the edges cross what smoothing has left of their staircases
        assert mean.mean_intercept.value == pytest.approx(expected, rel=0.045)


@pytest.mark.parametrize("turn", TURNS)
def test_hexagons_have_their_mean_chord(turn):
    # of distance h between opposite sides: area sqrt(3)/2 h^2, perimeter 2 sqrt(3) h: pi h/4
    directions = np.linspace(0, math.pi, 12, endpoint=False) + 0.03
    count = count_intercepts(hexagons(turn), directions=directions, split=1, spacing=17.3)
    assert count.mean_intercept.value == pytest.approx(math.pi / 4 * 30, rel=0.015)


@pytest.mark.parametrize("method", ["circle", "three-circles"])
def test_circles_read_a_voronoi_map_as_lines_do(method):
    # mean chord pi/4 in units of the spacing (Meijering 1953, memory)
    image = voronoi(5, side=40.0, across=20)
    count = count_intercepts(image, method=method, split=5)
    assert count.by_direction == ()
    assert math.isnan(count.anisotropy)
    assert count.mean_intercept.low < math.pi / 4 < count.mean_intercept.high
    assert len(count.lines) == 25 * {"circle": 1, "three-circles": 3}[method]


def test_three_circles_have_radii_of_three_two_and_one():
    count = count_intercepts(squares(0.3), method="three-circles", split=1)
    radii = [line.radius for line in count.lines]
    assert radii == pytest.approx([299.5, 299.5 * 2 / 3, 299.5 / 3])
    assert [line.length for line in count.lines] == pytest.approx(
        [2 * math.pi * r for r in radii], rel=1e-9
    )


# biases by pixels per mean chord: +0.5, +1.3, +3, +5 % along rows (measured before); along lines of
# any direction 0.4, 1.2, 3.3, 5.3 (0.1)
@pytest.mark.parametrize(
    ("across", "bias"), [(32, 0.004), (16.5, 0.012), (7.6, 0.033), (5.1, 0.053)]
)
def test_the_bias_of_pixels_is_what_is_said(across, bias):
    side = 24.0
    found, said = [], []
    for seed in range(4):
        image = voronoi(seed, side=side, across=across)
        truth = math.pi / 4 / math.sqrt(image.count / image.frame.measure)
        count = count_intercepts(image, directions=[0.0, 0.45, 0.8, 1.3, 2.0, 2.9], split=1)
        found.append(count.mean_intercept.value / truth - 1)
        said.append(count.pixel_bias)
    # scatter of one map of 576 cells: 0.6 % (of 900: 0.5 %, measured)
    assert np.mean(found) == pytest.approx(bias, abs=4 * 0.006 / 2)
    assert np.mean(said) == pytest.approx(bias, abs=0.003)


def test_no_direction_reads_a_voronoi_map_otherwise():
    image = voronoi(9, side=60.0, across=16)
    count = count_intercepts(image, directions=np.arange(8) * math.pi / 8, split=1)
    values = [mean.mean_intercept.value for mean in count.by_direction]
    assert count.anisotropy < 1.05
    assert np.std(values) / np.mean(values) < 0.015


def test_stretched_cells_have_their_anisotropy():
    image = voronoi(6, side=40.0, across=12)
    wide = image_of(image.labels.repeat(2, axis=1))
    count = count_intercepts(wide, directions=[0.0, math.pi / 2], split=2)
    assert count.anisotropy == pytest.approx(2.0, rel=0.06)
    assert count.by_direction[0].mean_intercept.value > count.by_direction[1].mean_intercept.value


def test_ends_count_half_and_boundaries_once():
    labels = np.repeat([1, 2, 3], 20)[None, :].repeat(9, axis=0)
    count = count_intercepts(image_of(labels), directions=[0.0], spacing=100.0, split=1)
    (line,) = count.lines
    assert (line.intercepts, line.intersections) == (2.0, 2.0)  # 1/2 + 1 + 1/2
    assert line.crossings[:, 1] == pytest.approx([20.0, 40.0], abs=0.51)
    assert line.points(3)[1] == pytest.approx((np.array(line.start) + line.end) / 2)


def counted(labels, start, end):
    image = image_of(np.array(labels))
    path = _Path(start=np.array(start, dtype=float), end=np.array(end, dtype=float))
    return _count(Field(image=image, start=(0, 0), shape=image.labels.shape), 0, path)


def test_a_junction_of_three_counts_one_and_a_half():
    # 1 | 2 above, 3 below: one edge of the line goes 1, 2, 3, the other 1, 3
    labels = [[1] * 30 + [2] * 30] * 30 + [[3] * 60] * 30
    line = counted(labels, (10, 10), (50, 50))
    assert (line.intersections, line.intercepts) == (1.5, 1.5)


def test_a_boundary_that_the_line_just_touches_counts_one():
    # a lens whose edge is the line: one edge of the line goes 1, 2, 1, the other stays in 1
    y, x = np.mgrid[:80, :80] + 0.5
    labels = np.where((x - 40) ** 2 + (y - 55) ** 2 < 15**2, 2, 1)
    line = counted(labels, (40, 5), (40, 75))
    assert line.intersections == 1.0
    assert counted(labels, (41, 5), (41, 75)).intersections == 2.0
    assert counted(labels, (39, 5), (39, 75)).intersections == 0.0


def test_an_end_that_touches_a_boundary_counts_half_an_intersection():
    # the boundary, slightly tilted to it, passes between the ends of the line's two edges
    y, x = np.mgrid[:40, :80] + 0.5
    labels = np.where(x < 60 + (y - 20), 1, 2)
    assert counted(labels, (20, 10), (20, 60)).intersections == 0.5


def test_melt_is_no_spherulite_and_its_front_no_boundary():
    # discs of radius 20 on a square of 50: mean chord pi r/2, whatever the direction
    y, x = np.mgrid[:500, :500] + 0.5
    disc = ((y % 50) - 25) ** 2 + ((x % 50) - 25) ** 2 < 20**2
    labels = np.where(disc, 1 + (y // 50) + 10 * (x // 50), 0).astype(int)
    count = count_intercepts(
        image_of(labels), directions=np.arange(7) * math.pi / 7 + 0.1, split=1, spacing=3.3
    )
    assert count.mean_intercept.value == pytest.approx(math.pi / 2 * 20, rel=0.02)
    assert count.boundary_density.value == 0.0
    assert sum(line.length for line in count.lines) / sum(
        math.dist(line.start, line.end) for line in count.lines
    ) == pytest.approx(math.pi * 20**2 / 50**2, rel=0.02)


def test_the_unit_is_the_metre_and_the_origin_counts():
    image = squares(0.4, side=200)
    micro = image_of(image.labels, pixel=1e-6, origin=(1.0, 2.0))
    one, other = (count_intercepts(i, split=1) for i in (image, micro))
    assert other.mean_intercept.value == pytest.approx(one.mean_intercept.value * 1e-6)
    assert other.pixels_per_intercept == pytest.approx(one.pixels_per_intercept)
    assert other.lines[0].start[1] == pytest.approx(2.0 + one.lines[0].start[1] * 1e-6)
    assert other.surface_density.value == pytest.approx(2 / other.mean_intercept.value)
    assert other.grain_number.value == pytest.approx(
        -2 * math.log2(other.mean_intercept.value / 0.32e-3)
    )


@pytest.mark.kernel
@pytest.mark.parametrize("periodic", [True, False])
def test_the_smooth_label_weighs_most(periodic):
    rng = np.random.default_rng(3)
    labels = rng.integers(0, 4, (7, 9)).astype(np.uint32)
    labels.setflags(write=False)
    row, column = rng.random(200) * 7, rng.random(200) * 9
    out = np.empty(200, dtype=np.uint32)
    smooth_label_kernel(labels, np.array([periodic] * 2), row, column, 2.5, out)
    for k in range(200):
        share = np.zeros(4)
        for y in range(-4, 12):
            for x in range(-4, 14):
                far = ((y + 0.5 - row[k]) ** 2 + (x + 0.5 - column[k]) ** 2) / 2.5**2
                if far < 1 and (periodic or (0 <= y < 7 and 0 <= x < 9)):
                    share[labels[y % 7, x % 9]] += (1 - far) ** 2
        assert share[out[k]] == pytest.approx(share.max())


def test_bad_input_gets_one_clear_line():
    plane = image_of(np.ones((40, 40), dtype=int))
    with pytest.raises(ValidityError, match="take sections"):
        count_intercepts(image_of(np.ones((3, 3, 3), dtype=int)))
    with pytest.raises(UnknownNameError, match="circle, lines, three-circles"):
        count_intercepts(plane, method="spiral")
    with pytest.raises(ValidityError, match="finite directions"):
        count_intercepts(plane, directions=[math.nan])
    with pytest.raises(ValidityError, match="finite directions"):
        count_intercepts(plane, directions=[])
    with pytest.raises(ValidityError, match="spacing above 0 m"):
        count_intercepts(plane, spacing=0.0)
    with pytest.raises(ValidityError, match="shows no spherulite"):
        count_intercepts(image_of(np.zeros((40, 40), dtype=int)))
    with pytest.raises(ValidityError, match="too small for a test circle"):
        count_intercepts(image_of(np.ones((6, 6), dtype=int)), method="three-circles")


def test_one_label_only_has_no_mean_intercept():
    count = count_intercepts(image_of(np.ones((40, 40), dtype=int)), split=1)
    assert count.intercepts == 0
    assert math.isnan(count.mean_intercept.value)
    assert math.isnan(count.grain_number.value)
    assert math.isnan(count.pixel_bias)


def test_hand_traced_boundaries_of_a_metal():
    """Texture Boundary in Metallography (2024), 16 cuts of 256 x 256 (MIT): 958 pieces."""
    folder = os.environ.get("SPHERU_TRACED_DATA")
    if not folder or not Path(folder).is_dir():
        pytest.skip("SPHERU_TRACED_DATA names no folder with the hand-traced boundaries")
    from skimage.io import imread
    from skimage.measure import label
    from skimage.segmentation import watershed

    images = []
    for path in sorted(Path(folder).glob("*_boundary.png")):
        drawn = imread(path)
        pieces = label(drawn <= 127, connectivity=1)
        small = np.bincount(pieces.ravel()) < 9
        pieces[small[pieces]] = 0
        pieces = np.searchsorted(np.unique(pieces), pieces)
        images.append(image_of(watershed(drawn, pieces), pixel=1e-6))
    assert sum(image.count for image in images) == 958
    lines = count_intercepts(images, split=1)
    assert 25.5e-6 < lines.mean_intercept.value < 28.7e-6
    grains = count_grains(images, area="rectangle", split=1)
    # (pieces - half of those on the edge - 1 a frame) is 740 by an own count
    assert sum(field.equivalent for field in grains.fields) == pytest.approx(740, rel=0.02)
    # by the intercept finer than by the count, by more than Voronoi cells' 0.36: broad and jagged
    gap = lines.grain_number.value - number_from_count(grains.per_area.statistic.value)
    assert 0.45 < gap < 0.8
