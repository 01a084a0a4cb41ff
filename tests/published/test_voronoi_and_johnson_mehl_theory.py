"""Mean values of Poisson-Voronoi and Johnson-Mehl tessellations (theory side).

Sources: J. L. Meijering, Philips Res. Rep. 8 (1953) 270 and E. N. Gilbert, Ann. Math. Stat. 33
(1962) 958, both from memory; every value below was found again by quadrature or by counting
Voronoi cells of periodic Poisson points. Units: density 1, or nucleation and growth rate 1.
"""

from __future__ import annotations

import pytest

from spheru.theory.conversion import mean_field
from spheru.theory.tessellation import johnson_mehl, poisson_voronoi, poisson_voronoi_section

PLANE = poisson_voronoi(1.0, dimension=2)
SPACE = poisson_voronoi(1.0, dimension=3)
SECTION = poisson_voronoi_section(1.0)
RATE_PLANE = johnson_mehl(1.0, 1.0, dimension=2)
RATE_SPACE = johnson_mehl(1.0, 1.0, dimension=3)

# name, what the code says, value, tolerance (half a unit of the last digit given, or the
# standard error of the count)
ROWS = [
    ("plane, boundary density", PLANE.boundary_density, 2.0, 0),
    ("plane, perimeter", PLANE.mean_boundary, 4.0, 0),
    ("plane, perimeter counted", PLANE.mean_boundary, 3.9996, 4e-4),
    ("plane, mean chord", PLANE.mean_chord, 0.785398, 5e-7),
    ("plane, area-weighted area", PLANE.size_weighted_mean_size, 1.280176, 5e-7),
    ("space, surface density", SPACE.boundary_density, 2.910436, 5e-7),
    ("space, surface of a cell", SPACE.mean_boundary, 5.82087, 5e-6),
    ("space, triple lines", SPACE.triple_line_density, 5.831860, 5e-7),
    ("space, faces", SPACE.mean_neighbours, 15.53546, 5e-6),
    ("space, mean chord", SPACE.mean_chord, 0.687182, 5e-7),
    ("section, pieces", SECTION.number_density, 1.457965, 5e-7),
    ("section, mean area", SECTION.mean_size, 0.685888, 5e-7),
    ("section, boundary density", SECTION.boundary_density, 2.285851, 5e-7),
    ("section, perimeter", SECTION.mean_boundary, 3.1357, 5e-5),
    ("rate, plane, number", RATE_PLANE.number_density, 0.879357, 5e-7),
    ("rate, plane, mean area", RATE_PLANE.mean_size, 1.137194, 5e-7),
    ("rate, plane, boundary density", RATE_PLANE.boundary_density, 1.750825, 5e-7),
    ("rate, plane, mean chord", RATE_PLANE.mean_chord, 0.897175, 5e-7),
    ("rate, plane, perimeter", RATE_PLANE.mean_boundary, 3.982057, 5e-7),
    ("rate, space, number", RATE_SPACE.number_density, 0.896012, 5e-7),
    ("rate, space, mean volume", RATE_SPACE.mean_size, 1.116056, 5e-7),
    ("rate, space, surface density", RATE_SPACE.boundary_density, 2.479254, 5e-7),
    ("rate, space, surface of a cell", RATE_SPACE.mean_boundary, 5.533973, 5e-7),
    ("rate, space, mean chord", RATE_SPACE.mean_chord, 0.806694, 5e-7),
]


@pytest.mark.parametrize(
    ("found", "value", "tolerance"), [pytest.param(*row[1:], id=row[0]) for row in ROWS]
)
def test_closed_form(found, value, tolerance):
    assert found == pytest.approx(value, abs=max(tolerance, 1e-12))


# what the mean field makes of all nuclei at once, and of a constant rate
@pytest.mark.parametrize(
    ("dimension", "born", "number", "boundary", "lines", "pieces"),
    [
        pytest.param(2, [1.0, 1.0], 1.0, 2.0, None, None, id="plane-at-once"),
        pytest.param(3, [1.0, 1.0], 1.0, 2.910436, 5.831860, 1.457965, id="space-at-once"),
        pytest.param(2, [0.0, 9.0], 0.879357, 1.750825, None, None, id="plane-rate"),
        pytest.param(3, [0.0, 9.0], 0.896012, 2.479254, None, None, id="space-rate"),
    ],
)
def test_mean_field(dimension, born, number, boundary, lines, pieces):
    field = mean_field([0.0, 9.0], born, dimension=dimension)
    assert field.number_density == pytest.approx(number, abs=1e-6)
    assert field.boundary_density == pytest.approx(boundary, abs=1e-6)
    if lines is not None:
        assert field.triple_line_density == pytest.approx(lines, abs=1e-6)
        assert field.section_count == pytest.approx(pieces, abs=1e-6)
