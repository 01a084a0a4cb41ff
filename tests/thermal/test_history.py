from __future__ import annotations

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.thermal.history import History, Hold, Quench, Ramp


def three_steps():
    return History(
        segments=(
            Hold(temperature=450.0, duration=60.0),
            Ramp.until(start=450.0, end=400.0, rate=0.5),
            Quench(start=400.0, target=300.0, time_constant=3.0, duration=30.0),
        )
    )


def test_segments_follow_each_other_in_time():
    history = three_steps()
    assert history.turning_times.tolist() == [0.0, 60.0, 160.0, 190.0]
    times = np.array([0.0, 30.0, 60.0, 110.0, 160.0, 163.0, 190.0])
    wanted = [450, 450, 450, 425, 400, 300 + 100 * np.exp(-1), 300 + 100 * np.exp(-10)]
    np.testing.assert_allclose(history.temperature(times), wanted, rtol=1e-14)


def test_extremes_are_those_of_the_segments():
    history = three_steps()
    assert history.start_temperature == history.highest_temperature == 450.0
    assert history.end_temperature == history.lowest_temperature
    assert history.end_temperature == pytest.approx(300 + 100 * np.exp(-10))


def test_heating_ramp_goes_up():
    assert Ramp.until(start=300.0, end=310.0, rate=-2.0).duration == 5.0
    assert Ramp.lasting(start=300.0, rate=-2.0, duration=5.0).end == 310.0


@pytest.mark.parametrize(
    ("make", "said"),
    [
        pytest.param(lambda: Ramp.until(start=400, end=300, rate=0), "use a hold", id="rate-0"),
        pytest.param(
            lambda: Ramp.lasting(start=400, rate=0.0, duration=1), "use a hold", id="rate-0-for"
        ),
        pytest.param(
            lambda: Ramp.until(start=300, end=400, rate=1), "does not lead", id="wrong-way"
        ),
        pytest.param(
            lambda: Ramp.lasting(start=300, rate=1, duration=300), "above 0 K", id="below-0-K"
        ),
        pytest.param(lambda: Ramp(start=400, end=300, duration=0), "above 0 s", id="no-time"),
        pytest.param(lambda: Hold(temperature=-5, duration=1), "above 0 K", id="cold-hold"),
        pytest.param(lambda: Hold(temperature=400, duration=float("nan")), "above 0 s", id="nan"),
        pytest.param(
            lambda: Quench(start=400, target=300, time_constant=0, duration=1),
            "time constant",
            id="sudden",
        ),
        pytest.param(lambda: History(segments=()), "at least one", id="empty"),
        pytest.param(
            lambda: History(
                segments=(
                    Hold(temperature=400, duration=1),
                    Hold(temperature=390, duration=1),
                )
            ),
            "segment 1 ends at 400 K, but segment 2 starts at 390 K",
            id="gap",
        ),
        pytest.param(lambda: three_steps().temperature(190.1), "0 to 190 s", id="after-the-end"),
        pytest.param(lambda: three_steps().temperature(-0.1), "0 to 190 s", id="before-the-start"),
        pytest.param(lambda: three_steps().temperature(np.nan), "0 to 190 s", id="no-number"),
    ],
)
def test_faults_are_named(make, said):
    with pytest.raises(ValidityError, match=said):
        make()


@pytest.mark.parametrize(
    ("time", "temperature", "said"),
    [
        pytest.param([0.0], [400.0], "at least two rows, got 1", id="one-row"),
        pytest.param([0.0, 1.0], [400.0], "as many times as temperatures", id="shapes"),
        pytest.param([0.0, 2.0, 1.0], [400.0] * 3, "row 3: expected a time later", id="unsorted"),
        pytest.param([0.0, 1.0, 1.0], [400.0] * 3, "row 3: expected a time later", id="repeated"),
        pytest.param([0.0, np.inf, np.inf], [400.0] * 3, "row 2: expected a finite", id="endless"),
        pytest.param([0.0, 1.0], [400.0, np.nan], "row 2: expected a finite temp", id="gap"),
        pytest.param([0.0, 1.0], [400.0, -3.0], "row 2: expected a temperature above", id="cold"),
    ],
)
def test_bad_traces_name_their_row(time, temperature, said):
    with pytest.raises(ValidityError, match=said):
        History.from_trace(time, temperature)


def test_trace_passes_through_all_its_points_and_starts_at_0():
    time, kelvins = np.array([10.0, 11.0, 15.0, 16.0]), np.array([450.0, 440.0, 441.0, 300.0])
    history = History.from_trace(time, kelvins)
    np.testing.assert_allclose(history.temperature(time - 10), kelvins, rtol=1e-14)
    assert history.temperature(3.0) == pytest.approx(440.5)


def test_crossings_and_new_lows_stand_at_their_temperature():
    history = History(
        segments=(
            *History.from_trace([0, 10, 20, 40], [420.0, 390.0, 410.0, 370.0]).segments,
            Quench(start=370.0, target=300.0, time_constant=5.0, duration=20.0),
        )
    )
    times = history.crossings(405.0)
    assert times.size == 3
    np.testing.assert_allclose(history.temperature(times), 405.0, rtol=1e-14)
    np.testing.assert_allclose(history.temperature(history.crossings(333.0)), 333.0, rtol=1e-13)
    np.testing.assert_allclose(history.new_lows(), [30.0])


def test_history_is_a_value():
    assert three_steps() == three_steps()
    assert hash(three_steps()) == hash(three_steps())
    with pytest.raises(ValueError, match="read-only"):
        three_steps().turning_times[0] = 1.0
