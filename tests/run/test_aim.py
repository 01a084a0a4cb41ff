"""Aims: solved by mean field, corrected by runs, answered with an interval, or not to be met."""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.config.series import series_from_mapping
from spheru.errors import RunError
from spheru.run import workers
from spheru.run.aim import solve_aim
from spheru.run.cases import Done, Journal
from spheru.run.estimate import estimate
from spheru.run.grow import grow
from spheru.run.workers import Pool
from tests.run.series_parts import SMALL, Inline

# an agent that brings 1e11 nuclei per m3 and ppm, active from the start
AGENT = {
    "law": "agent",
    "dose": "1 ppm",
    "sites_per_ppm": "1e11 1/m^3",
    "threshold": "0 ppm",
    "activation": "0 K",
}
DOSED = SMALL | {"nuclei": [AGENT]}
RATE = {"key": "cooling.steps[0].rate", "from": "1 K/min", "to": "100 K/min"}
DOSE = {"key": "nuclei[0].dose", "from": "1 ppm", "to": "5000 ppm"}


def aim_of(document, **table):
    return series_from_mapping(document | {"aim": table})


def solve(folder, aim, make, executor=None):
    journal = Journal(folder, aim.base)
    with Pool(1, executor=executor or Inline()) as pool:
        return solve_aim(aim, make, journal, pool), journal


@pytest.fixture
def biased(monkeypatch):
    """Runs that give the mean field times 0.8, with 1 % of scatter."""

    known = {}

    def run_case(job, document, replica):
        key = repr(document)
        if key not in known:
            known[key] = estimate(job.make(document)).numbers
        numbers = known[key]
        chance = np.random.default_rng(replica).normal(1.0, 0.01)
        found = {
            "number_mean_diameter_um": 0.8 * chance * numbers["diameter_of_mean_area_um"],
            "half_time_s": 0.8 * chance * numbers["half_time_s"],
            "peak_temperature_C": numbers["peak_temperature_C"] - 2.0 + chance,
        }
        return Done(numbers={**found, "spherulites_measured": 60}, picture=None)

    monkeypatch.setattr(workers, "run_case", run_case)


def test_runs_correct_what_the_mean_field_says(tmp_path, biased):
    aim, make = aim_of(SMALL, **RATE, quantity="mean diameter", target="30 um")
    answer, _ = solve(tmp_path / "a", aim, make)
    again = Inline()
    assert solve(tmp_path / "a", aim, make, again)[0] == answer
    assert not again.runs  # it goes on where it was stopped
    rate = answer.value.value / 60
    cooling = {"start": "205 degC", "steps": [{"rate": f"{rate!r} K/s", "until": "60 degC"}]}
    there = estimate(make(SMALL | {"cooling": cooling})).numbers["diameter_of_mean_area_um"]
    # the scatter of eight replicas is 0.35 %
    assert 0.8 * there == pytest.approx(30.0, rel=4 * 0.0035)
    assert answer.reached
    assert answer.confirmed
    assert answer.value.low < answer.value.value < answer.value.high
    assert answer.result.low <= 30.0 <= answer.result.high


@pytest.mark.parametrize(
    ("quantity", "target"), [("half time", "300 s"), ("peak temperature", "118 degC")]
)
def test_times_and_temperatures_are_met_too(tmp_path, biased, quantity, target):
    aim, make = aim_of(SMALL, **RATE, quantity=quantity, target=target)
    answer, _ = solve(tmp_path / "a", aim, make)
    assert answer.confirmed
    assert answer.value.low < answer.value.value < answer.value.high


def test_a_wider_confidence_gives_a_wider_interval(tmp_path, biased):
    widths = []
    for confidence in ("80 %", "99 %"):
        aim, make = aim_of(
            SMALL, **RATE, quantity="mean diameter", target="30 um", confidence=confidence
        )
        answer, _ = solve(tmp_path / confidence[:2], aim, make)
        widths.append(math.log(answer.value.high / answer.value.low))
    # Student's factor at seven degrees of freedom: 1.415 and 3.499
    assert widths[1] / widths[0] == pytest.approx(3.499 / 1.415, rel=0.02)


def test_a_target_out_of_reach_is_said_with_the_best(tmp_path, biased):
    aim, make = aim_of(SMALL, **RATE, quantity="mean diameter", target="500 um")
    answer, _ = solve(tmp_path / "a", aim, make)
    assert not answer.reached
    assert answer.value.value == pytest.approx(1.0)  # the slowest rate has the largest
    assert answer.result.value == pytest.approx(answer.span[1], rel=1e-6)
    assert answer.span[0] < answer.span[1] < 500


def test_a_dose_that_first_coarsens_is_seen_and_both_answers_are_given(tmp_path, biased):
    numbers = [
        estimate(aim_of(DOSED, **DOSE, quantity="mean diameter", target="30 um")[1](
            DOSED | {"nuclei": [AGENT | {"dose": dose}]}
        )).numbers["diameter_of_mean_area_um"]
        for dose in ("1 ppm", "10 ppm", "100 ppm")
    ]  # fmt: skip
    assert numbers[1] > numbers[0] > numbers[2]
    target = f"{0.8 * (numbers[0] + numbers[1]) / 2!r} um"
    found = {}
    for pick in ("lowest", "highest"):
        aim, make = aim_of(DOSED, **DOSE, quantity="mean diameter", target=target, pick=pick)
        found[pick], _ = solve(tmp_path / pick, aim, make)
    low, high = found["lowest"], found["highest"]
    assert low.value.value < 12 < high.value.value
    assert low.others[0] == pytest.approx(high.value.value, rel=0.3)
    assert any("greatest near dose" in note for note in low.notes)


def test_a_target_above_the_turn_gets_the_turn_as_the_best(tmp_path, biased):
    aim, make = aim_of(DOSED, **DOSE, quantity="mean diameter", target="60 um")
    answer, _ = solve(tmp_path / "a", aim, make)
    assert not answer.reached
    # by mean field the size of the set at 10 K/min is largest between 1e12 and 3e12 1/m^3
    assert 8 < answer.value.value < 35


def test_where_nothing_can_be_predicted_the_reason_is_said(tmp_path):
    aim, make = aim_of(
        SMALL,
        key="cooling.start", **{"from": "60.001 degC", "to": "60.002 degC"},
        quantity="half time", target="1 s",
    )  # fmt: skip
    with pytest.raises(RunError, match=r"no value of cooling.start between 60\.001 degC and"):
        solve(tmp_path / "a", aim, make)


@pytest.mark.parametrize(
    ("replicas", "checks", "student"),  # Student's factor of the 95 % interval of the replicas
    [(4, 8, 3.182), pytest.param(8, 20, 2.365, marks=pytest.mark.campaign)],
    ids=["few", "many"],
)
def test_an_aim_solved_by_runs_holds_in_other_replicas(tmp_path, replicas, checks, student):
    aim, make = aim_of(SMALL, **RATE, quantity="mean diameter", target="30 um", replicas=replicas)
    answer, _ = solve(tmp_path / "a", aim, make)
    assert answer.confirmed
    settings = make(aim.point(answer.value.value / 60).document)
    seen = [
        grow(settings, replica=100 + k, threads=1).summary["number_mean_diameter_um"]
        for k in range(checks)
    ]
    # both the answer and its check are uncertain
    own = (answer.result.high - answer.result.low) / 2 / student
    error = math.hypot(own, np.std(seen, ddof=1) / math.sqrt(checks))
    assert np.mean(seen) == pytest.approx(30.0, abs=4 * error)
