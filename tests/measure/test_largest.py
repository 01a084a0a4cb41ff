from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.measure.grain_number import number_from_count
from spheru.measure.largest import largest_grain


def test_a_few_grains_far_coarser_than_the_rest_are_what_it_is_for():
    areas = np.concatenate([np.full(1000, 1e-10), [20e-10, 12e-10]])
    largest = largest_grain(areas, frame_area=areas.sum())
    assert (largest.outliers, largest.applies) == (2, True)
    assert largest.share == pytest.approx(32 / 1032)
    assert largest.number == pytest.approx(number_from_count(1 / 20e-10))
    assert largest.rest_number - largest.number == pytest.approx(math.log2(20))
    assert "2 of 1002 grains" in largest.reason


def test_three_numbers_are_eight_times_the_area():
    for ratio, applies in ((7.9, False), (8.0, True)):
        areas = np.concatenate([np.full(1000, 1e-10), [ratio * 1e-10]])
        assert largest_grain(areas, frame_area=areas.sum()).applies is applies


def test_too_many_coarse_grains_are_a_structure_of_two_sizes():
    areas = np.concatenate([np.full(1000, 1e-10), np.full(10, 20e-10)])
    largest = largest_grain(areas, frame_area=areas.sum())
    assert (largest.outliers, largest.applies) == (10, False)
    assert "over 5 %" in largest.reason


def test_equal_grains_have_no_outlier():
    largest = largest_grain(np.full(50, 1e-10), frame_area=60e-10)
    assert (largest.outliers, largest.applies) == (0, False)
    assert "no grain" in largest.reason


@pytest.mark.parametrize("areas", [[], [0.0, 1.0], [math.nan], [-1.0]])
def test_areas_that_are_none_are_refused(areas):
    with pytest.raises(ValidityError, match="above 0 m2"):
        largest_grain(areas, frame_area=10.0)


@pytest.mark.parametrize("frame_area", [1.0, math.nan])
def test_grains_that_do_not_fit_are_refused(frame_area):
    with pytest.raises(ValidityError, match="expected the areas in m2"):
        largest_grain([1.0, 1.0], frame_area=frame_area)
