from __future__ import annotations

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Hold, Quench, Ramp
from tests.thermal.reference import T_M0, grown_length, growth

HISTORIES = {
    "ramp": History(segments=(Ramp.until(start=478.15, end=313.15, rate=10 / 60),)),
    "quench": History(
        segments=(Quench(start=478.15, target=360.0, time_constant=3.0, duration=500.0),)
    ),
    "steps": History(
        segments=(
            Hold(temperature=490.0, duration=60.0),
            Ramp.until(start=490.0, end=390.0, rate=0.5),
            Hold(temperature=390.0, duration=100.0),
            Ramp.until(start=390.0, end=405.0, rate=-1.0),
            Quench(start=405.0, target=380.0, time_constant=20.0, duration=100.0),
        )
    ),
}


@pytest.fixture(params=HISTORIES, scope="module")
def history(request):
    return HISTORIES[request.param]


@pytest.mark.parametrize("step", [0.01, 1.0, 50.0], ids=lambda k: f"{k:g}K")
def test_grown_length_agrees_with_adaptive_quadrature_whatever_the_steps(history, step):
    clock = Clock.from_history(history, growth, breakpoints=(T_M0,), temperature_step=step)
    times = np.linspace(0, history.duration, 23)[1:]
    wanted = grown_length(history.temperature, times, points=history.turning_times.tolist())
    # 1e-9 allows for quad's own error; 1e-8 is what is promised
    np.testing.assert_allclose(clock.grown_length_at(times), wanted, atol=2e-9 * wanted[-1])


def test_inverse_gives_back_the_length(history):
    clock = Clock.from_history(history, growth, temperature_step=0.5)
    length = np.linspace(0, clock.grown_length[-1], 1001)
    back = clock.grown_length_at(clock.time_at(length))
    np.testing.assert_allclose(back, length, atol=1e-12 * length[-1])


def test_unannounced_jumps_of_the_rate_are_found():
    history = HISTORIES["ramp"]
    clock = Clock.from_history(
        history, lambda kelvins: np.where(kelvins < 400.1234567, 1e-6, 0.0), temperature_step=7.0
    )
    wanted = 1e-6 * (400.1234567 - 313.15) * 6
    assert clock.grown_length[-1] == pytest.approx(wanted, rel=1e-8)
    assert clock.time_at(wanted / 2) == pytest.approx(990 - wanted / 2 / 1e-6, abs=1e-5)


def test_plateau_gives_the_earliest_time():
    trace = History.from_trace([0, 10, 30, 40], [400.0, 390.0, 390.0, 400.0])
    clock = Clock.from_history(
        trace, lambda kelvins: np.where(kelvins > 390.0, 1.0, 0.0), breakpoints=(390.0,)
    )
    assert clock.grown_length[-1] == pytest.approx(20.0)
    plateau = clock.grown_length_at(20.0)
    assert plateau == pytest.approx(10.0)
    assert clock.time_at(plateau) == pytest.approx(10.0, abs=1e-7)
    assert clock.time_at(10.0 + 1e-6) == pytest.approx(30.0, abs=1e-5)


def test_length_never_reached_comes_at_inf():
    clock = Clock.from_history(HISTORIES["ramp"], growth)
    final = clock.grown_length[-1]
    assert np.isinf(clock.time_at([2 * final, np.inf])).all()
    assert clock.time_at(final) <= clock.history.duration
    assert clock.time_at(0.0) == 0.0
    assert clock.time_at(np.empty(0)).shape == (0,)


def test_nodes_enclose_breakpoints_and_stand_at_new_lows():
    history = History.from_trace([0, 10, 20, 40], [400.0, 390.0, 400.0, 380.0])
    clock = Clock.from_history(history, np.ones_like, breakpoints=(394.0,), temperature_step=3.0)
    for passage in (6.0, 14.0, 26.0):
        near = clock.time[np.abs(clock.time - passage) < 1e-6]
        assert near.size == 2
        np.testing.assert_allclose(
            np.sort(clock.temperature_at(near) - 394.0), [-1e-9, 1e-9], atol=2e-13
        )
    assert np.any(np.isclose(clock.time, 30.0, rtol=0, atol=1e-12))
    assert clock.lowest_temperature[np.searchsorted(clock.time, 29.0)] == 390.0
    assert clock.lowest_temperature[-1] == 380.0
    assert np.diff(clock.time).min() > 0


@pytest.mark.parametrize("step", [0.01, 0.3])
def test_nodes_are_no_further_apart_than_the_step(history, step):
    clock = Clock.from_history(history, growth, temperature_step=step)
    assert np.abs(np.diff(clock.temperature)).max() <= step * (1 + 1e-9)


def test_integral_of_any_rate():
    clock = Clock.from_history(HISTORIES["quench"], growth)
    total = clock.integral(lambda kelvins: kelvins - 360.0)
    wanted = 118.15 * 3.0 * -np.expm1(-clock.time / 3.0)
    np.testing.assert_allclose(total, wanted, rtol=1e-10)


def test_refined_clock_keeps_its_nodes_and_lengths():
    clock = Clock.from_history(HISTORIES["steps"], growth, breakpoints=(T_M0,))
    new = np.array([3.0, 300.0, 333.3])
    finer = clock.refined(new)
    assert np.isin(clock.time, finer.time).all()
    assert np.isin(new, finer.time).all()
    np.testing.assert_allclose(
        finer.grown_length[np.isin(finer.time, clock.time)], clock.grown_length, rtol=1e-11
    )


def test_extra_times_become_nodes():
    clock = Clock.from_history(HISTORIES["steps"], growth, extra_times=[1.25, 33.0])
    assert np.isin([1.25, 33.0], clock.time).all()


def test_noisy_trace_has_moderate_size():
    time = np.linspace(0, 1000, 10_001)
    noise = 0.1 * np.random.default_rng(1).standard_normal(time.size)
    history = History.from_trace(time, 478.15 - 0.16 * time + noise)
    clock = Clock.from_history(history, growth, breakpoints=(T_M0,))
    assert clock.time.size < 200_000
    smooth = Clock.from_history(History.from_trace(time, 478.15 - 0.16 * time), growth)
    assert clock.grown_length[-1] == pytest.approx(smooth.grown_length[-1], rel=1e-2)
    assert (np.diff(clock.lowest_temperature) <= 0).all()


@pytest.mark.parametrize(
    ("change", "said"),
    [
        pytest.param({"temperature_step": 0.0}, "step above 0 K", id="step"),
        pytest.param({"extra_times": [1e9]}, "expected times from 0", id="extra"),
        pytest.param({"growth": lambda k: k - 400}, "finite and >= 0", id="negative"),
        pytest.param({"growth": lambda k: k * np.nan}, "finite and >= 0", id="nan"),
    ],
)
def test_faults_are_named(change, said):
    given = {"growth": growth, **change}
    with pytest.raises(ValidityError, match=said):
        Clock.from_history(HISTORIES["ramp"], **given)


def test_questions_out_of_range_are_refused():
    clock = Clock.from_history(HISTORIES["ramp"], growth)
    with pytest.raises(ValidityError, match=">= 0 m"):
        clock.time_at(-1e-9)
    with pytest.raises(ValidityError, match=">= 0 m"):
        clock.time_at(np.nan)
    with pytest.raises(ValidityError, match="expected times"):
        clock.grown_length_at(991.0)
    with pytest.raises(ValidityError, match="expected times"):
        clock.refined([-1.0])
