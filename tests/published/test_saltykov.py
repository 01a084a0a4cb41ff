"""Coefficients of Schwartz and Saltykov, and sections of spheres.

S. A. Saltykov, "Stereometric metallography" (1958), from memory; the linear table differs from
exact arithmetic in the fourth digit in places.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.measure.intervals import Statistic
from spheru.measure.stereology import (
    linear_edges,
    logarithmic_edges,
    section_matrix,
    space_from_count,
    space_from_intercept,
)
from spheru.theory.tessellation import johnson_mehl, poisson_voronoi

LINEAR = {  # class of the spheres: coefficients of the circles of that class and the next larger
    1: (1.0, -0.1547, -0.0357, -0.0130, -0.0061, -0.0033),
    2: (0.5774, -0.1529, -0.0419, -0.0172),
    3: (0.4472, -0.1383, -0.0407),
}
LOGARITHMIC = (1.6461, -0.4561, -0.1162, -0.0415)  # circles of the class, and the next larger


@pytest.mark.parametrize("row", LINEAR, ids=lambda row: f"class-{row}")
def test_linear_coefficients(row):
    inverse = np.linalg.inv(section_matrix(linear_edges(15.0, 15)))
    printed = LINEAR[row]
    found = inverse[row - 1, row - 1 : row - 1 + len(printed)]
    assert found == pytest.approx(printed, abs=1.5e-4)


@pytest.mark.parametrize("row", range(1, 16))
def test_linear_diagonal(row):
    inverse = np.linalg.inv(section_matrix(linear_edges(15.0, 15)))
    assert inverse[row - 1, row - 1] == pytest.approx(1 / math.sqrt(2 * row - 1))


@pytest.mark.parametrize("row", [5, 8])
def test_logarithmic_coefficients_times_the_diameter(row):
    edges = logarithmic_edges(1.0, 12)
    inverse = np.linalg.inv(section_matrix(edges)) * edges[1:, None]
    # class 12 is the largest here; the coefficients belong to one class and the larger ones
    assert inverse[row - 1, row - 1 : row + 3] == pytest.approx(LOGARITHMIC, abs=1e-4)


def test_sections_of_equal_spheres():
    # mean diameter pi D/4, mean area pi D^2/6, CV^2 of the area 0.2, 1 - sqrt(3)/2 below D/2
    edges = np.linspace(0.0, 1.0, 2001)
    share = section_matrix(edges)[:, -1]
    middle = (edges[1:] + edges[:-1]) / 2
    area = math.pi / 4 * middle**2
    assert share.sum() == pytest.approx(1.0)
    assert share @ middle == pytest.approx(math.pi / 4, rel=1e-5)
    assert share @ area == pytest.approx(math.pi / 6, rel=1e-5)
    assert share @ area**2 / (share @ area) ** 2 - 1 == pytest.approx(0.2, rel=1e-4)
    assert share[:1000].sum() == pytest.approx(1 - math.sqrt(3) / 2)


def test_structures_agree_with_theory_at_any_density():
    voronoi = poisson_voronoi(8e12, dimension=3)
    mixed = johnson_mehl(3e9, 2e-6, dimension=3)
    for name, cells in (("voronoi", voronoi), ("johnson-mehl", mixed)):
        by_count = space_from_count(Statistic(value=cells.section_count), name)
        by_intercept = space_from_intercept(Statistic(value=cells.mean_chord), name)
        for found in (by_count, by_intercept):
            assert found.number_density.value == pytest.approx(cells.number_density, rel=1e-9)
            assert found.surface_density.value == pytest.approx(cells.boundary_density, rel=1e-9)
            assert found.mean_volume.value == pytest.approx(cells.mean_size, rel=1e-9)
        if cells.mean_diameter is not None:
            assert found.mean_diameter.value == pytest.approx(cells.mean_diameter, rel=1e-9)
