"""An aim: which value of one key meets a target, and how surely.

The mean field is solved for the target over the whole range; runs at the value found tell by how
much it is off there, it is solved again with that correction, and so on until the runs meet the
target within their own interval.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
from scipy.optimize import brentq, minimize_scalar
from scipy.special import stdtrit

from spheru.constants import ZERO_CELSIUS
from spheru.errors import RunError, SpheruError
from spheru.measure.intervals import Statistic
from spheru.run.cases import Job
from spheru.run.course import Course, landmarks
from spheru.run.kinetics import kinetics
from spheru.run.plan import typical_diameter
from spheru.run.points import QUANTITIES
from spheru.run.series import Cases, Finding, gather
from spheru.run.workers import Failure, run_cases
from spheru.units import format_si

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from spheru.run.cases import Journal
    from spheru.run.points import Aim, Make, Point
    from spheru.run.workers import Pool, Progress

__all__ = ["Answer", "solve_aim"]

_STEP: Final = 0.1  # K between two nodes of the clock: the runs correct what that costs
_SMOOTHING: Final = 0.01
_NODES: Final = 25  # of the search over the range
_ROUNDS: Final = 6
_FLAT: Final = 1e-3  # of the whole change: a turn smaller than that is none


@dataclass(frozen=True, slots=True, kw_only=True)
class Answer:
    """What came out of the search.

    Attributes
    ----------
    aim : Aim
        What was looked for.
    reached : bool
        Whether a value of the range meets the target.
    confirmed : bool
        Whether the last runs agree with what is answered, within their interval.
    value : Statistic
        The value that meets the target with its interval, or the best one, in its own unit.
    result : Statistic
        What the runs at `tried` gave, with an interval at the confidence asked for, in the unit
        of the headline number.
    tried : float
        The value at which they were run, in its own unit.
    others : tuple of float
        Further values that meet the target, by the corrected mean field, in their own unit.
    span : tuple of (float, float)
        Least and greatest result over the range, by the corrected mean field.
    points : tuple of Finding
        All points that were run.
    failures : tuple of Failure
        Cases that could not be run.
    notes : tuple of str
        What must be said with the answer.
    """

    aim: Aim
    reached: bool
    confirmed: bool
    value: Statistic
    result: Statistic
    tried: float
    others: tuple[float, ...]
    span: tuple[float, float]
    points: tuple[Finding, ...]
    failures: tuple[Failure, ...]
    notes: tuple[str, ...]


def solve_aim(
    aim: Aim,
    make: Make,
    journal: Journal,
    pool: Pool,
    *,
    progress: Callable[[Progress], None] | None = None,
) -> Answer:
    """Find the value that meets a target.

    Parameters
    ----------
    aim : Aim
        What is looked for.
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
    answer : Answer
        The value with its interval; where the target cannot be met, the best one.

    Raises
    ------
    RunError
        If no value of the range can be predicted or run, the disk refuses, or workers keep dying.
    """
    curve = _Curve(aim, make)
    names, points, failures = Cases(make), dict[str, Finding](), list[Failure]()
    wanted = curve.scaled(aim.wanted)
    shift = 0.0  # runs less mean field; of a temperature in K, else of logarithms
    place, met = math.nan, False
    for _ in range(_ROUNDS):
        crossings = curve.crossings(wanted - shift)
        before, place = place, curve.nearest(wanted - shift)
        if crossings:
            place = crossings[0 if aim.pick == "lowest" else -1]
        if place == before:  # nothing nearer to the target is left
            break
        point = aim.point(curve.value(place))
        found, failed = _replicas(aim, point, names, journal, pool, progress)
        points[point.label] = found
        failures.extend(failed)
        result = _result(aim, found, journal)
        shift = curve.scaled(result.value) - curve.at(place)
        met = result.low <= aim.wanted <= result.high
        if met:
            break
    reached = met or bool(curve.crossings(wanted - shift))
    notes = curve.notes()
    value, others = Statistic(value=aim.written(curve.value(place))), tuple[float, ...]()
    if reached:
        value, others, closed = _interval(aim, curve, place, shift, result)
        if not closed:
            notes.append(
                f"the interval is cut off where the {aim.quantity} turns or the range ends"
            )
    if reached and not met:
        notes.append(
            f"not confirmed: after {len(points)} rounds the runs still miss the target; more "
            "replicas or a larger window would help"
        )
    return Answer(
        aim=aim,
        reached=reached,
        confirmed=met or not reached,
        value=value,
        result=result,
        tried=aim.written(curve.value(place)),
        others=others,
        span=(
            curve.unscaled(float(np.nanmin(curve.values)) + shift),
            curve.unscaled(float(np.nanmax(curve.values)) + shift),
        ),
        points=tuple(points.values()),
        failures=tuple(failures),
        notes=tuple(notes),
    )


def _replicas(
    aim: Aim,
    point: Point,
    names: Cases,
    journal: Journal,
    pool: Pool,
    progress: Callable[[Progress], None] | None,
) -> tuple[Finding, list[Failure]]:
    cases = [names.case(point, replica) for replica in range(aim.replicas)]
    failures = run_cases(
        cases, Job(make=names.make), journal, pool, total=len(cases), progress=progress
    )
    found = gather(point, names, aim.replicas, journal)
    if found is None or len(found.keys) < 2:
        raise RunError(f"the runs with {point.label} failed: {failures[0].message}")
    return found, failures


def _result(aim: Aim, found: Finding, journal: Journal) -> Statistic:
    """Return the mean over the replicas with Student's interval at the confidence asked for."""
    key, _ = QUANTITIES[aim.quantity]
    values = [journal[name]["numbers"].get(key) for name in found.keys]
    if any(value is None for value in values):
        raise RunError(f"the runs with {found.point.label} have no {aim.quantity}")
    each = np.array(values, dtype=np.float64)
    error = float(each.std(ddof=1)) / math.sqrt(each.size)
    half = float(stdtrit(each.size - 1, (1 + aim.confidence) / 2)) * error
    mean = float(each.mean())
    return Statistic(value=mean, low=mean - half, high=mean + half)


