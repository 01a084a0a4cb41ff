"""The same series through a dask.distributed scheduler, one of its workers killed on the way."""

from __future__ import annotations

import os
import signal

import pytest

from spheru.run.cases import Journal
from spheru.run.series import run_series
from spheru.run.workers import Pool
from tests.run.series_parts import Inline, rate_series

distributed = pytest.importorskip("distributed", reason="needs the extra 'cluster'")

# the library's own threads and sockets end in their own time
pytestmark = pytest.mark.filterwarnings("ignore")


def test_a_scheduler_with_a_worker_killed_gives_the_same_cases(tmp_path):
    series, make = rate_series("1 K/min", "10 K/min", "100 K/min", replicas=2)
    inline = Journal(tmp_path / "inline", series.base)
    with Pool(1, executor=Inline()) as pool:
        wanted = run_series(series, make, inline, pool)
    killed = []

    def kill(progress):
        if progress.done == 1 and not killed:
            killed.extend(client.run(os.getpid).values())
            os.kill(killed[0], signal.SIGKILL)

    cluster = distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, host="127.0.0.1"
    )
    with cluster, distributed.Client(cluster.scheduler_address) as client:
        journal = Journal(tmp_path / "cluster", series.base)
        with Pool(2, executor=client.get_executor(pure=False)) as pool:
            found = run_series(series, make, journal, pool, progress=kill)
    assert killed
    assert found == wanted
    assert sorted(journal.path.read_text().splitlines()) == sorted(
        inline.path.read_text().splitlines()
    )
