from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from spheru.measure.intervals import replica_interval, tile_interval, tile_waves


def ratio(total):
    return total[..., 0] / total[..., 1]


def contrasts(tiles):
    """Return orthogonal contrasts of mean square 1 between tiles in no order."""
    order = np.arange(1, tiles)[:, None] * (np.arange(tiles) + 0.5)
    return math.sqrt(2.0) * np.cos(math.pi / tiles * order)


@pytest.mark.parametrize("periodic", [True, False], ids=["periodic", "cut"])
@pytest.mark.parametrize("dimension", [2, 3])
def test_waves_are_orthonormal_and_have_no_mean(dimension, periodic):
    waves = tile_waves(10**6, (1.0,) * dimension, (periodic,) * dimension)
    assert len(waves) == 5**dimension - 1
    assert np.abs(waves.sum(axis=1)).max() < 1e-9
    product = waves @ waves.T / 8**dimension
    assert np.abs(product - np.eye(len(waves))).max() < 1e-9


# edges in spacings; wavelengths: periodic edge/m, cut 2 edge/m; used from 12, or the longest from 8
@pytest.mark.parametrize(
    ("count", "extent", "periodic", "number"),
    [
        pytest.param(0, (1.0, 1.0), True, 0, id="none"),
        pytest.param(63, (1.0, 1.0), True, 0, id="7.9 spacings"),
        pytest.param(65, (1.0, 1.0), True, 4, id="8.1 spacings"),
        pytest.param(290, (1.0, 1.0), True, 8, id="diagonals"),
        pytest.param(145, (1.0, 1.0), False, 5, id="cut: 24, 24, 17, 12, 12"),
        pytest.param(100, (1.0, 1.0), False, 5, id="cut: 20, 20, 14, 10, 10"),
        pytest.param(513, (1.0, 1.0, 1.0), True, 6, id="solid"),
        pytest.param(400, (0.01, 1, 1), (False, True, True), 8, id="film: none across"),
    ],
)
def test_the_number_of_waves_follows_the_number_of_spherulites(count, extent, periodic, number):
    flags = periodic if isinstance(periodic, tuple) else (periodic,) * len(extent)
    assert len(tile_waves(count, extent, flags)) == number


@pytest.mark.parametrize("periodic", [True, False], ids=["periodic", "cut"])
def test_the_standard_error_of_white_noise_is_that_of_its_sum(periodic):
    # sum of 64 tiles of variance 0.01 about 1: standard error 0.8; mean of s^2 over 2000 draws
    rng = np.random.default_rng(3)
    waves = tile_waves(10**6, (1.0, 1.0), (periodic, periodic))
    factor = stats.t.ppf(0.975, len(waves))
    squares = []
    for _ in range(2000):
        found = tile_interval(rng.normal(1.0, 0.1, (64, 1)), lambda t: t[..., 0], waves)
        squares.append((math.log(found.high / found.value) * found.value / factor) ** 2)
    error = np.std(squares) / math.sqrt(len(squares))
    assert np.mean(squares) == pytest.approx(0.64, abs=4 * error)


def test_all_contrasts_of_the_tiles_give_the_plain_standard_error_of_their_mean():
    values = np.array([1.0, 2.0, 4.0, 4.5, 7.0])
    totals = np.column_stack([values, np.ones(5)])
    found = tile_interval(totals, ratio, contrasts(5))
    half = stats.t.ppf(0.975, 4) * values.std(ddof=1) / math.sqrt(5)
    assert math.log(found.high / found.value) * found.value == pytest.approx(half)


def test_an_interval_is_symmetrical_on_a_scale_of_ratios():
    totals = np.column_stack([np.arange(1.0, 10.0), np.ones(9)])
    found = tile_interval(totals, ratio, contrasts(9))
    assert found.low * found.high == pytest.approx(found.value**2)
    assert found.low < found.value < found.high


def test_few_tiles_or_waves_give_a_value_without_an_interval():
    found = tile_interval(np.ones((4, 2)), ratio, np.empty((0, 4)))
    assert found.value == 1.0
    assert math.isnan(found.low)
    assert math.isnan(found.high)


def test_nothing_gives_nan_and_zero_gives_zero():
    assert math.isnan(tile_interval(np.zeros((9, 2)), ratio, contrasts(9)).value)
    totals = np.column_stack([np.zeros(9), np.ones(9)])
    found = tile_interval(totals, ratio, contrasts(9))
    assert (found.value, found.low, found.high) == (0.0, 0.0, 0.0)


@pytest.mark.parametrize("values", [[], [3.0]], ids=["none", "one"])
def test_one_replica_has_no_interval(values):
    found = replica_interval(values)
    assert math.isnan(found.low)
    assert found.value == 3.0 if values else math.isnan(found.value)


def test_replica_intervals_agree_with_scipy():
    values = np.array([9.0, 10.0, 11.5, 10.2])
    found = replica_interval(values)
    expected = stats.ttest_1samp(values, 0.0).confidence_interval(0.95)
    assert (found.low, found.high) == pytest.approx((expected.low, expected.high))
