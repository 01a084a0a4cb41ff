import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.material.nucleation_barrier import (
    block_barrier,
    flat_cap_factor,
    fletcher_factor,
    sphere_barrier,
    substrate_barrier,
)
from spheru.material.thermodynamics import critical_radius
from tests.material.reference import cap_on_sphere


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
