import math

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import ndtr

from spheru.errors import UnknownNameError, ValidityError
from spheru.material.nucleation_law import (
    ActivatedSites,
    ClassicalNucleation,
    ExponentialSites,
    FixedSites,
    RateLaw,
    SiteLaw,
    SubstrateNucleation,
    TableSites,
    block_barrier,
    flat_cap_factor,
    fletcher_factor,
    induction_time,
    melt_memory_factor,
    nucleation_rate,
    sphere_barrier,
    substrate_barrier,
)
from spheru.material.thermodynamics import critical_radius, driving_force
from tests.material.reference import cap_on_sphere

SITES = {
    "fixed": FixedSites(number=1e12),
    "exponential": ExponentialSites(a=0.156, b=15.1, ceiling=1e16),
    "table": TableSites(undercooling=(50.0, 70.0, 75.0, 90.0), number=(1e9, 1e11, 1e11, 4e12)),
    "agent": ActivatedSites(number=1e13, activation=20.0, spread=3.0),
    "agent step": ActivatedSites(number=1e13, activation=20.0),
    "agent at once": ActivatedSites(number=1e13, activation=0.0),
}
every_site_law = pytest.mark.parametrize("law", SITES.values(), ids=SITES)
MELT = {"u_star": 6270.0, "t_inf": 231.2, "t_m0": 458.2, "heat_of_fusion_volume": 1.96e8}
BLOCK = {"shape": "block", "sigma": 0.0115, "sigma_e": 0.065}
BULK = ClassicalNucleation(prefactor=1e35, **BLOCK, **MELT)
FACE = SubstrateNucleation(prefactor=1e8, sigma_difference=1e-3, **BLOCK, **MELT)
CAP = SubstrateNucleation(shape="sphere", sigma=0.0115, prefactor=1e8, contact_angle=1.0, **MELT)
RATES = {"bulk": BULK, "face": FACE, "cap": CAP}
every_rate_law = pytest.mark.parametrize("law", RATES.values(), ids=RATES)


@every_site_law
def test_sites_never_fall_with_undercooling_and_keep_the_shape(law):
    grid = np.linspace(-10.0, 200.0, 2101)
    with np.errstate(all="raise", under="ignore"):
        density = law.density(grid)
    assert (np.diff(density) >= -1e-15 * density[1:]).all()
    assert law.density(10.0).shape == ()
    assert law.density(np.zeros((2, 0))).shape == (2, 0)
    assert isinstance(law, SiteLaw)


@every_site_law
def test_no_site_starts_without_undercooling_but_the_fixed_ones(law):
    at_rest = law.density([-5.0, 0.0])
    assert_allclose(at_rest, 1e12 if isinstance(law, FixedSites) else 0.0)


@every_site_law
def test_scaled_multiplies_every_number(law):
    grid = np.linspace(-10.0, 200.0, 211)
    assert_allclose(law.scaled(3.0).density(grid), 3.0 * law.density(grid), rtol=1e-12)
    with pytest.raises(ValidityError):
        law.scaled(-1.0)


@every_site_law
def test_number_is_continuous_but_at_the_stated_steps(law):
    fine = np.arange(0.005, 160.0, 0.01)
    slope = np.diff(law.density(fine)) / np.max(law.density(fine))
    jumps = fine[1:][slope > 0.05]
    assert all(min(abs(jump - step) for step in law.steps()) < 0.02 for jump in jumps)


def test_exponential_law_meets_its_ceiling_exactly_at_the_stated_undercooling():
    law = SITES["exponential"]
    start, full = law.steps()
    assert start == 0.0
    assert full == pytest.approx((16 * math.log(10) - 15.1) / 0.156)
    assert float(law.density(full - 1e-3)) < 1e16
    assert law.density([full + 1e-3, 1e6]).tolist() == [1e16, 1e16]


