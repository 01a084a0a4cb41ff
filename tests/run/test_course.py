"""Landmarks of crystallisation curves whose landmarks are known."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.run.course import Course, landmarks, time_origin
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Hold, Ramp

T_M0 = 450.0


def steady(temperature):
    return np.full(np.shape(temperature), 1e-7)


def cooling_clock(rate=0.5):
    ramp = Ramp.until(start=460.0, end=360.0, rate=rate)
    return Clock.from_history(History(segments=(ramp,)), steady)


def gaussian_course(clock, peaks):
    """Return the course whose d(fraction)/dT is a sum of (centre, width, share)."""
    time = np.linspace(0.0, clock.history.duration, 20001)
    temperature = clock.temperature_at(time)
    rate = sum(
        share * np.exp(-((temperature - centre) ** 2) / (2 * width**2)) / width
        for centre, width, share in peaks
    )
    fraction = np.concatenate([[0.0], np.cumsum((rate[1:] + rate[:-1]) / 2)])
    return Course(time=time, fraction=fraction / fraction[-1])


@pytest.mark.parametrize("smoothing", [0.01, 0.15])
def test_peak_and_half_of_a_symmetric_curve_stand_at_its_centre(smoothing):
    clock = cooling_clock()
    marks = landmarks(gaussian_course(clock, [(400.0, 3.0, 1.0)]), clock, T_M0, smoothing=smoothing)
    assert_allclose(marks.peak_temperature, 400.0, atol=0.05)
    assert_allclose(marks.half_temperature, 400.0, atol=0.02)
    assert_allclose(marks.half_time, (T_M0 - 400.0) / 0.5, atol=0.05)
    assert_allclose(marks.mean_time, (T_M0 - 400.0) / 0.5, atol=0.05)
    assert marks.half_time_from == "crossing of the equilibrium melting temperature"
    assert len(marks.peaks) == 1


def test_onset_of_a_gaussian_peak_is_where_its_fitted_tangent_meets_zero():
    # the chord from 30 to 70 % of exp(-x^2/2) runs from x = 1.5518 to 0.8446: slope 0.5656 per
    # width; from 0.7 at 0.8446 it meets zero at 0.8446 + 0.7/0.5656 = 2.082 (the least-squares line
    # bends a little from the chord)
    clock = cooling_clock()
    marks = landmarks(gaussian_course(clock, [(400.0, 3.0, 1.0)]), clock, T_M0, smoothing=0.01)
    assert_allclose(marks.onset_temperature, 400.0 + 2.082 * 3.0, atol=0.15)


def test_every_clear_maximum_is_listed_the_largest_first():
    clock = cooling_clock()
    course = gaussian_course(clock, [(410.0, 2.0, 1.0), (390.0, 2.0, 0.4), (375.0, 2.0, 0.05)])
    marks = landmarks(course, clock, T_M0, smoothing=0.02)
    assert [round(t) for t, _ in marks.peaks] == [410, 390]
    assert_allclose(marks.peaks[1][1], 0.4, rtol=0.03)


def test_noise_that_does_not_stand_out_makes_no_maximum():
    clock = cooling_clock()
    smooth = gaussian_course(clock, [(400.0, 3.0, 1.0)])
    random = np.random.default_rng(5)
    steps = np.diff(smooth.fraction, prepend=0.0) * random.uniform(0.5, 1.5, len(smooth.time))
    noisy = Course(time=smooth.time, fraction=np.cumsum(steps) / steps.sum())
    assert len(landmarks(noisy, clock, T_M0, smoothing=0.15).peaks) == 1


def test_a_rate_that_still_rises_at_the_end_has_no_peak():
    clock = cooling_clock()
    whole = gaussian_course(clock, [(400.0, 3.0, 1.0)])
    early = clock.temperature_at(whole.time) > 402.0
    stopped = Course(time=whole.time[early], fraction=whole.fraction[early])
    marks = landmarks(stopped, clock, T_M0, smoothing=0.05)
    assert marks.peak_temperature is None
    assert marks.onset_temperature is None
    assert marks.half_temperature > 402.0


def test_half_time_in_a_hold_counts_from_its_start():
    segments = (
        Ramp.until(start=460.0, end=400.0, rate=1.0),
        Hold(temperature=400.0, duration=500.0),
    )
    clock = Clock.from_history(History(segments=segments), steady)
    course = Course(
        time=np.array([0.0, 60.0, 160.0, 560.0]), fraction=np.array([0.0, 0.0, 1.0, 1.0])
    )
    marks = landmarks(course, clock, T_M0, smoothing=0.1)
    assert marks.half_time_from == "start of the hold"
    assert_allclose(marks.half_time, 50.0)
    assert marks.peak_temperature is None
    assert marks.half_temperature is None


def test_half_time_counts_from_the_start_where_the_history_begins_below_melting():
    ramp = Ramp.until(start=440.0, end=360.0, rate=1.0)
    clock = Clock.from_history(History(segments=(ramp,)), steady)
    assert time_origin(clock, 40.0, T_M0) == (0.0, "start of the history")


def test_half_of_an_incomplete_transformation_is_half_of_what_transforms():
    course = Course(time=np.array([0.0, 10.0, 20.0]), fraction=np.array([0.0, 0.4, 0.4]))
    assert course.reaches(0.5) == pytest.approx(5.0)
    assert course.reaches(1.0) == pytest.approx(10.0)
