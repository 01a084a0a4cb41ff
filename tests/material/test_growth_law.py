import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.errors import ValidityError
from spheru.material.growth_law import (
    BellGrowth,
    Branch,
    GrowthLaw,
    LauritzenHoffmanGrowth,
    TableGrowth,
    bell_growth_rate,
    growth_rate,
    interpolated_growth_rate,
    molar_mass_factor,
    nucleation_constant,
)
from tests.material.reference import lauritzen_hoffman

PARAMETERS = {"g0": 283.0, "kg": 5.5e5, "u_star": 6270.0, "t_inf": 239.15, "t_m0": 483.15}
TWO_LOBES = LauritzenHoffmanGrowth(
    branches=(
        Branch(g0=0.608, kg=2.37e5, low=393.15),
        Branch(g0=2160.0, kg=4.74e5, high=393.15),
    ),
    u_star=6270.0,
    t_inf=303.0,
    t_m0=480.0,
    driving_force_factor=True,
    fitted_range=(373.15, 423.15),
)
BELL = BellGrowth(
    g_max=3e-6,
    t_max=363.0,
    curvature=1.5e-3,
    t_inf=239.15,
    t_m0=483.15,
    fitted_range=(350.0, 400.0),
)
TABLE = TableGrowth(
    temperature=(360.0, 370.0, 390.0, 410.0),
    growth_rate=(1e-6, 2e-6, 8e-7, 2e-8),
    t_inf=240.0,
    t_m0=480.0,
)
LAWS = {"branches": TWO_LOBES, "bell": BELL, "table": TABLE}
every_law = pytest.mark.parametrize("law", LAWS.values(), ids=LAWS)


@pytest.mark.parametrize("factor", [True, False], ids=["with f", "without f"])
def test_growth_rate_equals_the_formula_written_term_by_term(factor):
    temperatures = np.linspace(200.0, 520.0, 321)
    slow = [lauritzen_hoffman(t, *PARAMETERS.values(), factor) for t in temperatures]
    fast = growth_rate(temperatures, **PARAMETERS, driving_force_factor=factor)
    assert_allclose(fast, slow, rtol=1e-13)


@every_law
def test_rate_is_exactly_zero_outside_the_window_and_raises_no_floating_point_flag(law):
    low, high = law.window()
    edges = [law.t_inf, law.t_m0]
    beyond = [law.t_inf - 50.0, law.t_m0 + 50.0, np.nextafter(low, 0.0), np.nextafter(high, 1e3)]
    near = np.nextafter(law.t_inf, 1e3), np.nextafter(law.t_m0, 0.0)
    with np.errstate(all="raise"):
        assert (law.rate(edges + beyond) == 0.0).all()
        assert np.isfinite(law.rate(near)).all()
        assert (law.rate(np.linspace(low + 20.0, high - 20.0, 50)) > 0.0).all()


@every_law
def test_rate_keeps_the_shape_of_its_argument(law):
    assert law.rate(370.0).shape == ()
    assert law.rate(np.full((2, 0), 370.0)).shape == (2, 0)
    assert law.rate(np.full((2, 3), 370.0)).shape == (2, 3)
    assert isinstance(law, GrowthLaw)


@every_law
def test_scaled_multiplies_every_rate(law):
    temperatures = np.linspace(250.0, 480.0, 40)
    assert_allclose(law.scaled(2.5).rate(temperatures), 2.5 * law.rate(temperatures), rtol=1e-12)
    with pytest.raises(ValidityError):
        law.scaled(-1.0)


@every_law
def test_no_shift_changes_nothing(law):
    temperatures = np.linspace(250.0, 480.0, 40)
    assert_allclose(law.shifted(0.0, 0.0).rate(temperatures), law.rate(temperatures), rtol=1e-12)


@every_law
def test_shift_moves_window_and_fitted_range_with_melting_and_glass(law):
    moved = law.shifted(10.0, 4.0)
    assert moved.t_m0 == law.t_m0 + 10.0
    assert moved.t_inf == law.t_inf + 4.0
    for before, after in zip(law.fitted_range, moved.fitted_range, strict=True):
        assert 4.0 <= after - before <= 10.0