def test_ceiling_below_the_first_sites_leaves_one_step():
    law = ExponentialSites(a=0.1, b=15.0, ceiling=1e6)
    assert law.steps() == (0.0,)
    assert float(law.density(1.0)) == 1e6


def test_table_of_sites_is_met_at_its_rows():
    law = SITES["table"]
    assert_allclose(law.density(law.undercooling), law.number, rtol=1e-12)
    assert law.fitted_range == (50.0, 90.0)


def test_activation_is_the_normal_distribution():
    grid = np.linspace(0.5, 60.0, 120)
    expected = 1e13 * ndtr((grid - 20.0) / 3.0)
    assert_allclose(SITES["agent"].density(grid), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: FixedSites(number=-1.0), "number"),
        (lambda: ExponentialSites(a=0.0, b=15.0, ceiling=1e14), "a finite"),
        (lambda: ExponentialSites(a=0.1, b=math.inf, ceiling=1e14), "finite b"),
        (lambda: ExponentialSites(a=0.1, b=15.0, ceiling=0.0), "ceiling"),
        (lambda: ExponentialSites(a=0.1, b=1.0, ceiling=1.0, fitted_range=(9.0, 5.0)), "range"),
        (lambda: TableSites(undercooling=(1.0, 2.0), number=(1e9, 1e8)), "never fall"),
        (lambda: TableSites(undercooling=(0.0, 2.0), number=(1e9, 1e9)), "above 0"),
        (lambda: TableSites(undercooling=(1.0,), number=(1e9,)), "2 rows"),
        (lambda: ActivatedSites(number=1.0, activation=-1.0), "activation"),
        (lambda: ActivatedSites(number=1.0, activation=1.0, spread=math.nan), "spread"),
        (lambda: FixedSites(number=1.0).density(math.nan), "undercooling"),
        (lambda: SITES["exponential"].scaled(0.0), "factor"),
    ],
    ids=[
        "negative", "slope 0", "b inf", "no ceiling", "range", "falling", "row at 0", "one row",
        "activation", "spread", "undercooling", "factor",
    ],
)  # fmt: skip
def test_site_laws_refuse_numbers_out_of_bounds(make, message):
    with pytest.raises(ValidityError, match=message):
        make()


@pytest.mark.parametrize("m", [-1.0, -0.6, 0.0, 0.3, 0.9])
@pytest.mark.parametrize("x", [1e-3, 0.2, 1.0, 3.0, 40.0])
def test_fletcher_factor_equals_the_geometry_of_the_lens(m, x):
    assert float(fletcher_factor(m, x)) == pytest.approx(cap_on_sphere(m, x), abs=1e-9)


def test_fletcher_factor_has_its_limits():
    m = np.linspace(-1.0, 1.0, 21)
    assert_allclose(fletcher_factor(m, 0.0), 1.0, atol=1e-15)
    assert_allclose(fletcher_factor(m, 1e9), flat_cap_factor(m), atol=1e-8)
    assert_allclose(fletcher_factor(m, 1e5), flat_cap_factor(m), atol=2e-5)
    assert_allclose(fletcher_factor(-1.0, [0.1, 1.0, 50.0]), 1.0, atol=1e-10)


def test_full_wetting_has_no_barrier_on_a_particle_above_the_critical_size():
    with np.errstate(all="raise"):
        assert_allclose(fletcher_factor(1.0, [1.0, 1.5, 1e4]), 0.0, atol=1e-12)
    x = np.array([0.25, 0.5])
    assert_allclose(fletcher_factor(1.0, x), 1 + 2 * x**3 - 3 * x**2, rtol=1e-13)


def test_larger_particle_is_the_better_substrate():
    assert (np.diff(fletcher_factor(0.4, np.geomspace(0.01, 1e4, 200))) < 0.0).all()


def test_substrate_that_does_nothing_gives_the_barrier_of_the_bulk():
    assert float(
        substrate_barrier(2e7, sigma=0.01, sigma_e=0.06, sigma_difference=0.02)
    ) == pytest.approx(float(block_barrier(2e7, sigma=0.01, sigma_e=0.06)), rel=1e-14)
    assert float(flat_cap_factor(-1.0)) == 1.0


