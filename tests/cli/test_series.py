"""`spheru series` as its user meets it: what it prints, writes, refuses, and how it goes on."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from spheru.cli.main import main
from spheru.config.series import read_series
from spheru.run import workers
from spheru.run.cases import Done
from spheru.run.estimate import estimate
from tests.run.series_parts import Inline

ROOT = Path(__file__).parents[2]
CONFIGS = sorted((ROOT / "configs" / "series").glob("*.toml"))
BASE = """
title = "small"
seed = 5
[material]
name = "isotactic-polypropylene-alpha"
[cooling]
start = "205 degC"
steps = [{ rate = "10 K/min", until = "60 degC" }]
[sample]
view = "section"
spherulites = 60
pixels_across = 8
edges = "periodic"
"""
SERIES = """
[series]
replicas = 2
[[series.vary]]
key = "cooling.steps[0].rate"
values = ["1 K/min", "10 K/min", "100 K/min"]
"""
AIM = """
[aim]
key = "cooling.steps[0].rate"
from = "1 K/min"
to = "100 K/min"
quantity = "mean diameter"
target = "30 um"
"""


@pytest.fixture
def run(capsys, tmp_path, monkeypatch):
    """Run the command in an empty folder; return exit code, standard output and error."""
    monkeypatch.chdir(tmp_path)

    def call(*words):
        with pytest.raises(SystemExit) as left:
            main(["series", *map(str, words)])
        out, err = capsys.readouterr()
        return left.value.code, out, err

    return call


def in_this_process(monkeypatch):
    monkeypatch.setattr(workers.Pool, "_processes", lambda _: Inline())


@pytest.fixture
def here(monkeypatch):
    """Run the cases in this process, with made-up numbers near the mean field."""
    known = {}

    def run_case(job, document, replica):
        key = repr(document)
        if key not in known:
            known[key] = estimate(job.make(document)).numbers
        numbers = known[key]
        size = (0.85 + 0.01 * (replica % 3)) * numbers["diameter_of_mean_area_um"]
        found = {
            "number_mean_diameter_um": size,
            "number_mean_diameter_um_ci95_low": 0.98 * size,
            "number_mean_diameter_um_ci95_high": 1.02 * size,
            "peak_temperature_C": numbers["peak_temperature_C"],
            "half_temperature_C": numbers["half_temperature_C"],
            "diameter_of_mean_volume_um": numbers["diameter_of_mean_volume_um"],
            "estimate_diameter_of_mean_volume_um": numbers["diameter_of_mean_volume_um"],
            "spherulites_measured": 60,
        }
        return Done(numbers=found)

    monkeypatch.setattr(workers, "run_case", run_case)
    in_this_process(monkeypatch)
    # nothing was grown, so nothing is drawn
    monkeypatch.setattr("spheru.output.series._figures", lambda *_: ())
    for name in ("plot_sheet", "plot_curves"):
        monkeypatch.setattr(f"spheru.output.series.{name}", lambda *_, **__: None)
    monkeypatch.setattr("spheru.output.series.png", lambda _: b"")


def written(tmp_path, text, name="small.toml"):
    path = tmp_path / name
    path.write_text(text)
    return path


def test_a_series_prints_the_table_of_the_trade(run, tmp_path, here):
    code, out, err = run(written(tmp_path, BASE + SERIES))
    assert code == 0
    lines = out.splitlines()
    assert lines[0] == "small"
    for head in ("rate [K/min]", "peak [degC]", "half [degC]", "mean diameter [um]"):
        assert head in lines[1]
    assert "onset" not in lines[1]
    assert [line.split()[0] for line in lines[2:5]] == ["1", "10", "100"]
    # Koscher & Fulchiron set: peaks at 125.8, 112.2, 93.1 degC (computed), exponents from -0.26 on
    assert float(lines[2].split()[2]) == pytest.approx(125.8, abs=0.1)
    assert -0.6 < float(lines[4].split()[-1]) < float(lines[2].split()[-1]) < -0.2
    assert lines[5] == "written to small"
    assert "qualify" in err


def test_a_series_for_programs_prints_its_answer(run, tmp_path, here):
    code, out, _ = run(written(tmp_path, BASE + SERIES), "--json", "-o", "there")
    assert code == 0
    assert json.loads(out) == json.loads((tmp_path / "there" / "answer.json").read_text())


def test_an_aim_is_answered_in_a_sentence(run, tmp_path, here):
    code, out, _ = run(written(tmp_path, BASE + AIM))
    assert code == 0
    assert "gives a mean diameter of 30 um" in out
    answer = json.loads((tmp_path / "small" / "answer.json").read_text())
    assert answer["reached"]
    assert answer["value_low"] < answer["value"] < answer["value_high"]


def test_an_aim_out_of_reach_is_answered_with_the_best(run, tmp_path, here):
    code, out, _ = run(written(tmp_path, BASE + AIM.replace("30 um", "1 mm")))
    assert code == 0
    assert "cannot be reached with rate between 1 K/min and 100 K/min" in out
    assert "the best is rate = 1 K/min" in out


def test_a_failing_run_is_listed_and_the_exit_code_is_1(run, tmp_path, here):
    text = BASE + SERIES.replace('"100 K/min"', '"1e9 K/min"')
    code, out, err = run(written(tmp_path, text))
    assert code == 1
    assert "10" in out.splitlines()[3]
    assert "failed: rate = 1e9 K/min, replica 0: cooling: by the end of the history" in err
    assert "Traceback" not in err
    assert len(list((tmp_path / "small" / "failed").iterdir())) == 2


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (("steps[0].rate", "steps[0].rat"), "unknown key; did you mean 'rate'?"),
        (("steps[0].rate", "stps[0].rate"), "did you mean 'cooling.steps[0].rate'?"),
        (('["1 K/min", "10 K/min", "100 K/min"]', "[]"), "expected a list of at least 1, got 0"),
        (("replicas = 2", "replicas = 0"), "series.replicas: expected a number of at least 1"),
        ((SERIES, ""), "expected a table [series] or [aim]"),
    ],
    ids=["unknown key", "leads nowhere", "empty list", "no replica", "no series"],
)
def test_a_fault_of_the_file_ends_with_2_before_anything_is_written(run, tmp_path, change, message):
    path = written(tmp_path, (BASE + SERIES).replace(*change))
    code, out, err = run(path)
    assert (code, out) == (2, "")
    assert message in err
    assert [entry.name for entry in tmp_path.iterdir()] == ["small.toml"]


def test_a_folder_of_another_series_is_refused(run, tmp_path, here):
    run(written(tmp_path, BASE + SERIES))
    other = written(tmp_path, BASE.replace("seed = 5", "seed = 6") + SERIES, "other.toml")
    code, _, err = run(other, "-o", "small")
    assert code == 2
    assert "holds a series of other settings" in err


def test_a_million_runs_are_not_started_unasked(run, tmp_path):
    text = BASE + SERIES.replace("replicas = 2", "replicas = 333334")
    code, _, err = run(written(tmp_path, text))
    assert code == 2
    assert "1000002 runs of 3 points: roughly" in err
    assert "GB on the disk" in err
    assert "--yes" in err
    assert not (tmp_path / "small").exists()


def test_a_cluster_without_its_library_or_scheduler_is_refused(run, tmp_path):
    code, _, err = run(written(tmp_path, BASE + SERIES), "--cluster", "tcp://127.0.0.1:1")
    assert code == 2
    assert "spheru[cluster]" in err or "no scheduler answers" in err


@pytest.mark.parametrize("command", ["grow", "estimate"])
def test_the_commands_of_a_single_run_point_here(capsys, tmp_path, command):
    with pytest.raises(SystemExit) as left:
        main([command, str(written(tmp_path, BASE + SERIES))])
    assert left.value.code == 2
    assert "use spheru series" in capsys.readouterr().err


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_every_series_that_comes_along_can_be_read(path):
    series, _ = read_series(path)
    assert series.count >= 9


# ------------------------------------------------------------------ kills


def started(path, folder, *options):
    words = [sys.executable, "-m", "spheru", "series", str(path), "-o", str(folder), *options]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    return subprocess.Popen(
        words, env=environment,
        stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
    )  # fmt: skip


def killed_once(path, folder, after):
    """Kill a series with kill -9 once so many cases are done; return whether it was alive."""
    process = started(path, folder, "--workers", "1")
    journal = folder / "cases.jsonl"
    while process.poll() is None:
        if journal.exists() and journal.read_bytes().count(b"\n") > after:
            process.send_signal(signal.SIGKILL)
            process.wait()
            return True
        time.sleep(0.02)
    return False


def lines(folder):
    return [json.loads(line) for line in (folder / "cases.jsonl").read_text().splitlines()[1:]]


def test_after_kill_9_the_same_command_goes_on_to_the_same_bytes(run, tmp_path, monkeypatch):
    path = written(tmp_path, BASE + SERIES)
    assert killed_once(path, tmp_path / "killed", 2)
    before = {line["key"] for line in lines(tmp_path / "killed")}
    assert 2 <= len(before) < 6
    in_this_process(monkeypatch)
    code, _, _ = run(path, "-o", "killed")
    assert code == 0
    keys = [line["key"] for line in lines(tmp_path / "killed")]
    assert len(keys) == len(set(keys)) == 6
    assert before <= set(keys)
    run(path, "-o", "whole")
    for name in ("cases.csv", "table.csv", "answer.json", "maps.png"):
        whole, killed = ((tmp_path / f / name).read_bytes() for f in ("whole", "killed"))
        assert whole == killed, name


@pytest.mark.campaign
def test_killed_at_random_twenty_times_the_bytes_are_the_same(run, tmp_path):
    import random

    chance = random.Random(11)  # noqa: S311 (moments of kills need no secret)
    values = ", ".join(f'"{rate} K/min"' for rate in range(1, 41))
    text = BASE + SERIES.replace('"1 K/min", "10 K/min", "100 K/min"', values)
    path = written(tmp_path, text)
    kills, done = 0, 0
    while kills < 20:
        process = started(path, tmp_path / "killed")
        time.sleep(chance.uniform(3.0, 8.0))
        if process.poll() is not None:
            break
        process.send_signal(signal.SIGKILL)
        process.wait()
        kills += 1
        folder = tmp_path / "killed"
        if (folder / "cases.jsonl").exists():
            content = (folder / "cases.jsonl").read_bytes()
            whole = content.count(b"\n")
            assert whole >= done
            done = whole
    assert run(path, "-o", "killed")[0] == 0
    keys = [line["key"] for line in lines(tmp_path / "killed")]
    assert len(keys) == len(set(keys)) == 80
    run(path, "-o", "whole")
    whole, killed = ((tmp_path / f / "cases.csv").read_bytes() for f in ("whole", "killed"))
    assert whole == killed
    print(f"{kills} kills")  # noqa: T201 (for tests/campaigns.md)
