"""Polypropylene under continuous cooling: rates, and seeds on top of its own sites.

Growth and sites after E. Koscher, R. Fulchiron, Polymer 43 (2002) 6931 (constants from memory;
driving-force factor 1). The tables were computed from Kolmogorov's model by an independent
program, step-converged to 0.03 K and 0.1 %; they are printed to three digits.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.theory.conversion import mean_field
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Ramp

T_M0 = 483.15  # K


def growth(temperature):
    grows = (temperature > 239.15) & (temperature < T_M0)
    t = np.where(grows, temperature, 400.0)
    rate = 283.0 * np.exp(-6270.0 / (8.31446261815324 * (t - 239.15)) - 5.5e5 / (t * (T_M0 - t)))
    return np.where(grows, rate, 0.0)


def cooled(rate, seeds=0.0):
    """Return peak [degC], half [degC], spherulites [m^-3], diameter of the mean volume [um]."""
    history = History(segments=(Ramp.until(start=478.15, end=313.15, rate=rate / 60),))
    clock = Clock.from_history(history, growth, breakpoints=(T_M0,))
    sites = np.exp(0.156 * (T_M0 - clock.lowest_temperature) + 15.1)
    field = mean_field(clock.grown_length, sites + seeds, dimension=3)
    assert field.fraction_final == pytest.approx(1.0, abs=1e-9)
    slope = np.gradient(field.fraction, clock.temperature)
    peak = clock.temperature[np.argmin(slope)] - 273.15
    half = float(clock.temperature_at(clock.time_at(field.grown_length_at(0.5)))) - 273.15
    number = field.number_density
    return peak, half, number, 1e6 * (6 / (math.pi * number)) ** (1 / 3)


# K/min, peak degC, half conversion degC, spherulites per m3, diameter um
@pytest.mark.parametrize(
    ("rate", "peak", "half", "number", "diameter"),
    [
        (1.0, 125.8, 126.4, 1.67e12, 104.6),
        (5.0, 116.7, 117.4, 6.86e12, 65.3),
        (20.0, 107.2, 108.0, 3.05e13, 39.7),
        (100.0, 93.1, 94.0, 2.85e14, 18.9),
    ],
    ids=lambda k: f"{k:g}",
)
def test_cooling_rate(rate, peak, half, number, diameter):
    found = cooled(rate)
    assert found[0] == pytest.approx(peak, abs=0.3)
    assert found[1] == pytest.approx(half, abs=0.1)
    assert found[2] == pytest.approx(number, rel=0.01)
    assert found[3] == pytest.approx(diameter, rel=0.01)


# seeds per m3 at 10 K/min, peak degC, diameter um
DOSES = [
    (0.0, 112.2, 51.6),
    (1e11, 112.3, 51.7),
    (1e12, 112.9, 52.3),
    (1e13, 116.5, 48.1),
    (1e14, 122.2, 26.5),
    (1e15, 127.3, 12.4),
    (1e16, 131.8, 5.8),
]


@pytest.mark.parametrize(("seeds", "peak", "diameter"), DOSES, ids=lambda k: f"{k:g}")
def test_dose(seeds, peak, diameter):
    found = cooled(10.0, seeds)
    assert found[0] == pytest.approx(peak, abs=0.3)
    assert found[3] == pytest.approx(diameter, rel=0.01)


def test_traces_of_seeds_make_larger_spherulites():
    """Early seeds raise the temperature of conversion and so keep other sites asleep."""
    assert cooled(10.0, 1e12)[3] > cooled(10.0)[3] * 1.01


def test_ten_times_the_sites():
    """10 K/min with ten times the sites: 117.2 degC and 31.0 um (computed)."""
    history = History(segments=(Ramp.until(start=478.15, end=313.15, rate=10 / 60),))
    clock = Clock.from_history(history, growth)
    sites = 10 * np.exp(0.156 * (T_M0 - clock.lowest_temperature) + 15.1)
    field = mean_field(clock.grown_length, sites, dimension=3)
    peak = clock.temperature[np.argmin(np.gradient(field.fraction, clock.temperature))] - 273.15
    assert peak == pytest.approx(117.2, abs=0.3)
    assert 1e6 * (6 / (math.pi * field.number_density)) ** (1 / 3) == pytest.approx(31.0, rel=0.01)
