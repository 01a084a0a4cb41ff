from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.sizes import measure_sizes
from tests.measure.reference import image_of, voronoi


def disc(shape, centre, radius):
    y, x = np.ogrid[: shape[0], : shape[1]]
    away = [
        np.minimum(np.abs(v + 0.5 - c), n - np.abs(v + 0.5 - c))
        for v, c, n in zip((y, x), centre, shape, strict=True)
    ]
    return away[0] ** 2 + away[1] ** 2 < radius**2


@pytest.fixture(scope="module")
def maps():
    return [measure_sizes(voronoi(seed, side=25, across=10)) for seed in range(16)]


@pytest.mark.kernel
def test_squares_have_their_area_and_place_in_metres():
    labels = np.zeros((10, 12), dtype=int)
    labels[1:4, 2:5] = 4
    labels[5:9, 6:10] = 9
    sizes = measure_sizes(image_of(labels, pixel=2e-6, origin=(1e-3, 0.0), closed=True))
    assert sizes.label.tolist() == [4, 9]
    assert sizes.size == pytest.approx([9 * 4e-12, 16 * 4e-12])
    assert sizes.diameter == pytest.approx(np.sqrt(4 * np.array([36e-12, 64e-12]) / math.pi))
    assert sizes.centre == pytest.approx(np.array([[1.005e-3, 7e-6], [1.014e-3, 16e-6]]))
    assert sizes.statistics.mean_size.value == pytest.approx(50e-12)
    assert sizes.statistics.size_sd.value == pytest.approx(14e-12)
    assert sizes.statistics.number_density.value == pytest.approx(2 / (120 * 4e-12))
    assert sizes.kind == "label"
    assert math.isnan(sizes.statistics.mean_size.low)


@pytest.mark.kernel
def test_a_cube_has_the_diameter_of_the_sphere_of_its_volume():
    labels = np.zeros((6, 6, 6), dtype=int)
    labels[1:4, 1:4, 1:4] = 1
    sizes = measure_sizes(image_of(labels, pixel=1e-6))
    assert sizes.size == pytest.approx([27e-18])
    assert sizes.diameter == pytest.approx([(6 * 27 / math.pi) ** (1 / 3) * 1e-6])


@pytest.mark.kernel
@pytest.mark.parametrize("centre", [(20, 20), (0, 20), (20, 39.5), (0.5, 39.5)])
def test_a_disc_across_a_periodic_edge_is_one_disc(centre):
    labels = disc((40, 40), centre, 9.0).astype(int)
    sizes = measure_sizes(image_of(labels, periodic=True))
    assert sizes.centre[0] % 40 == pytest.approx(centre)
    assert sizes.diameter[0] == pytest.approx(18.0, rel=0.02)
    assert not sizes.touches_edge.any()


@pytest.mark.kernel
def test_a_disc_cut_by_the_edge_is_marked_and_weighs_nothing():
    labels = disc((40, 40), (20, 12), 6.0) + 2 * disc((40, 40), (20, 39), 6.0)
    labels[:, :5] = 0  # the far side of the wrapped second disc
    sizes = measure_sizes(image_of(labels))
    assert sizes.edge_rule == "miles-lantuejoul"
    assert sizes.touches_edge.tolist() == [False, True]
    assert sizes.weight == pytest.approx([1 / (40 - 12 - 1) ** 2, 0.0])
    assert sizes.count == 1


