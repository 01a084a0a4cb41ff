"""Many cases on several processes: spawned workers, one thread each, dead ones replaced.

What a case is stands in `spheru.run.cases`. Any executor of `concurrent.futures` may be used in
place of the processes here.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import threading
from collections import deque
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, ProcessPoolExecutor, wait
from dataclasses import dataclass
from multiprocessing import connection
from typing import TYPE_CHECKING, Final, Self

from spheru.errors import RunError
from spheru.run.cases import Done, run_case

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from concurrent.futures import Executor, Future

    from spheru.run.cases import Case, Job, Journal

__all__ = ["Failure", "Pool", "Progress", "cores", "run_cases"]

_REBUILDS: Final = 3  # of the pool, without a finished case in between
_DIED: Final = "its worker died (out of memory, or killed from outside)"
_THREADS: Final = ("NUMBA_NUM_THREADS", "OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS")


@dataclass(frozen=True, slots=True, kw_only=True)
class Failure:
    """A case that could not be run.

    Attributes
    ----------
    case : Case
        The case with its settings.
    message : str
        Why.
    """

    case: Case
    message: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Progress:
    """How far the cases have come.

    Attributes
    ----------
    done, running, failed, total : int
        Numbers of cases; those that an earlier call had finished count as done.
    """

    done: int
    running: int
    failed: int
    total: int


def cores() -> int:
    """Return how many cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


class Pool:
    """Workers that run cases; a context that ends them.

    Parameters
    ----------
    workers : int, optional
        Number of processes; one a core by default.
    executor : concurrent.futures.Executor, optional
        Used in place of processes of our own, and left open.
    """

    def __init__(self, workers: int | None = None, *, executor: Executor | None = None) -> None:
        self.workers = workers or cores()
        self._given = executor
        self._own: ProcessPoolExecutor | None = None
        self._others: set[int | None] = set()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.end()

    def submit(self, job: Job, case: Case) -> Future[Done]:
        """Hand a case to a worker."""
        executor = self._given or self._processes()
        return executor.submit(run_case, job, case.point.document, case.replica)

    def end(self) -> None:
        """End the processes, whatever they are doing; `submit` starts new ones."""
        if self._own is not None:
            for process in multiprocessing.active_children():
                if process.pid not in self._others:
                    process.terminate()
            self._own.shutdown(wait=True, cancel_futures=True)
            self._own = None

    def _processes(self) -> ProcessPoolExecutor:
        if self._own is None:
            self._others = {process.pid for process in multiprocessing.active_children()}
            self._own = ProcessPoolExecutor(
                self.workers,
                mp_context=multiprocessing.get_context("spawn"),
                initializer=_start_worker,
            )
        return self._own


def _start_worker() -> None:
    """Make a fresh process a worker: one thread, deaf to Ctrl-C, gone with its parent."""
    for name in _THREADS:
        os.environ[name] = "1"
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent ends its workers itself
    parent = multiprocessing.parent_process()
    if parent is not None:
        threading.Thread(target=_leave_after, args=(parent.sentinel,), daemon=True).start()


def _leave_after(sentinel: int) -> None:
    connection.wait([sentinel])
    os._exit(1)  # the parent was killed: nobody waits for this worker any more


def run_cases(
    cases: Iterable[Case],
    job: Job,
    journal: Journal,
    pool: Pool,
    *,
    total: int,
    progress: Callable[[Progress], None] | None = None,
) -> list[Failure]:
    """Run the cases that a journal does not hold yet.

    Parameters
    ----------
    cases : iterable of Case
        All cases; taken one by one as workers get free.
    job : Job
        What is done with each.
    journal : Journal
        Where every finished case is put down at once.
    pool : Pool
        The workers. Where one dies, the cases that were running are run again one at a time, so
        that the one to blame is found: it fails when it kills two workers.
    total : int
        How many cases there are.
    progress : callable, optional
        Told how far things have come.

    Returns
    -------
    failures : list of Failure
        Cases that could not be run. They are not in the journal.

    Raises
    ------
    RunError
        If the disk refuses a line, or workers keep dying. What is in the journal stays.
    """
    return _Run(iter(cases), job, journal, pool, total, progress).run()


