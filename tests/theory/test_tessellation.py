from __future__ import annotations

import pytest

from spheru.errors import ValidityError
from spheru.theory.conversion import mean_field
from spheru.theory.tessellation import johnson_mehl, poisson_voronoi, poisson_voronoi_section


@pytest.mark.parametrize("dimension", [2, 3])
def test_voronoi_is_the_mean_field_of_nuclei_that_start_together(dimension):
    cells = poisson_voronoi(8.0, dimension=dimension)
    field = mean_field([0.0, 5.0], [8.0, 8.0], dimension=dimension)
    assert field.number_density == cells.number_density
    assert field.boundary_density == pytest.approx(cells.boundary_density, rel=1e-8)
    if dimension == 3:
        assert field.triple_line_density == pytest.approx(cells.triple_line_density, rel=1e-8)
        assert field.section_count == pytest.approx(
            poisson_voronoi_section(8.0).number_density, rel=1e-8
        )


@pytest.mark.parametrize("dimension", [2, 3])
def test_johnson_mehl_is_the_mean_field_of_a_constant_rate(dimension):
    rate, growth = 6.0, 0.5  # births per grown length: 12
    cells = johnson_mehl(rate, growth, dimension=dimension)
    field = mean_field([0.0, 5.0], [0.0, 60.0], dimension=dimension)
    assert field.number_density == pytest.approx(cells.number_density, rel=1e-7)
    assert field.boundary_density == pytest.approx(cells.boundary_density, rel=1e-7)
    if dimension == 3:
        assert field.triple_line_density == pytest.approx(cells.triple_line_density, rel=1e-7)


def test_lengths_scale_with_the_density():
    one, eight = (poisson_voronoi(n, dimension=3) for n in (1.0, 8.0))
    assert eight.mean_diameter == pytest.approx(one.mean_diameter / 2)
    assert eight.diameter_sd == pytest.approx(one.diameter_sd / 2)
    assert eight.mean_chord == pytest.approx(one.mean_chord / 2)
    assert eight.section_count == pytest.approx(4 * one.section_count)
    assert eight.mean_neighbours == one.mean_neighbours


def test_what_is_not_known_is_none():
    assert johnson_mehl(1.0, 1.0, dimension=2).size_weighted_mean_size is None
    assert poisson_voronoi(1.0, dimension=2).section_count is None


@pytest.mark.parametrize(
    ("call", "said"),
    [
        pytest.param(lambda: poisson_voronoi(0.0, dimension=2), "density above 0", id="none"),
        pytest.param(lambda: poisson_voronoi(1.0, dimension=1), "2 or 3", id="line"),
        pytest.param(lambda: johnson_mehl(1.0, 0.0, dimension=2), "growth rate", id="still"),
        pytest.param(lambda: johnson_mehl(-1.0, 1.0, dimension=2), "nucleation rate", id="rate"),
        pytest.param(lambda: johnson_mehl(1.0, 1.0, dimension=4), "2 or 3", id="dimension"),
    ],
)
def test_faults_are_named(call, said):
    with pytest.raises(ValidityError, match=said):
        call()
