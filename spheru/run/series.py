"""A series: which points there are, how many replicas each needs, and what they say together.

How a case is run stands in `spheru.run.cases` and `spheru.run.workers`; what is varied, in
`spheru.run.points`. All cases share the seed of the settings, so that chance does
not hide the differences between them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

from spheru.constants import ZERO_CELSIUS
from spheru.errors import InputFault
from spheru.measure.intervals import Statistic, replica_interval
from spheru.run.cases import Case, Job, identity
from spheru.run.workers import Failure, run_cases

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from spheru.run.cases import Journal
    from spheru.run.points import Make, Point, Series
    from spheru.run.workers import Pool, Progress

__all__ = ["DIAMETER", "Cases", "Finding", "Findings", "gather", "run_series"]

DIAMETER: Final = "number_mean_diameter_um"


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """What the replicas of a point say together.

    Attributes
    ----------
    point : Point
        The values.
    keys : tuple of str
        Its cases in the journal, by replica.
    numbers : mapping of str to Statistic
        Headline numbers: means over the replicas with 95 % intervals.
    warnings : tuple of str
        What was said with them, each once.
    """

    point: Point
    keys: tuple[str, ...]
    numbers: Mapping[str, Statistic]
    warnings: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Findings:
    """A finished series.

    Attributes
    ----------
    points : tuple of Finding
        The points of which at least one case finished, in order.
    failures : tuple of Failure
        Cases that could not be run.
    """

    points: tuple[Finding, ...]
    failures: tuple[Failure, ...]


def run_series(
    series: Series,
    make: Make,
    journal: Journal,
    pool: Pool,
    *,
    progress: Callable[[Progress], None] | None = None,
) -> Findings:
    """Run a series, or what is missing of it.

    Parameters
    ----------
    series : Series
        What is varied.
    make : callable
        Turns a document into settings; picklable.
    journal : Journal
        Finished cases; those of an earlier call are not run again.
    pool : Pool
        The workers.
    progress : callable, optional
        Told how far things have come.

    Returns
    -------
    findings : Findings
        The same whatever the number of workers, the order in which cases finish, and however
        often the series was interrupted.

    Raises
    ------
    RunError
        If the disk refuses, or workers keep dying.
    """
    job = Job(make=make, half_time_at=series.half_time_at)
    names = Cases(make)
    counts = [series.replicas] * series.count
    while True:
        cases = (
            names.case(point, replica)
            for point, count in zip(series.points(), counts, strict=True)
            for replica in range(count)
        )
        failures = run_cases(cases, job, journal, pool, total=sum(counts), progress=progress)
        if series.diameter_within is None:
            break
        wanted = [
            _replicas_needed(series, gather(point, names, count, journal), count)
            for point, count in zip(series.points(), counts, strict=True)
        ]
        if wanted == counts:
            break
        counts = wanted
    points = (
        gather(point, names, count, journal)
        for point, count in zip(series.points(), counts, strict=True)
    )
    return Findings(
        points=tuple(point for point in points if point is not None), failures=tuple(failures)
    )


class Cases:
    """Names the cases of points; the settings of a point are read only once.

    Parameters
    ----------
    make : callable
        Turns a document into settings.
    """

    def __init__(self, make: Make) -> None:
        self.make = make
        self._known: dict[str, str] = {}

    def case(self, point: Point, replica: int) -> Case:
        """Return a case of a point.

        Its key is that of the settings; one that cannot be read has a key no journal holds, and
        fails with its message when it is run.
        """
        if point.label not in self._known:
            try:
                self._known[point.label] = identity(self.make(point.document))
            except InputFault:
                self._known[point.label] = f"unreadable: {point.label}"
        return Case(key=f"{self._known[point.label]}-{replica}", point=point, replica=replica)


def gather(point: Point, names: Cases, replicas: int, journal: Journal) -> Finding | None:
    """Bring the replicas of a point together.

    Parameters
    ----------
    point : Point
        The values.
    names : Cases
        Names the cases of the point.
    replicas : int
        How many there should be.
    journal : Journal
        Finished cases.

    Returns
    -------
    finding : Finding or None
        Means over the replicas. Where each of n has an interval from its own tiles, the half
        width of the mean is (h_1^2 + ... + h_n^2)^(1/2)/n, else it is Student's between replicas.
        None where no case has finished.
    """
    keys = tuple(
        case.key
        for replica in range(replicas)
        if (case := names.case(point, replica)).key in journal
    )
    if not keys:
        return None
    records = [journal[key] for key in keys]
    headline = dict.fromkeys(name for record in records for name in record["numbers"])
    numbers = {
        name: _mean(name, [record["numbers"] for record in records])
        for name in headline
        if "_ci95_" not in name and not isinstance(records[0]["numbers"].get(name), str)
    }
    warnings = dict.fromkeys(text for record in records for text in record["warnings"])
    return Finding(point=point, keys=keys, numbers=numbers, warnings=tuple(warnings))


def _mean(name: str, records: list[dict[str, Any]]) -> Statistic:
    """Return the mean of a number over replicas; nan where one of them has none."""
    values = [record[name] for record in records if record.get(name) is not None]
    if len(values) < len(records):
        return Statistic(value=math.nan)
    mean = math.fsum(values) / len(values)
    if name.startswith("estimate_"):
        return Statistic(value=mean)
    ends = [
        [
            math.nan if (end := record.get(f"{name}_ci95_{side}")) is None else float(end)
            for side in ("low", "high")
        ]
        for record in records
    ]
    if len(ends) == 1:
        return Statistic(value=mean, low=ends[0][0], high=ends[0][1])
    half = math.hypot(*((high - low) / 2 for low, high in ends)) / len(ends)
    if math.isfinite(half):
        return Statistic(value=mean, low=mean - half, high=mean + half)
    zero = ZERO_CELSIUS if name.endswith("temperature_C") else 0.0  # replica_interval ends at 0
    found = replica_interval([value + zero for value in values])
    return Statistic(value=mean, low=found.low - zero, high=found.high - zero)


def _replicas_needed(series: Series, found: Finding | None, count: int) -> int:
    """Return how many replicas bring the interval of the mean diameter down to what is wanted."""
    wanted = series.diameter_within
    if found is None or wanted is None or len(found.keys) < count:  # after a failure none is added
        return count
    mean = found.numbers[DIAMETER]
    share = (mean.high - mean.low) / 2 / mean.value
    if share <= wanted or count >= series.most_replicas:
        return count
    # the width falls with the root of the number; not too far on the word of a few replicas
    likely = math.ceil(count * (share / wanted) ** 2) if share > 0 else 0
    return min(max(likely, count + 1), 3 * count, series.most_replicas)
