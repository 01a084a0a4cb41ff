"""Landmarks of a crystallisation curve: peak, onset, half time.

The same functions read the simulated and the mean-field curve; how these come about stands
elsewhere.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from spheru.quadrature import weighted_sum
from spheru.thermal.history import Hold

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.thermal.clock import Clock

__all__ = ["Course", "Landmarks", "landmarks", "time_origin"]

_GRID = 2000  # points on which maxima are looked for
_CLEAR = 0.1  # share of the largest maximum by which another one must stand out to be listed
_EDGE = (0.3, 0.7)  # shares of the height between which the leading edge is fitted


@dataclass(frozen=True, slots=True, kw_only=True)
class Course:
    """Transformed fraction over time, linear between its nodes.

    Attributes
    ----------
    time : ndarray of float64, shape (n,)
        Times [s], not falling.
    fraction : ndarray of float64, shape (n,)
        Transformed fraction [-], not falling.
    """

    time: NDArray[np.float64]
    fraction: NDArray[np.float64]

    def at(self, time: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the transformed fraction at some times [s]."""
        return np.interp(time, self.time, self.fraction)

    def reaches(self, share: float) -> float:
        """Return the time [s] at which a share of the final fraction is reached.

        Examples
        --------
        >>> course = Course(time=np.array([0.0, 10.0]), fraction=np.array([0.0, 0.8]))
        >>> course.reaches(0.5)
        5.0
        """
        level = share * self.fraction[-1]
        k = max(int(np.searchsorted(self.fraction, level)), 1)
        low, high = self.fraction[k - 1], self.fraction[k]
        part = 0.0 if high <= low else (level - low) / (high - low)
        return float(self.time[k - 1] + part * (self.time[k] - self.time[k - 1]))

    def rate(self, time: NDArray[np.float64], window: float) -> NDArray[np.float64]:
        """Return the rate of transformation [s-1], averaged over a window of time [s].

        The window is cut off at the ends of the curve.
        """
        low = np.maximum(time - window / 2, self.time[0])
        high = np.minimum(time + window / 2, self.time[-1])
        width = high - low
        rate: NDArray[np.float64] = np.divide(
            self.at(high) - self.at(low), width, out=np.zeros_like(width), where=width > 0
        )
        return rate


@dataclass(frozen=True, slots=True, kw_only=True)
class Landmarks:
    """What a laboratory reads off a crystallisation curve.

    Temperatures are None where the material does not crystallise while it cools, those of the peak
    also where the rate still rises when the history ends.

    Attributes
    ----------
    peak_temperature : float or None
        Where d(fraction)/dT is largest [K].
    onset_temperature : float or None
        Extrapolated onset [K], in the manner of ISO 11357: where the tangent of the leading edge,
        fitted between 30 and 70 % of the height of the peak, meets the zero line.
    half_temperature : float or None
        Where half of the final fraction has transformed [K].
    half_time : float
        Time to half of the final fraction [s], from the origin that `half_time_from` names.
    mean_time : float
        Mean time at which a point that transforms does so [s], from the same origin.
    half_time_from : str
        ``"start of the hold"``, ``"crossing of the equilibrium melting temperature"`` or ``"start
        of the history"``.
    peaks : tuple of (float, float)
        Temperature [K] and share of the largest, for every clear maximum, the largest first.
    smoothing_time : float
        Width of the window over which the rate is averaged [s].
    smoothing_temperature : float or None
        The same as a difference of temperature [K].
    """

    peak_temperature: float | None
    onset_temperature: float | None
    half_temperature: float | None
    half_time: float
    mean_time: float
    half_time_from: str
    peaks: tuple[tuple[float, float], ...]
    smoothing_time: float
    smoothing_temperature: float | None


def time_origin(clock: Clock, time: float, t_m0: float) -> tuple[float, str]:
    """Return the moment from which the half time counts, and its name.

    Parameters
    ----------
    clock : Clock
        The clock of the history.
    time : float
        The moment of half transformation [s].
    t_m0 : float
        Equilibrium melting temperature [K].

    Returns
    -------
    origin : float
        Start of the hold in which that moment lies; on cooling the last crossing of `t_m0` before
        it; the start of the history where that lies below `t_m0` already [s].
    name : str
        Which of the three it is.
    """
    begin = 0.0
    for segment in clock.history.segments:
        if begin <= time <= begin + segment.duration and isinstance(segment, Hold):
            return begin, "start of the hold"
        begin += segment.duration
    above = np.flatnonzero((clock.temperature >= t_m0) & (clock.time <= time))
    if above.size == 0:
        return 0.0, "start of the history"
    k = int(above[-1])
    return float(clock.time[k]), "crossing of the equilibrium melting temperature"


