"""Polypropylene under continuous cooling, grown by whole runs, against computed tables.

Growth and sites after E. Koscher, R. Fulchiron, Polymer 43 (2002) 6931 (constants from memory;
driving-force factor 1). The tables were computed from Kolmogorov's model by an independent
program, step-converged to 0.03 K and 0.1 %, and are printed to three digits; the theory of this
package meets them in `test_cooling_and_dose_tables`.

Bands are four standard errors: of a number that of Poisson points at most, of a temperature half
the half width of its 95 % interval. The peak is that of a rate averaged over 15 % of the time from
10 to 90 %, which moves an uneven peak by up to 0.05 K towards the high side.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.config.read import settings_from_mapping
from spheru.run.grow import grow
from tests.published.reference import assert_within, kolmogorov, tile_means

T_M0, ZERO = 483.15, 273.15  # K
PRINTED = 0.05 + 0.03  # K: the last digit, and the step of the tables
AVERAGED = 0.05  # K


def cooled(rate, *nuclei, **sample):
    """Cool a periodic block, some 8000 spherulites unless a size is given."""
    window = sample or {"spherulites": 8000, "pixels_across": 6}
    document = {
        "title": "cooling table",
        "seed": 31,
        "material": {"name": "isotactic-polypropylene-alpha"},
        "cooling": {
            "start": "205 degC",
            "steps": [{"rate": f"{rate:g} K/min", "until": "40 degC"}],
        },
        "nuclei": list(nuclei),
        "sample": {"view": "block", "edges": "periodic"} | window,
    }
    if not nuclei:
        del document["nuclei"]
    return grow(settings_from_mapping(document))


def assert_number(result, number, printed):
    found = len(result.births) / result.image.frame.measure
    slack = printed * number
    assert_within(found, number, number / math.sqrt(len(result.births)), slack, slack)


def assert_temperature(result, name, celsius, averaged=0.0):
    found = result.conversion.intervals[name]
    error = (found.high - found.low) / 4
    assert 0 < error < 0.15
    assert_within(found.value - ZERO, celsius, error, PRINTED, PRINTED + averaged)


def number_of(micrometres):
    """Return the number per volume whose mean volume has this diameter."""
    return 6 / (math.pi * (micrometres * 1e-6) ** 3)


# K/min, peak degC, half conversion degC, spherulites per m3
@pytest.mark.parametrize(
    ("rate", "peak", "half", "number"),
    [
        (1.0, 125.8, 126.4, 1.67e12),
        (5.0, 116.7, 117.4, 6.86e12),
        (20.0, 107.2, 108.0, 3.05e13),
        (100.0, 93.1, 94.0, 2.85e14),
    ],
    ids=lambda k: f"{k:g}",
)
def test_cooling_rate(rate, peak, half, number):
    result = cooled(rate)
    assert_number(result, number, 0.004)  # half of the last of three digits, and 0.1 %
    assert_temperature(result, "peak_temperature", peak, AVERAGED)
    assert_temperature(result, "half_temperature", half)


# seeds per m3 at 10 K/min, peak degC, diameter of the mean volume um
@pytest.mark.parametrize(
    ("seeds", "peak", "diameter"),
    [
        (1e11, 112.3, 51.7),
        (1e12, 112.9, 52.3),
        (1e13, 116.5, 48.1),
        (1e14, 122.2, 26.5),
        (1e15, 127.3, 12.4),
        (1e16, 131.8, 5.8),
    ],
    ids=lambda k: f"{k:g}",
)
def test_dose(seeds, peak, diameter):
    result = cooled(10.0, {"law": "fixed", "density": f"{seeds:g} 1/m^3"})
    assert_number(result, number_of(diameter), 3 * 0.05 / diameter + 0.001)
    assert_temperature(result, "peak_temperature", peak, AVERAGED)


@pytest.fixture(scope="module")
def plain():
    """10 K/min without seeds, in 96 voxels along each axis: some 9000 spherulites."""
    return cooled(10.0, size=["864 um"] * 3, pixel="9 um")


def test_no_dose(plain):
    assert_number(plain, number_of(51.6), 3 * 0.05 / 51.6 + 0.001)
    assert_temperature(plain, "peak_temperature", 112.2, AVERAGED)


def test_ten_times_the_sites():
    result = cooled(10.0, {"law": "material", "factor": 10.0})
    assert_number(result, number_of(31.0), 3 * 0.05 / 31.0 + 0.001)
    assert_temperature(result, "peak_temperature", 117.2, AVERAGED)


def test_conversion_curve(plain):
    """The curve of the run against Kolmogorov's integral over laws written out here."""
    kelvin = np.linspace(478.15, 360.0, 2400)
    growth = 283.0 * np.exp(
        -6270.0 / (8.31446261815324 * (kelvin - 239.15)) - 5.5e5 / (kelvin * (T_M0 - kelvin))
    )
    time = (kelvin[0] - kelvin) * 6.0  # 10 K/min
    length = np.append(0.0, np.cumsum(np.diff(time) * (growth[1:] + growth[:-1]) / 2))
    fraction = kolmogorov(length, np.exp(0.156 * (T_M0 - kelvin) + 15.1), 3)
    chosen = np.searchsorted(fraction, np.linspace(0.02, 0.98, 33))
    found = np.interp(time[chosen], plain.conversion.time, plain.conversion.fraction)
    tiles = np.array([tile_means(plain.image.arrival <= length[k], 4) for k in chosen])
    error = tiles.std(axis=1, ddof=1) / math.sqrt(tiles.shape[1])
    assert error.min() > 0
    assert error.max() < 0.02
    assert (np.abs(found - fraction[chosen]) / error).max() < 4
