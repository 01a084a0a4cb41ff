"""Local exponents and nucleating efficiency."""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.measure.intervals import Statistic
from spheru.run.trends import local_exponents


def known(values, half=0.0):
    return [Statistic(value=v, low=v * math.exp(-half), high=v * math.exp(half)) for v in values]


@pytest.mark.parametrize("n", [2, 3, 5])
def test_a_power_law_has_its_exponent_everywhere(n):
    rates = np.geomspace(1.0, 600.0, n) * np.linspace(1.0, 1.3, n)
    found = local_exponents(rates.tolist(), known(50.0 * rates**-0.35))
    assert [s.value for s in found] == pytest.approx([-0.35] * n)


def test_exponents_are_slopes_of_parabolas_through_neighbours():
    rates, sizes = np.array([1.0, 3.0, 4.0, 20.0]), np.array([100.0, 70.0, 66.0, 30.0])
    x, y = np.log(rates), np.log(sizes)
    wanted = [
        np.polyval(np.polyder(np.polyfit(x[first : first + 3], y[first : first + 3], 2)), x[k])
        for k, first in enumerate([0, 0, 1, 1])
    ]
    found = local_exponents(rates.tolist(), known(sizes))
    assert [s.value for s in found] == pytest.approx(wanted)


def test_the_order_of_the_points_does_not_matter():
    rates, sizes = [1.0, 3.0, 4.0, 20.0], known([100.0, 70.0, 66.0, 30.0], 0.02)
    order = [2, 0, 3, 1]
    found = local_exponents([rates[k] for k in order], [sizes[k] for k in order])
    straight = local_exponents(rates, sizes)
    assert found == [straight[k] for k in order]


def test_intervals_cover_the_true_exponent_as_often_as_they_say():
    rng = np.random.default_rng(1)
    rates = np.array([1.0, 2.0, 5.0, 10.0, 20.0])
    true, sigma, trials = 50 * rates**-0.35, 0.02, 400
    hits = 0
    for _ in range(trials):
        seen = true * np.exp(rng.normal(0.0, sigma, rates.size))
        found = local_exponents(rates.tolist(), known(seen, 1.96 * sigma))
        hits += found[2].low <= -0.35 <= found[2].high
    # 95 % with a standard error of 1.1 %
    assert hits / trials == pytest.approx(0.95, abs=4 * 0.011)


@pytest.mark.parametrize(
    ("rates", "sizes"), [([1.0], [5.0]), ([1.0, 2.0], [5.0, 0.0])], ids=["one point", "no size"]
)
def test_where_there_is_no_slope_there_is_no_number(rates, sizes):
    assert all(math.isnan(s.value) for s in local_exponents(rates, known(sizes)))
