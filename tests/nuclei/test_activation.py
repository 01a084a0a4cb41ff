from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.material.site_law import ActivatedSites, ExponentialSites, FixedSites
from spheru.nuclei.activation import Athermal, Homogeneous, Thermal
from tests.nuclei import reference

# down to 380 K, up to 390 K, down to 370 K at 1 K/s
TIME = np.linspace(0.0, 60.0, 601)
CLOCK = reference.clock(
    TIME, temperature=np.interp(TIME, [0, 30, 40, 60], [410.0, 380.0, 390.0, 370.0])
)


def at(density, time):
    return density[np.searchsorted(TIME, time)]


def test_athermal_sites_start_only_at_new_lows():
    density = Athermal(law=ExponentialSites(a=0.1, b=0.0, ceiling=1e9), t_m0=400.0).density(CLOCK)
    assert at(density, 20.0) == pytest.approx(math.exp(1.0))
    assert (density[(TIME >= 30.0) & (TIME <= 50.0)] == at(density, 30.0)).all()
    assert at(density, 60.0) == pytest.approx(math.exp(3.0))
    assert (np.diff(density) >= 0).all()


def test_sites_that_waited_all_start_when_the_wait_is_over():
    sites = Athermal(law=ExponentialSites(a=0.1, b=0.0, ceiling=1e9), t_m0=400.0, factor=2.0)
    density = sites.delayed(25.0).density(CLOCK)
    assert (density[TIME < 25.0] == 0.0).all()
    assert np.array_equal(density[TIME >= 25.0], sites.density(CLOCK)[TIME >= 25.0])
    assert at(density, 25.0) == pytest.approx(2 * math.exp(1.5))


def test_fixed_sites_are_there_at_any_temperature():
    sites = Athermal(law=FixedSites(number=3.0), t_m0=300.0)
    assert (sites.density(CLOCK) == 3.0).all()


def test_a_longer_delay_wins():
    sites = Athermal(law=FixedSites(number=3.0), t_m0=300.0, active_after=7.0)
    assert sites.delayed(5.0).active_after == 7.0
    assert sites.delayed(9.0).active_after == 9.0


def test_rates_count_only_from_the_delay_on():
    rate = Homogeneous(law=reference.constant_rate(2.0))
    assert at(rate.density(CLOCK), 60.0) == pytest.approx(120.0)
    late = rate.delayed(45.0).density(CLOCK)
    assert (late[TIME <= 45.0] == 0.0).all()
    assert at(late, 60.0) == pytest.approx(30.0)


def test_thermal_sites_run_out():
    sites = Thermal(law=reference.constant_rate(0.1), number=50.0)
    density = sites.density(CLOCK)
    assert density == pytest.approx(50 * (1 - np.exp(-0.1 * TIME)))
    late = sites.delayed(20.0).density(CLOCK)
    assert late == pytest.approx(50 * (1 - np.exp(-0.1 * np.maximum(TIME - 20.0, 0.0))))


def test_temperatures_are_those_at_which_a_law_jumps():
    sites = Athermal(law=ActivatedSites(number=1.0, activation=20.0), t_m0=450.0)
    assert set(sites.temperatures()) == {450.0, 430.0}
    assert Homogeneous(law=reference.constant_rate(1.0)).temperatures() == ()


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: Athermal(law=FixedSites(number=1.0), t_m0=0.0), "temperature above 0 K"),
        (lambda: Athermal(law=FixedSites(number=1.0), t_m0=1.0, factor=-1.0), "factor of 0"),
        (lambda: Thermal(law=reference.constant_rate(1.0), number=-1.0), "number of sites"),
    ],
    ids=["melting temperature", "factor", "sites"],
)
def test_bad_numbers_are_refused(make, words):
    with pytest.raises(ValidityError, match=words):
        make()
