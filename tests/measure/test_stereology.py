from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.intervals import Statistic
from spheru.measure.stereology import (
    linear_edges,
    logarithmic_edges,
    section_matrix,
    space_from_count,
    space_from_intercept,
    sphere_mean_diameter,
    sphere_number_density,
    surface_from_intercept,
    unfold_spheres,
)
from tests.measure.reference import voronoi


def circles(rng, diameters):
    """Return the circles that a plane cuts out of spheres, one sphere each by its chance."""
    drawn = rng.choice(diameters, size=20_000, p=diameters / diameters.sum())
    height = rng.random(len(drawn)) * drawn / 2
    return np.sqrt(drawn**2 - 4 * height**2)


@pytest.mark.parametrize("edges", [linear_edges(1.0, 8), logarithmic_edges(1.0, 10)])
def test_exact_circles_unfold_to_the_spheres_that_gave_them(edges):
    spheres = np.arange(1.0, len(edges))
    counts = section_matrix(edges) @ spheres
    middle = (edges[1:] + edges[:-1]) / 2
    number = np.round(counts * 1e6).astype(int)
    found = unfold_spheres(np.repeat(middle, number), area=1e6, edges=edges)
    assert found.per_volume == pytest.approx(spheres, rel=1e-4)
    assert found.negative == 0


def test_errors_are_the_scatter_of_repeated_counts():
    rng = np.random.default_rng(7)
    edges = linear_edges(1.0, 6)
    expected = section_matrix(edges) @ np.ones(6) * 500
    middle = (edges[1:] + edges[:-1]) / 2
    found = [
        unfold_spheres(np.repeat(middle, rng.poisson(expected)), area=500.0, edges=edges)
        for _ in range(300)
    ]
    scatter = np.std([u.per_volume for u in found], axis=0)
    said = np.mean([u.error for u in found], axis=0)
    assert said == pytest.approx(scatter, rel=4 / math.sqrt(2 * 300))


def test_more_classes_are_conditioned_worse_and_say_so():
    circle = circles(np.random.default_rng(1), np.array([0.4, 0.7, 1.0]))
    few, many = (unfold_spheres(circle, area=1e3, edges=linear_edges(1.0, n)) for n in (5, 40))
    assert many.condition > 2 * few.condition
    assert many.error.max() > few.error.max()
    assert many.negative > 0
    assert "ill-conditioned" in many.warning
    assert f"{many.negative} came out negative" in many.warning


def test_mean_diameter_and_number_of_spheres_of_any_spread():
    diameters = np.array([0.5, 0.8, 1.0])  # equally many
    circle = circles(np.random.default_rng(2), diameters)
    mean = diameters.mean()
    # 1/d has no variance: 1 % from the logarithmic divergence at 2e4 circles
    assert sphere_mean_diameter(circle) == pytest.approx(mean, rel=0.03)
    area = len(circle) / mean  # one sphere per volume gives as many circles per area
    assert sphere_number_density(circle, area=area) == pytest.approx(1.0, rel=0.03)


def test_intervals_go_through_in_order():
    estimate = space_from_count(Statistic(value=1e10, low=0.9e10, high=1.1e10), "johnson-mehl")
    for name in ("number_density", "mean_volume", "mean_diameter", "surface_density"):
        found = getattr(estimate, name)
        assert found.low < found.value < found.high
    assert estimate.number_density.high / estimate.number_density.value == pytest.approx(1.1**1.5)
    inverse = space_from_intercept(Statistic(value=2e-6, low=1e-6, high=3e-6), "voronoi")
    assert inverse.number_density.high / inverse.number_density.value == pytest.approx(8.0)
    assert math.isnan(surface_from_intercept(Statistic(value=1.0)).low)


def test_a_section_of_voronoi_cells_gives_their_number_back():
    from spheru.measure.intercepts import count_intercepts

    image = voronoi(3, side=30.0, across=24, section=True)  # 1 nucleus per unit of volume
    count = Statistic(value=image.count / image.frame.measure)
    # 1312 pieces scatter by 2 % (measured in sections of 1e4: 0.8 %), 3/2 of that in the number;
    # slivers below a pixel are lost
    assert space_from_count(count, "voronoi").number_density.value == pytest.approx(1.0, abs=0.13)
    intercept = count_intercepts(image, split=1).mean_intercept
    estimate = space_from_intercept(intercept, "voronoi")
    assert estimate.number_density.value == pytest.approx(1.0, abs=0.15)
    assert estimate.mean_diameter.value == pytest.approx(1.2156, abs=0.06)


def test_bad_input_gets_one_clear_line():
    with pytest.raises(UnknownNameError, match="johnson-mehl, voronoi"):
        space_from_count(Statistic(value=1.0), "foam")
    with pytest.raises(ValidityError, match="count per area above 0"):
        space_from_count(Statistic(value=0.0), "voronoi")
    with pytest.raises(ValidityError, match="mean intercept above 0"):
        space_from_intercept(Statistic(value=math.nan), "voronoi")
    with pytest.raises(ValidityError, match="larger than the largest class"):
        unfold_spheres([2.0], area=1.0, edges=[0.0, 1.0])
    with pytest.raises(ValidityError, match="edges that rise"):
        section_matrix([1.0, 1.0])
    with pytest.raises(ValidityError, match="area above 0 m2"):
        unfold_spheres([0.5], area=0.0, edges=[0.0, 1.0])
    with pytest.raises(ValidityError, match="diameters above 0 m"):
        sphere_mean_diameter([])
    with pytest.raises(ValidityError, match="at least one class"):
        linear_edges(1.0, 0)
    with pytest.raises(ValidityError, match="largest diameter above 0"):
        logarithmic_edges(0.0)
    with pytest.raises(ValidityError, match="between 0 and 1"):
        logarithmic_edges(1.0, ratio=1.0)


def test_weights_that_all_equal_one_over_the_area_give_what_the_area_gives():
    circles = np.random.default_rng(3).uniform(0.1, 2.0, 500)
    edges = linear_edges(2.0, 6)
    by_area = unfold_spheres(circles, edges=edges, area=40.0)
    by_weight = unfold_spheres(circles, edges=edges, weights=np.full(500, 1 / 40.0))
    np.testing.assert_allclose(by_weight.per_volume, by_area.per_volume, rtol=1e-12)
    np.testing.assert_allclose(by_weight.error, by_area.error, rtol=1e-12)


@pytest.mark.parametrize("both", [{}, {"area": 1.0, "weights": [1.0]}], ids=["none", "both"])
def test_area_or_weights_not_both(both):
    with pytest.raises(ValidityError, match="either the area of the section or weights"):
        unfold_spheres([0.5], edges=[0.0, 1.0], **both)