@pytest.mark.parametrize("law", [BELL, TABLE], ids=["bell", "table"])
def test_equal_shifts_translate_a_measured_curve(law):
    temperatures = np.linspace(361.0, 409.0, 30)
    assert_allclose(
        law.shifted(7.0, 7.0).rate(temperatures + 7.0), law.rate(temperatures), rtol=1e-9
    )


def test_shifted_law_equals_one_built_with_the_moved_temperatures():
    law = LauritzenHoffmanGrowth(
        branches=(Branch(g0=283.0, kg=5.5e5),),
        u_star=6270.0,
        t_inf=239.15,
        t_m0=483.15,
        driving_force_factor=False,
    )
    moved = growth_rate(
        400.0, g0=283.0, kg=5.5e5, u_star=6270.0, t_inf=247.15, t_m0=494.15,
        driving_force_factor=False,
    )  # fmt: skip
    assert float(law.shifted(11.0, 8.0).rate(400.0)) == pytest.approx(float(moved), rel=1e-12)


def test_branch_limit_belongs_to_the_upper_branch_and_its_jump_is_announced():
    limit = 393.15
    below, above = (float(TWO_LOBES.rate(t)) for t in (np.nextafter(limit, 0.0), limit))
    assert TWO_LOBES.jumps() == ((limit, pytest.approx(above / below, rel=1e-9)),)
    assert TWO_LOBES.breakpoints() == (303.0, limit, 480.0)
    assert above == pytest.approx(
        lauritzen_hoffman(limit, 0.608, 2.37e5, 6270.0, 303.0, 480.0, True), rel=1e-12
    )


def test_continuous_branches_have_a_breakpoint_and_no_jump():
    t, t_m0, kg = 410.0, 460.0, 1.6e5
    ratio = math.exp(kg / (t * (t_m0 - t) * 2 * t / (t_m0 + t)))  # regime III has twice the Kg
    law = LauritzenHoffmanGrowth(
        branches=(Branch(g0=ratio, kg=2 * kg, high=t), Branch(g0=1.0, kg=kg, low=t)),
        u_star=6270.0,
        t_inf=230.0,
        t_m0=t_m0,
        driving_force_factor=True,
    )
    assert law.jumps() == ()
    assert law.breakpoints() == (230.0, t, t_m0)
    assert float(law.rate(t)) == pytest.approx(float(law.rate(np.nextafter(t, 0.0))), rel=1e-9)


def test_branches_that_end_inside_the_window_cut_it():
    law = LauritzenHoffmanGrowth(
        branches=(Branch(g0=1.0, kg=2e5, low=350.0, high=420.0),),
        u_star=6270.0,
        t_inf=230.0,
        t_m0=460.0,
        driving_force_factor=True,
    )
    assert law.window() == (350.0, 420.0)
    assert law.rate([349.9, 420.0]).tolist() == [0.0, 0.0]
    assert (law.rate([350.0, 419.9]) > 0.0).all()


def test_table_is_met_at_its_rows_and_adds_no_maximum():
    assert_allclose(TABLE.rate(TABLE.temperature), TABLE.growth_rate, rtol=1e-12)
    fine = TABLE.rate(np.linspace(360.0, 410.0, 501))
    assert fine.max() <= 2e-6 * (1 + 1e-12)
    assert (np.diff(fine[100:]) <= 0.0).all()  # falls from 370 K on


def test_bell_is_symmetric_and_falls_to_the_stated_share():
    sides = bell_growth_rate([353.0, 373.0], g_max=2.0, t_max=363.0, curvature=0.02)
    assert_allclose(sides, 2.0 * math.exp(-2.0), rtol=1e-14)


def test_molar_mass_factor_follows_its_power():
    assert molar_mass_factor(50.0, reference=100.0, exponent=1.5) == pytest.approx(2**1.5)
    assert molar_mass_factor(70.0, reference=70.0, exponent=1.5) == 1.0


