"""Series: points, replicas, workers that die, cases that fail, disks that fill, and going on."""

from __future__ import annotations

import json
import math
import multiprocessing
import os
import signal
from concurrent.futures.process import BrokenProcessPool
from pathlib import Path

import numpy as np
import pytest

from spheru.errors import FolderError, RunError, UnknownNameError
from spheru.run import workers
from spheru.run.cases import Done, Journal, identity, isothermal_half_time
from spheru.run.estimate import estimate
from spheru.run.grow import grow
from spheru.run.points import with_value
from spheru.run.series import run_series
from spheru.run.workers import Pool
from tests.run.series_parts import SMALL, Inline, rate_series
from tests.run.settings import settings_with

THREE = ("1 K/min", "10 K/min", "100 K/min")


@pytest.fixture
def quick(monkeypatch):
    """Replace the run by a number that depends on document and replica, with a known spread."""

    def run_case(job, document, replica):
        rate = document["cooling"]["steps"][0]["rate"]
        chance = np.random.default_rng([len(rate), replica]).normal()
        numbers = {
            "number_mean_diameter_um": 50.0 + chance,
            "spherulites_measured": 10,
            "peak_temperature_C": 110.0 + replica,
        }
        return Done(numbers=numbers, picture=b"map" if replica == 0 else None)

    monkeypatch.setattr(workers, "run_case", run_case)


def run(folder, series, make, executor=None, **options):
    journal = Journal(folder, series.base)
    with Pool(1, executor=executor or Inline()) as pool:
        return run_series(series, make, journal, pool, **options), journal


# ------------------------------------------------------------------ keys and identities


@pytest.mark.parametrize(
    "key",
    ["cooling.stps[0].rate", "cooling.steps[4].rate", "cooling.steps.rate", "a..b", "[0]", ""],
)
def test_a_key_that_leads_nowhere_is_refused(key):
    with pytest.raises(UnknownNameError, match="unknown key"):
        with_value(SMALL, key, 1)


def test_a_value_is_replaced_in_a_copy():
    changed = with_value(SMALL, "cooling.steps[0].rate", "7 K/min")
    assert changed["cooling"]["steps"][0] == {"rate": "7 K/min", "until": "60 degC"}
    assert SMALL["cooling"]["steps"][0]["rate"] == "10 K/min"


def test_the_identity_of_a_case_is_that_of_its_settings_but_for_the_title():
    base = identity(settings_with())
    assert identity(settings_with(title="another")) == base
    assert identity(settings_with(seed=4)) != base
    rate = {"start": "205 degC", "steps": [{"rate": "11 K/min", "until": "60 degC"}]}
    assert identity(settings_with(cooling=rate)) != base


def test_the_identity_counts_what_stands_in_a_file(tmp_path):
    from spheru.config.read import settings_from_mapping

    def with_trace(end):
        (tmp_path / "t.csv").write_text(f"time_s,temperature_C\n0,205\n800,{end}\n")
        document = SMALL | {"cooling": {"trace": "t.csv"}}
        return identity(settings_from_mapping(document, folder=tmp_path))

    assert with_trace(60) != with_trace(61)


# ------------------------------------------------------------------ what a case gives


@pytest.mark.kernel
def test_a_case_gives_the_numbers_of_the_run_and_of_the_estimate(tmp_path):
    series, make = rate_series("10 K/min", replicas=2)
    findings, journal = run(tmp_path / "s", series, make)
    found = findings.points[0]
    summaries = [grow(make(SMALL), replica=k, threads=1).summary for k in (0, 1)]
    for name in ("number_mean_diameter_um", "peak_temperature_C", "number_density_per_mm3"):
        mean = (summaries[0][name] + summaries[1][name]) / 2
        assert found.numbers[name].value == pytest.approx(mean)
    expected = estimate(make(SMALL)).numbers["peak_temperature_C"]
    assert found.numbers["estimate_peak_temperature_C"].value == pytest.approx(expected)
    assert [journal.map_path(key).exists() for key in found.keys] == [True, False]


