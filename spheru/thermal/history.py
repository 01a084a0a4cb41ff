"""Temperature over time: holds, ramps, quenches and measured traces.

One temperature for the whole sample; no material, no growth. Kelvins and seconds.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = ["History", "Hold", "Quench", "Ramp", "Segment"]

_JOIN = 1e-6  # K, how far the ends of two neighbouring segments may lie apart


def _require_temperature(where: str, value: float) -> None:
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"{where}: expected an absolute temperature above 0 K, got {value:g} K")


def _require_time(where: str, value: float) -> None:
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"{where}: expected a time above 0 s, got {value:g} s")


@dataclass(frozen=True, slots=True, kw_only=True)
class Ramp:
    """Temperature that changes linearly with time, downwards or upwards.

    Attributes
    ----------
    start, end : float
        Temperatures at the two ends [K], > 0.
    duration : float
        How long it takes [s], > 0.

    Raises
    ------
    ValidityError
        If a temperature or the duration is out of range.

    Examples
    --------
    100 K at 10 K/min (1/6 K/s) take 600 s:

    >>> Ramp.until(start=450.0, end=350.0, rate=10 / 60).duration
    600.0

    60 s of heating at 10 K/min add 10 K:

    >>> Ramp.lasting(start=350.0, rate=-10 / 60, duration=60.0).end
    360.0
    """

    start: float
    end: float
    duration: float

    def __post_init__(self) -> None:
        _require_temperature("ramp, start", self.start)
        _require_temperature("ramp, end", self.end)
        _require_time("ramp, duration", self.duration)

    @classmethod
    def until(cls, *, start: float, end: float, rate: float) -> Ramp:
        """Return the ramp at a given rate that ends at a given temperature.

        Parameters
        ----------
        start, end : float
            Temperatures at the two ends [K], > 0.
        rate : float
            Cooling rate [K/s], positive for cooling, negative for heating; not 0.

        Returns
        -------
        ramp : Ramp
            The ramp.

        Raises
        ------
        ValidityError
            If the rate is 0, or has the sign that leads away from the end.
        """
        _require_rate(rate)
        if (start - end) * rate <= 0:
            raise ValidityError(
                f"ramp: a cooling rate of {rate:g} K/s does not lead from {start:g} K to "
                f"{end:g} K; cooling is positive, heating negative"
            )
        return cls(start=start, end=end, duration=(start - end) / rate)

    @classmethod
    def lasting(cls, *, start: float, rate: float, duration: float) -> Ramp:
        """Return the ramp at a given rate that lasts a given time.

        Parameters
        ----------
        start : float
            Temperature at its beginning [K], > 0.
        rate : float
            Cooling rate [K/s], positive for cooling, negative for heating; not 0.
        duration : float
            How long it lasts [s], > 0.

        Returns
        -------
        ramp : Ramp
            The ramp.

        Raises
        ------
        ValidityError
            If the rate is 0, or the ramp would end at or below 0 K.
        """
        _require_rate(rate)
        return cls(start=start, end=start - rate * duration, duration=duration)


def _require_rate(rate: float) -> None:
    if not math.isfinite(rate) or rate == 0:
        raise ValidityError(
            f"ramp: expected a cooling rate other than 0 K/s, got {rate:g} K/s; "
            "for a constant temperature use a hold"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class Hold:
    """Constant temperature.

    Attributes
    ----------
    temperature : float
        Temperature [K], > 0.
    duration : float
        How long it lasts [s], > 0.

    Raises
    ------
    ValidityError
        If the temperature or the duration is out of range.
    """

    temperature: float
    duration: float

    def __post_init__(self) -> None:
        _require_temperature("hold", self.temperature)
        _require_time("hold, duration", self.duration)

    @property
    def start(self) -> float:
        """Temperature at the beginning [K]."""
        return self.temperature

    @property
    def end(self) -> float:
        """Temperature at the end [K]."""
        return self.temperature


@dataclass(frozen=True, slots=True, kw_only=True)
class Quench:
    r"""Temperature that relaxes exponentially to that of a bath.

    .. math:: T(t) = T_\infty + (T_0 - T_\infty) \exp(-t/t_c)

    (Newton's law of cooling for a body without gradients inside.)

    Attributes
    ----------
    start : float
        Temperature at the beginning [K], > 0.
    target : float
        Temperature of the bath [K], > 0; it may lie above the start.
    time_constant : float
        Time in which the difference falls to 1/e [s], > 0.
    duration : float
        How long it lasts [s], > 0.

    Raises
    ------
    ValidityError
        If a temperature or a time is out of range.

    Examples
    --------
    From 400 K towards 300 K with 2 s; after 2 ln 2 s half the difference is left:

    >>> round(Quench(start=400.0, target=300.0, time_constant=2.0, duration=2 * 0.693147181).end, 6)
    350.0
    """

    start: float
    target: float
    time_constant: float
    duration: float

    def __post_init__(self) -> None:
        _require_temperature("quench, start", self.start)
        _require_temperature("quench, target", self.target)
        _require_time("quench, time constant", self.time_constant)
        _require_time("quench, duration", self.duration)

    @property
    def end(self) -> float:
        """Temperature at the end [K]."""
        left = math.exp(-self.duration / self.time_constant)
        return self.target + (self.start - self.target) * left


Segment = Ramp | Hold | Quench


@dataclass(frozen=True, slots=True, kw_only=True)
class History:
    """Temperature of the sample over time, segment after segment; time starts at 0.

    Attributes
    ----------
    segments : tuple of Ramp, Hold or Quench
        The pieces in their order; each starts where the one before ends.

    Raises
    ------
    ValidityError
        If there is no segment, or one does not start where the one before ends.

    Examples
    --------
    >>> history = History(segments=(
    ...     Hold(temperature=450.0, duration=60.0),
    ...     Ramp.until(start=450.0, end=350.0, rate=1.0),
    ... ))
    >>> history.duration, history.temperature([60.0, 70.0, 160.0]).tolist()
    (160.0, [450.0, 440.0, 350.0])
    """

    segments: tuple[Segment, ...]
    # by segment: beginning [s], length [s], temperatures at the ends [K]
    _begin: NDArray[np.float64] = field(init=False, repr=False, compare=False)
    _length: NDArray[np.float64] = field(init=False, repr=False, compare=False)
    _start: NDArray[np.float64] = field(init=False, repr=False, compare=False)
    _end: NDArray[np.float64] = field(init=False, repr=False, compare=False)
    _quenches: tuple[int, ...] = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        segments = tuple(self.segments)
        if not segments:
            raise ValidityError("history: expected at least one segment, got none")
        length = np.array([s.duration for s in segments])
        start = np.array([s.start for s in segments])
        end = np.array([s.end for s in segments])
        apart = np.flatnonzero(np.abs(start[1:] - end[:-1]) > _JOIN)
        if apart.size:
            k = int(apart[0])
            raise ValidityError(
                f"history: segment {k + 1} ends at {end[k]:g} K, but segment {k + 2} starts at "
                f"{start[k + 1]:g} K; put a ramp or a quench between them"
            )
        values = {
            "segments": segments,
            "_begin": np.concatenate(([0.0], np.cumsum(length))),
            "_length": length,
            "_start": start,
            "_end": end,
            "_quenches": tuple(k for k, s in enumerate(segments) if isinstance(s, Quench)),
        }
        for name, value in values.items():
            if isinstance(value, np.ndarray):
                value.setflags(write=False)
            object.__setattr__(self, name, value)

    @classmethod
    def from_trace(cls, time: ArrayLike, temperature: ArrayLike) -> History:
        """Return the history that runs straight from each measured point to the next.

        Parameters
        ----------
        time : array_like of float, shape (n,)
            Times [s], rising strictly, n >= 2; counted from the first one.
        temperature : array_like of float, shape (n,)
            Temperatures [K], > 0.

        Returns
        -------
        history : History
            A ramp between each two neighbouring points; every point is kept.

        Raises
        ------
        ValidityError
            If there are fewer than two points, a value is not finite, times do not rise, or a
            temperature is not above 0 K; the row is named (the first one is 1).

        Examples
        --------
        Halfway between 450 K and 440 K:

        >>> float(History.from_trace([5.0, 7.0, 9.0], [450.0, 440.0, 441.0]).temperature(1.0))
        445.0
        """
        times = np.asarray(time, dtype=np.float64)
        kelvins = np.asarray(temperature, dtype=np.float64)
        if times.ndim != 1 or times.shape != kelvins.shape:
            raise ValidityError(
                "trace: expected as many times as temperatures, got shapes "
                f"{times.shape} and {kelvins.shape}"
            )
        if times.size < 2:
            raise ValidityError(f"trace: expected at least two rows, got {times.size}")
        faults = (
            (~np.isfinite(times), "expected a finite time, got {0:g} s"),
            (~np.isfinite(kelvins), "expected a finite temperature, got {1:g} K"),
            (kelvins <= 0, "expected a temperature above 0 K, got {1:g} K"),
            (
                times <= np.concatenate(([-np.inf], times[:-1])),
                "expected a time later than in the row before, got {0:g} s; sort the rows by time",
            ),
        )
        for wrong, text in faults:
            if wrong.any():
                row = int(np.argmax(wrong))
                found = text.format(times[row], kelvins[row])
                raise ValidityError(f"trace, row {row + 1}: {found}")
        points = kelvins.tolist()
        steps = np.diff(times).tolist()
        return cls(
            segments=tuple(
                Ramp(start=a, end=b, duration=d)
                for a, b, d in zip(points[:-1], points[1:], steps, strict=True)
            )
        )

    @property
    def duration(self) -> float:
        """Time from beginning to end [s]."""
        return float(self._begin[-1])

    @property
    def start_temperature(self) -> float:
        """Temperature at the beginning [K]."""
        return float(self._start[0])

    @property
    def end_temperature(self) -> float:
        """Temperature at the end [K]."""
        return float(self._end[-1])

    @property
    def highest_temperature(self) -> float:
        """Highest temperature reached [K]."""
        return float(max(self._start.max(), self._end.max()))

    @property
    def lowest_temperature(self) -> float:
        """Lowest temperature reached [K]."""
        return float(min(self._start.min(), self._end.min()))

    @property
    def turning_times(self) -> NDArray[np.float64]:
        """Times at which a segment begins or ends [s], shape (segments + 1,)."""
        return self._begin

    def segment_at(self, time: ArrayLike) -> NDArray[np.intp]:
        """Return which segment a time belongs to.

        Parameters
        ----------
        time : array_like of float, shape (...)
            Times [s] from 0 to the duration.

        Returns
        -------
        segment : ndarray of int, shape (...)
            Index into `segments`; where two meet, the later one.

        Raises
        ------
        ValidityError
            If a time lies outside the history.
        """
        times = np.asarray(time, dtype=np.float64)
        if times.size and not (times.min() >= 0 and times.max() <= self.duration):
            raise ValidityError(
                f"history: expected times from 0 to {self.duration:g} s, got "
                f"{times.min():g} to {times.max():g} s"
            )
        found = np.searchsorted(self._begin, times, side="right") - 1
        return np.minimum(found, len(self.segments) - 1)

    def temperature(self, time: ArrayLike) -> NDArray[np.float64]:
        """Return the temperature at some times.

        Parameters
        ----------
        time : array_like of float, shape (...)
            Times [s] from 0 to the duration.

        Returns
        -------
        temperature : ndarray of float64, shape (...)
            Temperatures [K].

        Raises
        ------
        ValidityError
            If a time lies outside the history.
        """
        times = np.asarray(time, dtype=np.float64)
        return self.temperature_within(self.segment_at(times), times)

    def temperature_within(
        self, segment: NDArray[np.intp], time: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return the temperature where the segments of the times are known already.

        Parameters
        ----------
        segment : ndarray of int, shape (...) or one that broadcasts to it
            Index of the segment of each time.
        time : ndarray of float64, shape (...)
            Times [s] within those segments.

        Returns
        -------
        temperature : ndarray of float64, shape (...)
            Temperatures [K].
        """
        slope = (self._end - self._start) / self._length
        elapsed = time - self._begin[segment]
        kelvins = np.asarray(self._start[segment] + slope[segment] * elapsed)
        for k in self._quenches:
            quench = self.segments[k]
            if isinstance(quench, Quench):
                mine = np.broadcast_to(segment == k, elapsed.shape)
                left = np.exp(-elapsed[mine] / quench.time_constant)
                kelvins[mine] = quench.target + (quench.start - quench.target) * left
        return kelvins

    def crossings(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return when a segment passes through a temperature.

        Parameters
        ----------
        temperature : array_like of float, shape () or (segments,)
            A temperature [K], or one for every segment.

        Returns
        -------
        time : ndarray of float64, shape (m,)
            The times [s] in rising order; the ends of segments do not count.

        Examples
        --------
        >>> history = History.from_trace([0.0, 10.0, 20.0], [400.0, 390.0, 400.0])
        >>> history.crossings(395.0).tolist()
        [5.0, 15.0]
        """
        level = np.broadcast_to(np.asarray(temperature, dtype=np.float64), self._start.shape)
        low, high = np.minimum(self._start, self._end), np.maximum(self._start, self._end)
        k = np.flatnonzero((low < level) & (level < high))
        times = self._begin[k] + self._length[k] * (
            (level[k] - self._start[k]) / (self._end[k] - self._start[k])
        )
        for q in set(self._quenches).intersection(k.tolist()):
            quench = self.segments[q]
            if isinstance(quench, Quench):
                share = (level[q] - quench.target) / (quench.start - quench.target)
                times[k == q] = self._begin[q] - quench.time_constant * math.log(share)
        return np.asarray(np.clip(times, self._begin[k], self._begin[k + 1]), dtype=np.float64)

    def new_lows(self) -> NDArray[np.float64]:
        """Return when the temperature falls again below the lowest one reached so far.

        Returns
        -------
        time : ndarray of float64, shape (m,)
            The times [s] inside segments, in rising order; after them sites wake up anew.

        Examples
        --------
        Down to 390 K, up to 400 K, and below 390 K again after 10 K of cooling:

        >>> History.from_trace([0.0, 10.0, 20.0, 40.0], [400.0, 390.0, 400.0, 380.0]).new_lows()
        array([30.])
        """
        before = np.minimum.accumulate(np.minimum(self._start, self._end))
        return self.crossings(np.concatenate(([self._start[0]], before[:-1])))
