"""A series of 10 rates, 6 doses and 4 replicas of 1024^2 sections on one worker and on two.

Run with ``python -m pytest tests/bench/test_series_speed.py -m bench -s``. It prints the parallel
efficiency, what a case costs beyond the run itself, and the memory of the parent; it fails on a
wrong number, never on a time. SPHERU_BENCH_REPLICAS makes it shorter.
"""

from __future__ import annotations

import os
import resource
import sys
import time

import pytest

from spheru.config.series import series_from_mapping
from spheru.run.cases import Job, Journal, run_case
from spheru.run.grow import grow
from spheru.run.series import run_series
from spheru.run.workers import Pool
from tests.run.settings import BASE

pytestmark = pytest.mark.bench

REPLICAS = int(os.environ.get("SPHERU_BENCH_REPLICAS", "4"))
AGENT = {
    "law": "agent", "dose": "0 ppm", "sites_per_ppm": "1e11 1/m^3", "threshold": "0 ppm",
    "activation": "0 K",
}  # fmt: skip
RATE = {
    "key": "cooling.steps[0].rate", "from": "1 K/min", "to": "100 K/min", "steps": 10,
    "scale": "logarithmic",
}  # fmt: skip
DOSE = {
    "key": "nuclei[0].dose",
    "values": ["0 ppm", "1 ppm", "10 ppm", "100 ppm", "300 ppm", "1000 ppm"],
}
SAMPLE = {"view": "section", "size": ["1024 um", "1024 um"], "pixel": "1 um"}

say = sys.stdout.write


def own(who=resource.RUSAGE_SELF):
    usage = resource.getrusage(who)
    return usage.ru_utime + usage.ru_stime


def test_two_workers_against_one(tmp_path):
    document = BASE | {"sample": SAMPLE, "nuclei": [AGENT]}
    table = {"vary": [RATE, DOSE], "replicas": REPLICAS}
    series, make = series_from_mapping(document | {"series": table})
    runs = series.count * REPLICAS
    found, taken, spent, memory = {}, {}, {}, []
    for workers in (1, 2):
        journal = Journal(tmp_path / str(workers), series.base)
        with Pool(workers) as pool:
            # both workers are warm before the clock starts: one run each, at other values
            seeds = {"key": "seed", "values": list(range(90, 90 + 2 * workers))}
            warm, _ = series_from_mapping(document | {"series": {"vary": [seeds]}})
            run_series(warm, make, Journal(tmp_path / f"warm {workers}", warm.base), pool)
            begin, mine = time.perf_counter(), own()

            def watch(progress):
                if progress.done % 20 == 0:
                    memory.append(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)

            found[workers] = run_series(series, make, journal, pool, progress=watch)
            taken[workers] = time.perf_counter() - begin
            spent[workers] = own() - mine
    assert not found[1].failures
    assert found[1] == found[2]
    settings = make(next(series.points()).document)
    job, beyond = Job(make=make), []
    for replica in range(5):
        start = own()
        grow(settings, replica=replica, threads=1)
        middle = own()
        run_case(job, settings.document, replica)
        beyond.append(own() - middle - (middle - start))
    say(
        f"\n{runs} runs of 1024^2 pixels, {os.cpu_count()} cores, load {os.getloadavg()[0]:.1f}"
        f"\n  one worker {taken[1]:.1f} s, two {taken[2]:.1f} s: "
        f"parallel efficiency {taken[1] / taken[2] / 2:.3f}"
        f"\n  parent {1e3 * spent[2] / runs:.1f} ms of CPU a case; worker beyond the run itself "
        f"{1e3 * sorted(beyond)[2]:.1f} ms of CPU (median of 5)"
        f"\n  memory of the parent: {memory[0]:.0f} MB at first, {memory[-1]:.0f} MB at the end\n"
    )