@pytest.mark.kernel
@pytest.mark.parametrize(
    ("edges", "rule", "weights"),
    [
        # window of 4 x 8 pixels, x cut; grain 1 whole (2 wide), grain 2 at the edge
        ("auto", "miles-lantuejoul", [1 / (4 * 5), 0.0]),
        ("miles-lantuejoul", "miles-lantuejoul", [1 / (4 * 5), 0.0]),
        ("exclude", "exclude", [1 / 32, 0.0]),
        ("none", "none", [1 / 32, 1 / 32]),
    ],
)
def test_only_cut_axes_are_corrected(edges, rule, weights):
    labels = np.zeros((4, 8), dtype=int)
    labels[:, 2:4] = 1
    labels[:, 6:] = 2
    image = image_of(labels, closed=(True, False))
    sizes = measure_sizes(image, edges=edges)
    assert sizes.edge_rule == rule
    assert sizes.weight == pytest.approx(weights)
    assert measure_sizes(image_of(labels, periodic=True), edges="auto").edge_rule == "none"


@pytest.mark.kernel
def test_the_weights_average_to_the_true_density_over_all_places_of_the_window():
    # exact on the lattice: one grain of 3 x 2 pixels per 12 x 12, all 144 shifts, window 7 x 6
    pattern = np.zeros((12, 12), dtype=int)
    pattern[4:7, 5:7] = 1
    sums = [
        measure_sizes(image_of(np.roll(pattern, (i, j), (0, 1))[:7, :6])).weight.sum()
        for i in range(12)
        for j in range(12)
    ]
    assert np.mean(sums) == pytest.approx(1 / 144)


@pytest.mark.kernel
def test_a_grain_across_the_whole_window_is_counted_apart():
    labels = np.ones((5, 9), dtype=int)
    labels[1:3, 2:4] = 2
    sizes = measure_sizes(image_of(labels))
    assert sizes.spanning == 1
    assert sizes.count == 1
    assert measure_sizes(image_of(labels, periodic=True)).spanning == 0


@pytest.mark.kernel
def test_below_the_floor_nothing_counts():
    labels = np.zeros((6, 6), dtype=int)
    labels[0, 0] = 1
    labels[2:5, 2:5] = 2
    sizes = measure_sizes(image_of(labels, periodic=True), floor=1.2)
    assert len(sizes) == 2
    assert sizes.count == 1
    assert sizes.floor == 1.2
    assert sizes.statistics.mean_size.value == 9.0


@pytest.mark.kernel
def test_an_empty_image_has_no_sizes_and_no_density():
    sizes = measure_sizes(image_of(np.zeros((4, 4), dtype=int)))
    assert len(sizes) == sizes.count == 0
    assert sizes.statistics.number_density.value == 0.0
    assert math.isnan(sizes.statistics.number_mean_diameter.value)
    assert np.isnan(sizes.quantiles([0.1, 0.9])).all()
    assert sizes.histogram(4).number.tolist() == [0.0] * 4


@pytest.mark.kernel
def test_equal_grains_have_no_spread_and_an_exact_interval():
    row = np.arange(20).repeat(2)
    labels = 1 + row[:, None] + 20 * row[None, :]
    sizes = measure_sizes(image_of(labels, pixel=1e-6, periodic=True))
    assert sizes.statistics.diameter_sd.value == 0.0
    found = sizes.statistics.number_mean_diameter
    assert found.low == pytest.approx(found.value)
    assert found.high == pytest.approx(found.value)


@pytest.mark.kernel
def test_means_weighted_by_size_weigh_each_pixel():
    labels = np.array([[1, 2, 2, 2, 3, 3, 3, 3]])
    sizes = measure_sizes(image_of(labels, periodic=True))
    per_pixel = sizes.diameter[labels[0] - 1]
    assert sizes.statistics.size_weighted_mean_diameter.value == pytest.approx(per_pixel.mean())
    assert sizes.statistics.number_mean_diameter.value == pytest.approx(sizes.diameter.mean())
    assert sizes.statistics.diameter_sd.value == pytest.approx(sizes.diameter.std())


@pytest.mark.kernel
def test_histogram_shares_sum_to_one_and_shift_to_large_grains_by_size():
    labels = np.array([[1, 2, 3, 4, 4, 4, 4, 4, 4]])
    histogram = measure_sizes(image_of(labels, periodic=True)).histogram([0.0, 2.0, 4.0])
    assert histogram.number == pytest.approx([0.75, 0.25])
    assert histogram.size == pytest.approx([1 / 3, 2 / 3])