class _Run:
    """One pass over cases: which are running, which have failed, which are suspects."""

    def __init__(
        self,
        cases: Iterable[Case],
        job: Job,
        journal: Journal,
        pool: Pool,
        total: int,
        progress: Callable[[Progress], None] | None,
    ) -> None:
        self.cases, self.job, self.journal, self.pool = iter(cases), job, journal, pool
        self.total, self.progress = total, progress
        self.done, self.failures = 0, list[Failure]()
        self.running: dict[Future[Done], Case] = {}
        self.suspects: deque[Case] = deque()  # they were running when a worker died
        self.alone = False  # a suspect is running
        self.deaths = 0  # of the pool, since a case has finished

    def run(self) -> list[Failure]:
        while True:
            self._fill()
            if not self.running and not self.suspects:
                return self.failures
            finished, _ = wait(self.running, return_when=FIRST_COMPLETED)
            if any(isinstance(_fault(future), BrokenExecutor) for future in finished):
                finished, _ = wait(self.running)
            dead = [case for future in finished if (case := self._take(future)) is not None]
            if dead:
                self._after_a_death(dead)

    def _fill(self) -> None:
        """Hand out cases: a few more than there are workers, a suspect alone."""
        if self.suspects and not self.running:
            self._submit(self.suspects.popleft())
            self.alone = True
        while not self.alone and not self.suspects and len(self.running) < 2 * self.pool.workers:
            case = self._next()
            if case is None:
                break
            self._submit(case)
        self._tell()

    def _next(self) -> Case | None:
        for case in self.cases:
            if case.key not in self.journal:
                return case
            self.done += 1
        return None

    def _submit(self, case: Case) -> None:
        try:
            self.running[self.pool.submit(self.job, case)] = case
        except BrokenExecutor:  # it broke since the last look: the others tell more
            self.suspects.append(case)
            if not self.running:
                self._after_a_death([])

    def _take(self, future: Future[Done]) -> Case | None:
        """Put down what a future brings; return its case if its worker died."""
        case = self.running.pop(future)
        fault = _fault(future)
        if isinstance(fault, BrokenExecutor):
            return case
        self.deaths, self.alone = 0, False
        done = Done(numbers={}, fault=str(fault)) if fault is not None else future.result()
        if done.fault:
            self.failures.append(Failure(case=case, message=done.fault))
            return None
        try:
            self.journal.add(case, done)
        except OSError as refused:
            raise RunError(
                f"{self.journal.folder}: cannot be written ({refused.strerror or refused}); the "
                f"{len(self.journal)} finished cases are kept: make room, then give the same "
                "command again"
            ) from refused
        self.done += 1
        return None

    def _after_a_death(self, dead: list[Case]) -> None:
        self.deaths += 1
        if self.alone:
            self.failures.extend(Failure(case=case, message=_DIED) for case in dead)
        else:
            self.suspects.extend(dead)
        self.alone = False
        if self.deaths > _REBUILDS:
            raise RunError(
                f"workers died {self.deaths} times in a row without finishing a case (out of "
                f"memory, or killed from outside); the {len(self.journal)} finished cases are "
                "kept: try fewer --workers, then give the same command again"
            )
        self.pool.end()

    def _tell(self) -> None:
        if self.progress is not None:
            self.progress(
                Progress(
                    done=self.done,
                    running=min(len(self.running), self.pool.workers),
                    failed=len(self.failures),
                    total=self.total,
                )
            )


def _fault(future: Future[Done]) -> BaseException | None:
    """Return why a future brings nothing."""
    if future.cancelled():
        return RunError("its executor has dropped it")
    return future.exception()