def _interval(
    aim: Aim, curve: _Curve, place: float, shift: float, result: Statistic
) -> tuple[Statistic, tuple[float, ...], bool]:
    """Return the value with its interval, the other values, and whether both ends are known.

    The interval is what the target would ask for if the runs had come out at either end of theirs.
    """
    wanted = curve.scaled(aim.wanted)
    crossings = curve.crossings(wanted - shift) or [place]
    near = min(crossings, key=lambda crossing: abs(crossing - place))
    limits, closed = [near], True
    for end in (result.low, result.high):
        level = wanted - (curve.scaled(end) - curve.at(place))
        same = [c for c in curve.crossings(level) if curve.rises(c) == curve.rises(near)]
        closed &= bool(same)
        limits.append(
            min(same, key=lambda crossing: abs(crossing - near))
            if same
            else curve.end_of_branch(near, up=level > wanted - shift)
        )
    low, value, high = (
        aim.written(curve.value(limit)) for limit in (min(limits), near, max(limits))
    )
    others = tuple(aim.written(curve.value(c)) for c in crossings if c != near)
    return Statistic(value=value, low=low, high=high), others, closed


class _Curve:
    """The mean field over the range: nodes with the turns among them, and crossings of a level.

    In place of a mean diameter it has that of the mean area (in 3D of the mean volume): the runs
    tell the ratio of the two.

    A place is the logarithm of a value, or the value itself on a linear scale; temperatures stand
    as they are, lengths and times as logarithms.
    """

    def __init__(self, aim: Aim, make: Make) -> None:
        self.aim, self.make = aim, make
        self.fault = f"there is no {aim.quantity}"
        self._known: dict[float, float] = {}
        ends = (aim.low, aim.high)
        low, high = np.log(ends) if aim.scale == "logarithmic" else ends
        self._take(np.linspace(low, high, _NODES).tolist())
        if not np.isfinite(self.values).any():
            written = [format_si(end, aim.unit or "1") for end in ends]
            raise RunError(
                f"no value of {aim.key} between {written[0]} and {written[1]} can be predicted: "
                f"{self.fault}"
            )
        refined = [self._refined(k) for k in self.turns()]
        self._take([*self.places, *refined])

    def _take(self, places: list[float]) -> None:
        self.places = sorted(set(places))
        self.values: NDArray[np.float64] = np.array([self.at(place) for place in self.places])

    def value(self, place: float) -> float:
        """Return the value at a place in SI units."""
        value = math.exp(place) if self.aim.scale == "logarithmic" else place
        return min(max(value, self.aim.low), self.aim.high)

    def scaled(self, number: float) -> float:
        """Return a headline number on the scale of the curve."""
        if self.aim.quantity == "peak temperature":
            return number
        return math.log(number) if number > 0 else -math.inf

    def unscaled(self, number: float) -> float:
        """Return a number on the scale of the curve as a headline number."""
        return number if self.aim.quantity == "peak temperature" else math.exp(number)

    def at(self, place: float) -> float:
        """Return the mean field at a place; nan where there is none."""
        if place not in self._known:
            self._known[place] = self._predict(place)
        return self._known[place]

    def _predict(self, place: float) -> float:
        aim = self.aim
        try:
            settings = self.make(aim.point(self.value(place)).document)
            found = kinetics(settings, temperature_step=_STEP)
        except SpheruError as fault:
            self.fault = str(fault)
            return math.nan
        if aim.quantity == "mean diameter":
            return self.scaled(typical_diameter(settings.sample, found) * 1e6)
        course = Course(time=found.clock.time, fraction=found.fraction)
        marks = landmarks(course, found.clock, settings.material.t_m0, smoothing=_SMOOTHING)
        if aim.quantity == "half time":
            return self.scaled(marks.half_time)
        peak = marks.peak_temperature
        return math.nan if peak is None else self.scaled(peak - ZERO_CELSIUS)

    def turns(self) -> list[int]:
        """Return the nodes at which the curve turns by more than a trifle."""
        known = np.flatnonzero(np.isfinite(self.values))
        trifle = _FLAT * float(np.ptp(self.values[known]))
        found, top, bottom = [], known[0], known[0]  # the highest and the lowest since the turn
        rising: bool | None = None
        for k in known:
            top = k if self.values[k] > self.values[top] else top
            bottom = k if self.values[k] < self.values[bottom] else bottom
            if rising is not False and self.values[k] < self.values[top] - trifle:
                found.extend([int(top)] if rising else [])
                rising, bottom = False, k
            elif rising is not True and self.values[k] > self.values[bottom] + trifle:
                found.extend([] if rising is None else [int(bottom)])
                rising, top = True, k
        return found

    def _refined(self, k: int) -> float:
        """Return the place of a turn between the neighbours of a node."""
        low, high = self.places[k - 1], self.places[min(k + 1, len(self.places) - 1)]
        sign = 1.0 if self.values[k] < self.values[k - 1] else -1.0
        found = minimize_scalar(
            lambda place: sign * self.at(place),
            bounds=(low, high),
            method="bounded",
            options={"xatol": 1e-2 * (high - low)},
        )
        return float(found.x)

    def crossings(self, level: float) -> list[float]:
        """Return the places at which the mean field meets a level, from low to high."""
        found = [p for p, value in zip(self.places, self.values, strict=True) if value == level]
        off = self.values - level
        for k in np.flatnonzero(off[1:] * off[:-1] < 0).tolist():
            low, high = self.places[k : k + 2]
            found.append(
                float(brentq(lambda place: self.at(place) - level, low, high, xtol=1e-5, rtol=1e-6))
            )
        return sorted(found)

    def nearest(self, level: float) -> float:
        """Return the node whose mean field is nearest to a level."""
        return self.places[int(np.nanargmin(np.abs(self.values - level)))]

    def rises(self, place: float) -> bool:
        """Tell whether the mean field rises between the nodes around a place."""
        k = min(max(int(np.searchsorted(self.places, place)), 1), len(self.places) - 1)
        return bool(self.values[k] > self.values[k - 1])

    def end_of_branch(self, place: float, *, up: bool) -> float:
        """Return where the curve stops rising (or falling) on the way from a place."""
        step = 1 if self.rises(place) == up else -1
        k = int(np.searchsorted(self.places, place)) - (step < 0)
        k = min(max(k, 0), len(self.places) - 1)
        while 0 <= k + step < len(self.places):
            change = self.values[k + step] - self.values[k]
            if not (change > 0 if up else change < 0):
                break
            k += step
        return self.places[k]

    def notes(self) -> list[str]:
        """Say where the curve turns, and where there is none."""
        notes = []
        for k in self.turns():
            word = "greatest" if self.values[k] > self.values[k - 1] else "least"
            at = self.aim.point(self.value(self.places[k])).label
            notes.append(
                f"the {self.aim.quantity} does not only rise or fall: by mean field it is {word} "
                f"near {at}, so that a target may be met more than once"
            )
        if missing := int(np.count_nonzero(~np.isfinite(self.values))):
            notes.append(f"at {missing} places of the range there is no prediction: {self.fault}")
        return notes