def test_the_half_time_of_a_hold_is_that_of_avrami():
    settings = settings_with(
        material={"name": "isotactic-polypropylene-alpha", "background": False},
        nuclei=[{"law": "fixed", "density": "4.52e12 1/m^3"}],
    )
    growth = float(settings.material.growth.rate(np.array([393.15]))[0])
    # t = (3 ln 2/(4 pi N G^3))^(1/3), all nuclei there from the start
    by_hand = (3 * math.log(2) / (4 * math.pi * 4.52e12 * growth**3)) ** (1 / 3)
    assert isothermal_half_time(settings, 393.15) == pytest.approx(by_hand, rel=1e-3)


# ------------------------------------------------------------------ replicas


def test_replicas_are_added_until_the_mean_diameter_is_known(tmp_path, quick):
    series, make = rate_series("1 K/min", replicas=3, diameter_within="0.7 %", most_replicas=60)
    findings, _ = run(tmp_path / "s", series, make)
    found = findings.points[0]
    mean = found.numbers["number_mean_diameter_um"]
    assert 3 < len(found.keys) < 60
    assert (mean.high - mean.low) / 2 <= 0.007 * mean.value


def test_replicas_end_at_the_most(tmp_path, quick):
    series, make = rate_series("1 K/min", replicas=3, diameter_within="0.1 %", most_replicas=7)
    findings, _ = run(tmp_path / "s", series, make)
    assert len(findings.points[0].keys) == 7


def test_the_number_of_replicas_does_not_depend_on_interruptions(tmp_path, quick):
    series, make = rate_series(*THREE, replicas=3, diameter_within="0.7 %", most_replicas=60)
    whole, _ = run(tmp_path / "whole", series, make)
    left = 5

    def stop(document, replica):
        nonlocal left
        left -= 1
        if left < 0:
            raise KeyboardInterrupt

    while True:
        left = 5
        try:
            parts, _ = run(tmp_path / "parts", series, make, Inline(stop))
            break
        except KeyboardInterrupt:
            continue
    assert parts == whole


# ------------------------------------------------------------------ the journal


def test_no_finished_case_is_run_twice(tmp_path, quick):
    series, make = rate_series(*THREE, replicas=2)
    first, again = Inline(), Inline()
    before, _ = run(tmp_path / "s", series, make, first)
    after, _ = run(tmp_path / "s", series, make, again)
    assert (len(first.runs), len(again.runs)) == (6, 0)
    assert before == after


def test_a_series_may_grow_and_keeps_what_is_done(tmp_path, quick):
    run(tmp_path / "s", *rate_series(*THREE))
    more = Inline()
    findings, _ = run(tmp_path / "s", *rate_series(*THREE, "20 K/min", replicas=2), more)
    assert len(more.runs) == 5
    assert [len(point.keys) for point in findings.points] == [2, 2, 2, 2]


@pytest.mark.parametrize("cut", [1, 30, -2], ids=["all but a byte", "half", "nearly whole"])
def test_a_line_that_was_cut_short_is_run_again(tmp_path, quick, cut):
    series, make = rate_series(*THREE)
    whole, journal = run(tmp_path / "s", series, make)
    content = journal.path.read_bytes()
    last = content[:-1].rindex(b"\n") + 1
    journal.path.write_bytes(content[: last + cut if cut > 0 else cut])
    again = Inline()
    after, _ = run(tmp_path / "s", series, make, again)
    assert len(again.runs) == 1
    assert journal.path.read_bytes() == content
    assert after == whole


def test_a_folder_of_other_settings_is_refused(tmp_path, quick):
    series, make = rate_series(*THREE)
    run(tmp_path / "s", series, make)
    with pytest.raises(FolderError, match="a series of other settings"):
        Journal(tmp_path / "s", {**series.base, "seed": 99})