def landmarks(course: Course, clock: Clock, t_m0: float, *, smoothing: float) -> Landmarks:
    """Read the landmarks off a crystallisation curve.

    Parameters
    ----------
    course : Course
        Transformed fraction over time.
    clock : Clock
        The clock of the history.
    t_m0 : float
        Equilibrium melting temperature [K].
    smoothing : float
        Width of the averaging window as a share of the time from 10 to 90 % of the transformation.

    Returns
    -------
    landmarks : Landmarks
        Peak, onset, half time and the rest.
    """
    tenth, half, nine = (course.reaches(share) for share in (0.1, 0.5, 0.9))
    window = smoothing * (nine - tenth)
    origin, name = time_origin(clock, half, t_m0)
    first, last = course.reaches(1e-3), course.reaches(1 - 1e-3)
    pad = max(last - first, 1e-9) / 2
    ends = max(first - pad, course.time[0]), min(last + pad, course.time[-1])
    mean = _mean_time(course) - origin
    temperature = clock.temperature_at(np.array([tenth, nine]))
    cooling = bool(temperature[0] - temperature[1] > 1e-3)
    if not cooling:
        return Landmarks(
            peak_temperature=None,
            onset_temperature=None,
            half_temperature=None,
            half_time=half - origin,
            mean_time=mean,
            half_time_from=name,
            peaks=(),
            smoothing_time=window,
            smoothing_temperature=None,
        )
    time = np.linspace(*ends, _GRID)
    over = clock.temperature_at(time)
    step = np.gradient(over, time)
    falling = step < 0
    time, over, step = time[falling], over[falling], step[falling]
    rate = course.rate(time, window) / -step
    peaks = _maxima(over, rate, max(round(window / (time[1] - time[0])), 1))
    top = int(np.argmax(rate))
    return Landmarks(
        peak_temperature=peaks[0][0] if peaks else None,
        onset_temperature=_onset(over[: top + 1], rate[: top + 1]) if peaks else None,
        half_temperature=float(clock.temperature_at(np.array([half]))[0]),
        half_time=half - origin,
        mean_time=mean,
        half_time_from=name,
        peaks=peaks,
        smoothing_time=window,
        smoothing_temperature=float(smoothing * (temperature[0] - temperature[1])),
    )


def _mean_time(course: Course) -> float:
    gained = np.diff(course.fraction)
    middle = (course.time[1:] + course.time[:-1]) / 2
    return float(
        (weighted_sum(gained, middle) + course.fraction[0] * course.time[0]) / course.fraction[-1]
    )


def _maxima(
    temperature: NDArray[np.float64], rate: NDArray[np.float64], window: int
) -> tuple[tuple[float, float], ...]:
    """Return the clear maxima, each refined by a parabola over a window of points.

    A maximum is clear where it rises by a tenth of the largest above the lower of the two valleys
    that part it from higher ones.
    """
    top = int(np.argmax(rate))
    turns = (rate[1:-1] >= rate[:-2]) & (rate[1:-1] > rate[2:])
    inner = np.flatnonzero(turns & (rate[1:-1] > _CLEAR * rate[top])) + 1
    found = []
    for k in inner:
        valleys = [_valley(side) for side in (rate[k::-1], rate[k:])]
        if k == top or rate[k] - max(valleys) > _CLEAR * rate[top]:
            low, high = max(k - window, 0), min(k + window + 1, len(rate))
            at = temperature[low:high] - temperature[k]
            shape = np.polyfit(at, rate[low:high], 2)
            shift = -shape[1] / (2 * shape[0]) if shape[0] < 0 else 0.0
            shift = float(np.clip(shift, at.min(), at.max()))
            found.append((float(temperature[k] + shift), float(rate[k] / rate[top])))
    return tuple(sorted(found, key=lambda peak: -peak[1]))


def _valley(side: NDArray[np.float64]) -> float:
    """Return the lowest value before the first one above the beginning of a side."""
    higher = np.flatnonzero(side > side[0])
    return float(side[: higher[0]].min()) if higher.size else 0.0


def _onset(temperature: NDArray[np.float64], rate: NDArray[np.float64]) -> float:
    """Return where the tangent of the leading edge meets zero; the curve ends at its peak."""
    low = np.flatnonzero(rate < _EDGE[0] * rate[-1])
    begin = low[-1] + 1 if low.size else 0
    edge = slice(begin, None)
    inside = rate[edge] <= _EDGE[1] * rate[-1]
    if np.count_nonzero(inside) < 3:
        return float(temperature[-1])
    slope, height = np.polyfit(temperature[edge][inside], rate[edge][inside], 1)
    return float(-height / slope)
