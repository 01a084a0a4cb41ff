from __future__ import annotations

import math

import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.grain_number import (
    count_from_number,
    grain_number,
    grain_size_row,
    intercept_from_number,
    number_from_count,
    number_from_intercept,
)
from spheru.measure.intervals import Statistic


@pytest.mark.parametrize("number", [-3.0, 0.0, 4.25, 17.0])
@pytest.mark.parametrize("scale", ["astm-e112", "iso-643"])
def test_numbers_come_back(number, scale):
    assert number_from_count(count_from_number(number, scale=scale), scale=scale) == pytest.approx(
        number
    )
    assert number_from_intercept(intercept_from_number(number)) == pytest.approx(number)


def test_intervals_keep_their_order():
    count = grain_number(Statistic(value=1e8, low=5e7, high=2e8), of="count")
    intercept = grain_number(Statistic(value=2e-5, low=1e-5, high=4e-5), of="intercept")
    assert count.high - count.value == pytest.approx(1.0)
    assert (intercept.low, intercept.value, intercept.high) == pytest.approx((6.0, 8.0, 10.0))


def test_nothing_counted_gives_no_number():
    number = grain_number(Statistic(value=0.0), of="count")
    assert math.isnan(number.value)
    assert math.isnan(number.low)


@pytest.mark.parametrize("value", [0.0, -1.0, math.nan, math.inf])
def test_values_that_are_not_above_zero_are_refused(value):
    with pytest.raises(ValidityError, match="count per area above 0 m-2"):
        number_from_count(value)
    with pytest.raises(ValidityError, match="mean intercept above 0 m"):
        number_from_intercept(value)


@pytest.mark.parametrize("number", [math.nan, math.inf, 1e4])
def test_numbers_beyond_all_measure_are_refused(number):
    with pytest.raises(ValidityError, match="-500 to 500"):
        grain_size_row(number)


def test_unknown_names_are_answered_with_the_known_ones():
    with pytest.raises(UnknownNameError, match="did you mean 'iso-643'"):
        number_from_count(1.0, scale="iso643")
    with pytest.raises(UnknownNameError, match="count, intercept"):
        grain_number(Statistic(value=1.0), of="area")