def test_barrier_of_a_sphere_is_a_third_of_the_surface_energy_of_the_critical_nucleus():
    radius = float(critical_radius(2e7, sigma=0.01))
    expected = 4.0 * math.pi * radius**2 * 0.01 / 3.0
    assert float(sphere_barrier(2e7, sigma=0.01)) == pytest.approx(expected, rel=1e-13)


@every_rate_law
def test_rate_is_exactly_zero_at_and_beyond_both_ends(law):
    with np.errstate(all="raise"):
        assert (law.rate([100.0, 231.2, 458.2, 500.0]) == 0.0).all()
        assert np.isfinite(law.rate([np.nextafter(231.2, 300), np.nextafter(458.2, 0)])).all()
    assert float(law.rate(340.0)) > 0.0
    assert law.rate(np.full((2, 3), 340.0)).shape == (2, 3)
    assert law.breakpoints() == (231.2, 458.2)
    assert isinstance(law, RateLaw)


def test_rate_is_the_product_of_its_parts():
    force = driving_force(360.0, t_m0=458.2, heat_of_fusion_volume=1.96e8)
    barrier = float(block_barrier(force, sigma=0.0115, sigma_e=0.065))
    transport = math.exp(-6270.0 / (8.31446261815324 * (360.0 - 231.2)))
    expected = 1e35 * transport * math.exp(-barrier / (1.380649e-23 * 360.0))
    assert float(BULK.rate(360.0)) == pytest.approx(expected, rel=1e-11)


def test_large_particle_acts_like_a_flat_face_and_a_tiny_one_like_none():
    cap = {"shape": "sphere", "sigma": 0.0115, "prefactor": 1e8, "contact_angle": 1.0, **MELT}
    flat, large = (
        SubstrateNucleation(**cap, particle_radius=radius).rate(360.0) for radius in (None, 1e-3)
    )
    assert float(large) == pytest.approx(float(flat), rel=1e-3)
    tiny = SubstrateNucleation(**cap, particle_radius=1e-13).rate(360.0)
    free = ClassicalNucleation(shape="sphere", sigma=0.0115, prefactor=1e8, **MELT).rate(360.0)
    assert float(tiny) == pytest.approx(float(free), rel=1e-3)


def test_full_wetting_still_needs_undercooling():
    wet = SubstrateNucleation(
        shape="sphere", sigma=0.0115, prefactor=1e8, contact_angle=0.0, **MELT
    )
    assert wet.rate([458.2, 460.0]).tolist() == [0.0, 0.0]
    assert float(wet.rate(458.0)) > 0.0


CAP_ONLY = {"shape": "sphere", "sigma": 0.0115, "prefactor": 1e8, **MELT}
BLOCK_ONLY = {"prefactor": 1e8, **BLOCK, **MELT}


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: SubstrateNucleation(**CAP_ONLY), "needs contact_angle"),
        (lambda: SubstrateNucleation(**CAP_ONLY, contact_angle=4.0), "0 to pi"),
        (lambda: SubstrateNucleation(**CAP_ONLY, contact_angle=-0.1), "contact_angle"),
        (lambda: SubstrateNucleation(**CAP_ONLY, contact_angle=1.0, sigma_e=0.1), "no sigma_e"),
        (
            lambda: SubstrateNucleation(**CAP_ONLY, contact_angle=1.0, sigma_difference=0.1),
            "no sigma_difference",
        ),
        (
            lambda: SubstrateNucleation(**CAP_ONLY, contact_angle=1.0, particle_radius=0.0),
            "particle_radius",
        ),
        (lambda: SubstrateNucleation(**BLOCK_ONLY), "needs sigma_difference"),
        (
            lambda: SubstrateNucleation(**BLOCK_ONLY, sigma_difference=1e-3, contact_angle=1.0),
            "no contact_angle",
        ),
        (
            lambda: SubstrateNucleation(**BLOCK_ONLY, sigma_difference=1e-3, particle_radius=1e-6),
            "no particle_radius",
        ),
        (lambda: ClassicalNucleation(**CAP_ONLY, sigma_e=0.1), "no sigma_e"),
        (lambda: ClassicalNucleation(**(BLOCK_ONLY | {"sigma_e": None})), "needs sigma_e"),
        (lambda: ClassicalNucleation(**(BLOCK_ONLY | {"t_m0": 200.0})), "above T_inf"),
        (lambda: ClassicalNucleation(**(BLOCK_ONLY | {"prefactor": 0.0})), "prefactor"),
    ],
    ids=[
        "no angle", "angle above pi", "angle below 0", "sphere, folds", "sphere, difference",
        "radius 0", "no difference", "block with angle", "block with radius", "bulk folds",
        "bulk block without", "melting below", "prefactor 0",
    ],
)  # fmt: skip
def test_rate_laws_refuse_a_mix_of_shapes_and_bad_numbers(make, message):
    with pytest.raises(ValidityError, match=message):
        make()