@pytest.mark.parametrize("kind", ["file", "foreign"])
def test_a_folder_that_no_series_has_written_is_refused(tmp_path, kind):
    place = tmp_path / "s"
    if kind == "file":
        place.write_text("mine")
    else:
        place.mkdir()
        (place / "mine.txt").write_text("mine")
    with pytest.raises(FolderError, match="choose another name"):
        Journal(place, SMALL)


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no device that is always full")
def test_a_full_disk_stops_the_series_and_keeps_what_is_done(tmp_path, quick):
    series, make = rate_series(*THREE, replicas=3)
    journal = Journal(tmp_path / "s", series.base)

    def fill(progress):
        if progress.done and not journal.path.is_symlink():
            journal.path.rename(tmp_path / "kept")
            journal.path.symlink_to("/dev/full")

    with (
        Pool(1, executor=Inline()) as pool,
        pytest.raises(RunError, match=r"No space left on device.*give the same command again"),
    ):
        run_series(series, make, journal, pool, progress=fill)
    journal.path.unlink()
    (tmp_path / "kept").rename(journal.path)
    again = Inline()
    findings, _ = run(tmp_path / "s", series, make, again)
    assert 1 <= 9 - len(again.runs) < 9
    assert [len(point.keys) for point in findings.points] == [3, 3, 3]


# ------------------------------------------------------------------ failures


def test_a_failing_case_is_listed_and_the_others_go_on(tmp_path):
    # at 1e9 K/min nothing crystallises
    series, make = rate_series("10 K/min", "1e9 K/min")
    findings, _ = run(tmp_path / "s", series, make)
    assert [point.point.label for point in findings.points] == ["rate = 10 K/min"]
    (failure,) = findings.failures
    assert failure.case.point.document["cooling"]["steps"][0]["rate"] == "1e9 K/min"
    assert "crystallise" in failure.message


def test_settings_that_only_fail_together_fail_as_a_case(tmp_path, quick):
    from spheru.config.series import series_from_mapping

    vary = [
        {"key": "cooling.start", "values": ["205 degC", "110 degC"]},
        {"key": "cooling.steps[0].until", "values": ["60 degC", "120 degC"]},
    ]
    series, make = series_from_mapping(SMALL | {"series": {"vary": vary}})

    def read_first(document, replica):
        make(document)

    findings, _ = run(tmp_path / "s", series, make, Inline(read_first))
    assert [f.case.point.label for f in findings.failures] == ["start = 110 degC, until = 120 degC"]
    assert len(findings.points) == 3


class Deadly(Inline):
    """An executor whose worker dies of the cases with one rate, a number of times."""

    def __init__(self, rate, times) -> None:
        super().__init__(self._kill)
        self.rate, self.times = rate, times

    def _kill(self, document, replica):
        del replica
        if self.times and document["cooling"]["steps"][0]["rate"] == self.rate:
            self.times -= 1
            raise BrokenProcessPool("a worker died")


def test_a_worker_that_dies_once_costs_nothing(tmp_path, quick):
    series, make = rate_series(*THREE)
    findings, _ = run(tmp_path / "s", series, make, Deadly("10 K/min", 1))
    assert not findings.failures
    assert len(findings.points) == 3


def test_the_case_that_kills_its_workers_is_found_and_the_others_go_on(tmp_path, quick):
    series, make = rate_series(*THREE, replicas=2)
    findings, _ = run(tmp_path / "s", series, make, Deadly("10 K/min", 10))
    assert [f.case.point.label for f in findings.failures] == ["rate = 10 K/min"] * 2
    assert all("worker died" in f.message for f in findings.failures)
    assert [len(point.keys) for point in findings.points] == [2, 2]


def test_workers_that_all_die_end_the_series(tmp_path, quick):
    series, make = rate_series("10 K/min", replicas=9)
    with pytest.raises(RunError, match="workers died 4 times in a row"):
        run(tmp_path / "s", series, make, Deadly("10 K/min", 100))


# ------------------------------------------------------------------ real processes


def test_one_of_two_workers_is_killed_and_every_case_is_done_once(tmp_path):
    series, make = rate_series(*THREE, replicas=2)
    inline, _ = run(tmp_path / "inline", series, make)
    killed = []

    def kill(progress):
        if progress.done == 1 and not killed:
            victim = multiprocessing.active_children()[0]
            killed.append(victim.pid)
            os.kill(victim.pid, signal.SIGKILL)

    journal = Journal(tmp_path / "s", series.base)
    with Pool(2) as pool:
        findings = run_series(series, make, journal, pool, progress=kill)
    assert killed
    assert not multiprocessing.active_children()
    lines = [json.loads(line) for line in journal.path.read_text().splitlines()[1:]]
    assert len(lines) == len({line["key"] for line in lines}) == 6
    assert findings == inline
