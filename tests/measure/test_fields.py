from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.measure.fields import FieldMean, split_fields
from tests.measure.reference import image_of


# Student's factors (memory): n = 5 2.776, 6 2.571, 7 2.447, 8 2.365, 9 2.306, 10 2.262
@pytest.mark.parametrize(
    ("n", "t"), [(5, 2.776), (6, 2.571), (7, 2.447), (8, 2.365), (9, 2.306), (10, 2.262)]
)
def test_relative_accuracy_is_student_by_root_n(n, t):
    values = tuple(100.0 + np.random.default_rng(n).normal(size=n))
    mean = FieldMean(values=values)
    expected = t * np.std(values, ddof=1) / math.sqrt(n) / np.mean(values)
    assert mean.relative_accuracy == pytest.approx(expected, rel=2e-4)


def test_one_field_has_no_accuracy_and_asks_for_no_number():
    mean = FieldMean(values=(3.0,))
    assert math.isnan(mean.relative_accuracy)
    assert mean.fields_needed(0.1) is None


def test_fields_needed_is_the_smallest_number_that_does():
    from scipy.stats import t

    mean = FieldMean(values=(8.0, 9.0, 10.0, 12.0))
    spread = np.std(mean.values, ddof=1) / np.mean(mean.values)
    for accuracy in (0.5, 0.1, 0.02):
        n = mean.fields_needed(accuracy)
        reached = [t.ppf(0.975, k - 1) * spread / math.sqrt(k) <= accuracy for k in (n - 1, n)]
        assert reached == [False, True]


def test_equal_fields_need_two():
    assert FieldMean(values=(4.0, 4.0, 4.0)).fields_needed(0.1) == 2


def test_an_accuracy_out_of_reach_gives_no_number():
    assert FieldMean(values=(1.0, 100.0, 3.0)).fields_needed(1e-6) is None


def test_fields_hold_about_fifty_each_and_are_no_more_than_25():
    few = np.arange(1, 401).reshape(20, 20).repeat(2, 0).repeat(2, 1)
    assert len(split_fields(image_of(few))) == 4  # 8 of 50 would fit: 2 x 2
    assert len(split_fields(image_of(np.arange(1, 10001).reshape(100, 100)))) == 25
    assert len(split_fields([image_of(few)] * 3, split=2)) == 12


@pytest.mark.parametrize("split", [0, 11])
def test_a_split_that_does_not_fit_is_refused(split):
    with pytest.raises(ValidityError, match="does not fit"):
        split_fields(image_of(np.ones((10, 12), dtype=int)), split=split)


def test_volumes_nothing_and_mixed_pixels_are_refused():
    with pytest.raises(ValidityError, match="got a volume; take sections"):
        split_fields(image_of(np.ones((2, 2, 2), dtype=int)))
    with pytest.raises(ValidityError, match="at least one picture"):
        split_fields([])
    plane = np.ones((2, 2), dtype=int)
    with pytest.raises(ValidityError, match="one pixel size"):
        split_fields([image_of(plane), image_of(plane, pixel=2.0)])


def test_an_accuracy_of_zero_is_refused():
    with pytest.raises(ValidityError, match="above 0"):
        FieldMean(values=(1.0, 2.0)).fields_needed(0.0)