def test_unknown_shape_is_answered_with_the_known_ones():
    with pytest.raises(UnknownNameError, match="block, sphere"):
        ClassicalNucleation(**(BLOCK_ONLY | {"shape": "cube"}))


@pytest.mark.parametrize(
    "call",
    [
        lambda: nucleation_rate(400.0, prefactor=1.0, barrier=-1.0, u_star=0.0, t_inf=200.0),
        lambda: nucleation_rate(400.0, prefactor=1.0, barrier=math.nan, u_star=0.0, t_inf=200.0),
        lambda: nucleation_rate(-1.0, prefactor=1.0, barrier=1.0, u_star=0.0, t_inf=200.0),
        lambda: fletcher_factor(1.1, 1.0),
        lambda: fletcher_factor(0.5, -1.0),
        lambda: fletcher_factor(0.5, math.inf),
        lambda: flat_cap_factor(-1.1),
        lambda: block_barrier(1e7, sigma=0.0, sigma_e=1.0),
        lambda: substrate_barrier(1e7, sigma=0.1, sigma_e=1.0, sigma_difference=-1e-3),
        lambda: induction_time(400.0, time=0.0, exponent=3.0, t_m0=450.0),
        lambda: melt_memory_factor(450.0, -1.0, slope=0.1, erase_temperature=480.0, time=1.0),
        lambda: melt_memory_factor(300.0, 1.0, slope=1.0, erase_temperature=480.0, time=1.0),
    ],
    ids=[
        "barrier", "barrier nan", "temperature", "m", "x", "x inf", "m flat", "sigma", "difference",
        "induction", "hold", "melt far too cold",
    ],
)  # fmt: skip
def test_functions_refuse_numbers_out_of_bounds(call):
    with pytest.raises(ValidityError, match="expected"):
        call()


def test_memory_makes_log_sites_linear_in_the_melt_temperature_and_fades_with_the_hold():
    memory = {"slope": 0.3, "erase_temperature": 480.0, "time": 100.0}
    assert math.log(melt_memory_factor(470.0, 0.0, **memory)) == pytest.approx(3.0)
    assert math.log(melt_memory_factor(475.0, 0.0, **memory)) == pytest.approx(1.5)
    surplus = melt_memory_factor(470.0, 0.0, **memory) - 1.0
    assert melt_memory_factor(470.0, 100.0, **memory) - 1.0 == pytest.approx(surplus / math.e)
    assert melt_memory_factor(480.0, 0.0, **memory) == 1.0


def test_induction_is_endless_at_melting_and_shorter_when_colder():
    with np.errstate(all="raise"):
        times = induction_time([460.0, 450.0, 440.0, 430.0], time=1e6, exponent=4.0, t_m0=450.0)
    assert_allclose(times, [np.inf, np.inf, 100.0, 6.25])