BAD_PARAMETERS = {
    "g0 zero": {"g0": 0.0},
    "kg negative": {"kg": -1.0},
    "u_star negative": {"u_star": -1.0},
    "melting below T_inf": {"t_m0": 200.0},
    "nan": {"t_inf": math.nan},
}


@pytest.mark.parametrize("change", BAD_PARAMETERS.values(), ids=BAD_PARAMETERS)
def test_parameters_out_of_bounds_are_refused(change):
    with pytest.raises(ValidityError, match="growth rate: expected"):
        growth_rate(400.0, **(PARAMETERS | change))


@pytest.mark.parametrize("temperature", [0.0, -3.0, math.nan, math.inf, [400.0, math.nan]])
@every_law
def test_impossible_temperatures_are_refused(law, temperature):
    with pytest.raises(ValidityError, match="absolute temperatures"):
        law.rate(temperature)


def build(**changes):
    return LauritzenHoffmanGrowth(
        **{
            "branches": (Branch(g0=1.0, kg=1e5),),
            "u_star": 6270.0,
            "t_inf": 240.0,
            "t_m0": 480.0,
            "driving_force_factor": True,
        }
        | changes
    )


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: build(branches=()), "at least one branch"),
        (
            lambda: build(
                branches=(Branch(g0=1.0, kg=1e5, high=390.0), Branch(g0=1.0, kg=1e5, low=395.0))
            ),
            "adjoin",
        ),
        (
            lambda: build(
                branches=(Branch(g0=1.0, kg=1e5, high=400.0), Branch(g0=1.0, kg=1e5, low=395.0))
            ),
            "adjoin",
        ),
        (lambda: build(branches=(Branch(g0=1.0, kg=1e5, low=500.0),)), "a branch between"),
        (lambda: build(fitted_range=(400.0, 390.0)), "fitted range"),
        (lambda: build(factor=0.0), "factor"),
        (lambda: Branch(g0=1.0, kg=1e5, low=400.0, high=400.0), "lower end below"),
        (lambda: BellGrowth(g_max=1.0, t_max=500.0, curvature=1.0, t_inf=2.0, t_m0=480.0), "maxi"),
        (
            lambda: TableGrowth(
                temperature=(390.0, 480.0), growth_rate=(1.0, 1.0), t_inf=2.0, t_m0=480.0
            ),
            "between T_inf",
        ),
        (lambda: molar_mass_factor(0.0, reference=1.0, exponent=1.0), "molar_mass"),
    ],
    ids=[
        "no branch", "gap", "overlap", "branch outside", "range reversed", "factor 0",
        "empty branch", "bell outside", "table at melting", "molar mass 0",
    ],
)  # fmt: skip
def test_contradictory_laws_are_refused(make, message):
    with pytest.raises(ValidityError, match=message):
        make()


@pytest.mark.parametrize(
    ("temperatures", "rates"),
    [
        ((390.0,), (1e-6,)),
        ((390.0, 400.0), (1e-6,)),
        ((400.0, 390.0), (1e-6, 1e-7)),
        ((390.0, 390.0), (1e-6, 1e-7)),
        ((390.0, 400.0), (1e-6, 0.0)),
        ((390.0, math.nan), (1e-6, 1e-7)),
    ],
    ids=["one row", "ragged", "falling", "twice the same", "rate 0", "nan"],
)
def test_tables_that_cannot_be_interpolated_are_refused(temperatures, rates):
    with pytest.raises(ValidityError, match="growth table"):
        interpolated_growth_rate(395.0, table_temperature=temperatures, table_rate=rates)


def test_nucleation_constant_refuses_a_surface_energy_of_zero():
    with pytest.raises(ValidityError, match="sigma_e"):
        nucleation_constant(
            n=2, b0=5e-10, sigma=0.01, sigma_e=0.0, t_m0=500.0, heat_of_fusion_volume=2e8
        )
