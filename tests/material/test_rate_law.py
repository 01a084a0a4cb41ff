import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.errors import UnknownNameError, ValidityError
from spheru.material.nucleation_barrier import (
    block_barrier,
    flat_cap_factor,
    fletcher_factor,
    substrate_barrier,
)
from spheru.material.rate_law import (
    ClassicalNucleation,
    RateLaw,
    SubstrateNucleation,
    induction_time,
    nucleation_rate,
)
from spheru.material.site_law import (
    melt_memory_factor,
)
from spheru.material.thermodynamics import driving_force

MELT = {"u_star": 6270.0, "t_inf": 231.2, "t_m0": 458.2, "heat_of_fusion_volume": 1.96e8}
BLOCK = {"shape": "block", "sigma": 0.0115, "sigma_e": 0.065}
BULK = ClassicalNucleation(prefactor=1e35, **BLOCK, **MELT)
FACE = SubstrateNucleation(prefactor=1e8, sigma_difference=1e-3, **BLOCK, **MELT)
CAP = SubstrateNucleation(shape="sphere", sigma=0.0115, prefactor=1e8, contact_angle=1.0, **MELT)
RATES = {"bulk": BULK, "face": FACE, "cap": CAP}
every_rate_law = pytest.mark.parametrize("law", RATES.values(), ids=RATES)


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


def test_induction_is_endless_at_melting_and_shorter_when_colder():
    with np.errstate(all="raise"):
        times = induction_time([460.0, 450.0, 440.0, 430.0], time=1e6, exponent=4.0, t_m0=450.0)
    assert_allclose(times, [np.inf, np.inf, 100.0, 6.25])