@pytest.mark.kernel
def test_arrays_are_read_only():
    sizes = measure_sizes(image_of(np.ones((2, 2), dtype=int)))
    with pytest.raises(ValueError, match="read-only"):
        sizes.diameter[0] = 1.0


@pytest.mark.kernel
def test_faults_of_the_caller_are_named():
    image = image_of(np.ones((2, 2), dtype=int))
    with pytest.raises(UnknownNameError, match="did you mean 'exclude'"):
        measure_sizes(image, edges="exlude")
    with pytest.raises(ValidityError, match="0 m and up, got -1"):
        measure_sizes(image, floor=-1.0)
    with pytest.raises(ValidityError, match="between 0 and 1"):
        measure_sizes(image).quantiles(1.5)
    with pytest.raises(UnknownNameError, match="weighting"):
        measure_sizes(image).quantiles(0.5, weighting="mass")


# Poisson-Voronoi, 1e4 plane cells in 16 maps (Gilbert 1962, Meijering 1953, memory; verified by
# quadrature and by exact polygons). Pixels, 10 across, move areas by far less than the scatter.
@pytest.mark.parametrize(
    ("quantity", "expected"),
    [
        pytest.param(lambda size: (size.sum(), len(size)), 1.0, id="mean area"),
        pytest.param(lambda size: ((size**2).sum(), size.sum()), 1.280176, id="area-weighted area"),
        pytest.param(
            lambda size: (np.sqrt(4 * size / math.pi).sum(), len(size)), 1.0893, id="diameter"
        ),
        pytest.param(lambda size: ((size < 0.5).sum(), len(size)), 0.1630, id="share below half"),
        pytest.param(lambda size: ((size > 2.0).sum(), len(size)), 0.0494, id="share above twice"),
    ],
)
def test_plane_voronoi_cells_have_the_known_sizes(quantity, expected, maps):
    above, below = np.array([quantity(m.size) for m in maps]).T
    found = above.sum() / below.sum()
    error = (above - found * below).std(ddof=1) / math.sqrt(len(maps)) / below.mean()
    assert found == pytest.approx(expected, abs=4 * error)
    assert error < 0.1 * expected


def test_sections_lose_slivers_but_keep_the_known_count():
    # N_A = 1.457965 (Meijering, memory; verified); 3 % of the count are lost at 10 pixels across
    sizes = measure_sizes(voronoi(22, side=30, across=12, section=True))
    found = sizes.statistics.number_density
    error = (found.high - found.low) / 4
    assert 0.95 * 1.457965 - 4 * error < found.value < 1.457965 + 4 * error
    assert error < 0.04 * 1.457965


@pytest.mark.parametrize("side", [6, 10])
def test_miles_lantuejoul_is_unbiased_where_whole_grains_only_read_low(side):
    # at 1 nucleus per area: number 1, weighted mean area 1 (1.003 and 0.996 found with polygons)
    totals = {"auto": [], "exclude": []}
    for seed in range(60):
        image = voronoi(seed, side=side, across=10, cut=True)
        for edges, rows in totals.items():
            sizes = measure_sizes(image, edges=edges)
            rows.append((sizes.weight.sum(), (sizes.weight * sizes.size).sum()))
    number, area = np.array(totals["auto"]).T
    error = number.std(ddof=1) / math.sqrt(len(number))
    assert number.mean() == pytest.approx(1.0, abs=4 * error)
    assert error < 0.05
    spread = (area - number * area.sum() / number.sum()).std(ddof=1) / math.sqrt(len(number))
    corrected = area.sum() / number.sum()
    assert corrected == pytest.approx(1.0, abs=4 * spread)
    naive_number, naive_area = np.array(totals["exclude"]).sum(axis=0)
    assert naive_area / naive_number < corrected - 0.02
