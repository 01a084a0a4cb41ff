import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.errors import ValidityError
from spheru.material.thermodynamics import (
    critical_radius,
    driving_force,
    gibbs_thomson_temperature,
    lamellar_thickness,
)

MELT = {"t_m0": 480.0, "heat_of_fusion_volume": 2e8}


def test_driving_force_changes_sign_at_the_melting_temperature():
    force = driving_force([470.0, 480.0, 490.0], **MELT)
    assert force[0] > 0.0
    assert force[1] == 0.0
    assert force[2] < 0.0


def test_factor_is_1_at_melting_and_lowers_the_force_below():
    temperatures = np.array([479.999, 440.0, 400.0])
    ratio = driving_force(temperatures, **MELT) / driving_force(
        temperatures, **MELT, driving_force_factor=False
    )
    assert_allclose(ratio, [1.0, 880 / 920, 800 / 880], rtol=2e-6)


def test_sizes_are_infinite_without_a_driving_force():
    with np.errstate(all="raise"):
        assert critical_radius([0.0, -1e6], sigma=0.01).tolist() == [np.inf, np.inf]
        assert lamellar_thickness([0.0, -1e6], sigma_e=0.01).tolist() == [np.inf, np.inf]


def test_lamella_of_critical_thickness_melts_at_the_temperature_it_formed_at():
    force = driving_force(430.0, **MELT, driving_force_factor=False)
    thickness = lamellar_thickness(force, sigma_e=0.06)
    melting = gibbs_thomson_temperature(thickness, sigma_e=0.06, **MELT)
    assert float(melting) == pytest.approx(430.0, rel=1e-12)


@pytest.mark.parametrize(
    "call",
    [
        lambda: driving_force(-1.0, **MELT),
        lambda: driving_force(400.0, t_m0=480.0, heat_of_fusion_volume=0.0),
        lambda: critical_radius(1e7, sigma=0.0),
        lambda: critical_radius(np.nan, sigma=0.01),
        lambda: lamellar_thickness(1e7, sigma_e=-1.0),
        lambda: gibbs_thomson_temperature(5e-10, sigma_e=0.06, **MELT),
        lambda: gibbs_thomson_temperature(np.nan, sigma_e=0.06, **MELT),
    ],
    ids=["temperature", "heat", "sigma", "force nan", "sigma_e", "too thin", "thickness nan"],
)
def test_numbers_out_of_bounds_are_refused(call):
    with pytest.raises(ValidityError, match="expected"):
        call()
