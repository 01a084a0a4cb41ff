"""The clock of growth: the length grown by each moment of a thermal history.

Turns temperature over time and any growth rate of temperature into the grown length
tau(t) = integral of G(T(t)) dt and back. Knows neither material laws nor nuclei.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from spheru.errors import ValidityError
from spheru.quadrature import GAUSS_POINTS, GAUSS_WEIGHTS, distinct, weighted_sum
from spheru.thermal.history import Quench

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike

    from spheru.thermal.history import History

__all__ = ["Clock", "Rate"]

Rate = Callable[[NDArray[np.float64]], NDArray[np.float64]]  # of the temperature [K]

_NEAR = 1e-9  # K, how closely a pair of nodes encloses a temperature at which a law jumps
_TOLERANCE = 1e-10  # of the final grown length, allowed to one interval
_ROUNDING = 1e-12  # of the final grown length: lengths this far beyond it are taken for it
_FINEST = 1e-13  # of the duration: no interval is halved below this

# Beside the Gauss rule of five points, the rule of degree 3 on the points 0, 2 and 4
# shows where an interval is too long; _POWERS turns five samples into the coefficients of
# x, x**2 ... x**5 of the integral from 0 to x of the polynomial through them.
_outer = 1 / (6 * (2 * GAUSS_POINTS[4] - 1) ** 2)
_CHECK = np.array([_outer, 0.0, 1 - 2 * _outer, 0.0, _outer])
_POWERS = np.linalg.inv(np.vander(GAUSS_POINTS, increasing=True)).T / np.arange(1, 6)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Clock:
    """Grown length over a thermal history, on nodes close enough for all that follows.

    Attributes
    ----------
    time : ndarray of float64, shape (n,)
        Nodes [s], from 0 to the end of the history, rising strictly.
    temperature : ndarray of float64, shape (n,)
        Temperature at the nodes [K].
    grown_length : ndarray of float64, shape (n,)
        Radius at the nodes of a crystal born at the start [m]; never falls.
    growth_rate : ndarray of float64, shape (n,)
        Growth rate at the nodes [m/s].
    lowest_temperature : ndarray of float64, shape (n,)
        Lowest temperature reached by then [K].
    history : History
        Temperature over time.
    growth : callable
        Growth rate [m/s] of temperatures [K], array to array of the same shape.

    Examples
    --------
    1 um/s for 100 s of a hold; half of the 100 um after 50 s:

    >>> from spheru.thermal.history import Hold, History
    >>> history = History(segments=(Hold(temperature=400.0, duration=100.0),))
    >>> clock = Clock.from_history(history, lambda kelvins: np.full_like(kelvins, 1e-6))
    >>> [round(1e6 * length, 9) for length in clock.grown_length.tolist()]
    [0.0, 100.0]
    >>> round(float(clock.time_at(50e-6)), 9)
    50.0
    """

    time: NDArray[np.float64]
    temperature: NDArray[np.float64]
    grown_length: NDArray[np.float64]
    growth_rate: NDArray[np.float64]
    lowest_temperature: NDArray[np.float64]
    history: History
    growth: Rate
    _samples: NDArray[np.float64] = field(repr=False)  # (n - 1, 5), rate inside the intervals

    @classmethod
    def from_history(
        cls,
        history: History,
        growth: Rate,
        *,
        breakpoints: Sequence[float] = (),
        temperature_step: float = 0.01,
        extra_times: ArrayLike = (),
    ) -> Clock:
        """Run the clock through a history.

        Nodes stand at the ends of segments, at equal steps of temperature, where the temperature
        falls below its lowest value so far, and in pairs (1e-9 K on either side) around every
        passage of a breakpoint; more are put where the growth rate bends so strongly that the
        grown length would be wrong by more than 1e-10 of its final value.

        Parameters
        ----------
        history : History
            Temperature over time.
        growth : callable
            Growth rate [m/s], finite and >= 0, of an array of temperatures [K].
        breakpoints : sequence of float
            Temperatures at which a law jumps or has a kink [K].
        temperature_step : float
            Longest step of temperature between nodes [K], > 0.
        extra_times : array_like of float
            More nodes wanted [s].

        Returns
        -------
        clock : Clock
            The clock.

        Raises
        ------
        ValidityError
            If the step is not above 0, an extra time lies outside the history, or the growth
            rate is negative or not finite.
        """
        if not (math.isfinite(temperature_step) and temperature_step > 0):
            raise ValidityError(
                f"clock: expected a temperature step above 0 K, got {temperature_step:g} K"
            )
        times = [
            history.turning_times,
            _even_in_temperature(history, temperature_step),
            history.new_lows(),
            np.atleast_1d(np.asarray(extra_times, dtype=np.float64)),
        ]
        for level in breakpoints:
            times += [history.crossings(level - _NEAR), history.crossings(level + _NEAR)]
        return _run(history, growth, distinct(*times))

    def refined(self, times: ArrayLike) -> Clock:
        """Return the clock with more nodes.

        Parameters
        ----------
        times : array_like of float
            Times to add [s].

        Returns
        -------
        clock : Clock
            The same clock on all old nodes and the new ones.

        Raises
        ------
        ValidityError
            If a time lies outside the history.
        """
        new = np.atleast_1d(np.asarray(times, dtype=np.float64))
        return _run(self.history, self.growth, distinct(self.time, new))

    def integral(self, rate: Rate) -> NDArray[np.float64]:
        """Return the integral over time of any rate that depends on temperature.

        Parameters
        ----------
        rate : callable
            A rate [x/s] of an array of temperatures [K].

        Returns
        -------
        integral : ndarray of float64, shape (n,)
            Integral from the start to each node [x].

        Examples
        --------
        1 K/s from 400 K; the integral of T - 390 K over 10 s is (10 + 0)/2 * 10 = 50 K s:

        >>> from spheru.thermal.history import History
        >>> history = History.from_trace([0.0, 10.0], [400.0, 390.0])
        >>> clock = Clock.from_history(history, np.zeros_like)
        >>> round(float(clock.integral(lambda kelvins: kelvins - 390)[-1]), 9)
        50.0
        """
        steps = np.diff(self.time)
        samples = rate(_temperatures(self.history, self.time[:-1], steps))
        return _cumulative(steps * weighted_sum(samples, GAUSS_WEIGHTS))

    def temperature_at(self, time: ArrayLike) -> NDArray[np.float64]:
        """Return the temperature at some times.

        Parameters
        ----------
        time : array_like of float, shape (...)
            Times [s] within the history.

        Returns
        -------
        temperature : ndarray of float64, shape (...)
            Temperatures [K].

        Raises
        ------
        ValidityError
            If a time lies outside the history.
        """
        return self.history.temperature(time)

    def grown_length_at(self, time: ArrayLike) -> NDArray[np.float64]:
        """Return the grown length at some times.

        Parameters
        ----------
        time : array_like of float, shape (...)
            Times [s] within the history.

        Returns
        -------
        grown_length : ndarray of float64, shape (...)
            Grown lengths [m], to 1e-8 of the final one.

        Raises
        ------
        ValidityError
            If a time lies outside the history.
        """
        times = np.asarray(time, dtype=np.float64)
        self.history.segment_at(times)
        k = np.clip(np.searchsorted(self.time, times, side="right") - 1, 0, self.time.size - 2)
        steps = np.diff(self.time)[k]
        part = steps * _integrated(self._samples[k], (times - self.time[k]) / steps)
        return np.clip(self.grown_length[k] + part, self.grown_length[k], self.grown_length[k + 1])

    def time_at(self, grown_length: ArrayLike) -> NDArray[np.float64]:
        """Return the earliest time at which a length was grown.

        Parameters
        ----------
        grown_length : array_like of float, shape (...)
            Grown lengths [m], >= 0.

        Returns
        -------
        time : ndarray of float64, shape (...)
            Times [s]; inf for a length that the history never reaches.

        Raises
        ------
        ValidityError
            If a length is negative or not a number.
        """
        goal = np.asarray(grown_length, dtype=np.float64)
        if goal.size and not goal.min() >= 0:
            raise ValidityError(f"clock: expected grown lengths >= 0 m, got {goal.min():g} m")
        flat = goal.ravel()
        times = np.full(flat.shape, np.inf)
        times[flat <= 0] = 0.0
        final = self.grown_length[-1]
        flat = np.where((flat > final) & (flat <= final * (1 + _ROUNDING)), final, flat)
        inside = (flat > 0) & (flat <= final)
        # grown_length[k] < goal <= grown_length[k + 1]: the earliest such interval
        k = np.searchsorted(self.grown_length, flat[inside], side="left") - 1
        steps = np.diff(self.time)[k]
        share = (flat[inside] - self.grown_length[k]) / np.diff(self.grown_length)[k]
        times[inside] = self.time[k] + steps * _inverted(self._samples[k], share)
        return times.reshape(goal.shape)


def _even_in_temperature(history: History, step: float) -> NDArray[np.float64]:
    """Return when ramps and quenches have changed by equal steps of temperature [s]."""
    begin = history.turning_times
    change = np.array([abs(s.end - s.start) for s in history.segments])
    count = np.maximum(np.ceil(change / step), 1).astype(np.intp)
    quenched = [k for k, s in enumerate(history.segments) if isinstance(s, Quench)]
    plain = count.copy()
    plain[quenched] = 0
    first = np.repeat(np.cumsum(plain) - plain, plain)
    share = (np.arange(first.size) - first) / np.repeat(plain, plain)
    times = [np.repeat(begin[:-1], plain) + share * np.repeat(np.diff(begin), plain)]
    for k in quenched:
        quench = history.segments[k]
        if isinstance(quench, Quench):
            scale = quench.time_constant
            lost = -math.expm1(-quench.duration / scale)  # of the first difference
            falls = -scale * np.log1p(-lost * np.arange(count[k]) / count[k])
            # towards the end the steps of temperature take ever longer: time constants as well
            tail = scale * np.arange(1, min(40.0, quench.duration / scale))
            times.append(begin[k] + np.concatenate((falls, tail)))
    return np.minimum(np.concatenate(times), history.duration)


def _temperatures(
    history: History, left: NDArray[np.float64], steps: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Temperatures [K] at the five points inside each interval, shape (n, 5)."""
    segment = history.segment_at(left + steps / 2)[:, None]
    return history.temperature_within(segment, left[:, None] + steps[:, None] * GAUSS_POINTS)


def _run(history: History, growth: Rate, times: NDArray[np.float64]) -> Clock:
    """Integrate the growth rate over intervals, halving those where its rule fails."""
    history.segment_at(times)
    left, steps = times[:-1], np.diff(times)
    total = 0.0
    kept: list[tuple[NDArray[np.float64], NDArray[np.float64]]] = []
    while left.size:
        samples = _checked(growth(_temperatures(history, left, steps)))
        parts = steps * weighted_sum(samples, GAUSS_WEIGHTS)
        scale = total + float(parts.sum())
        wrong = np.abs(parts - steps * weighted_sum(samples, _CHECK)) > _TOLERANCE * scale
        wrong &= steps > _FINEST * history.duration
        kept.append((left[~wrong], samples[~wrong]))
        total += float(parts[~wrong].sum())
        half = steps[wrong] / 2
        left, steps = (
            np.concatenate((left[wrong], left[wrong] + half)),
            np.concatenate((half, half)),
        )
    begin = np.concatenate([k[0] for k in kept])
    order = np.argsort(begin, kind="stable")
    nodes = np.append(begin[order], times[-1])
    samples = np.concatenate([k[1] for k in kept])[order]
    temperature = history.temperature(nodes)
    values = {
        "time": nodes,
        "temperature": temperature,
        "grown_length": _cumulative(np.diff(nodes) * weighted_sum(samples, GAUSS_WEIGHTS)),
        "growth_rate": _checked(growth(temperature)),
        "lowest_temperature": np.minimum.accumulate(temperature),
        "_samples": samples,
    }
    for value in values.values():
        value.setflags(write=False)
    return Clock(history=history, growth=growth, **values)


def _checked(rate: NDArray[np.float64]) -> NDArray[np.float64]:
    rates = np.asarray(rate, dtype=np.float64)
    if rates.size and not (rates.min() >= 0 and np.isfinite(rates.max())):
        raise ValidityError(
            "clock: expected growth rates that are finite and >= 0 m/s, got "
            f"{rates.min():g} to {rates.max():g} m/s"
        )
    return rates


def _cumulative(parts: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.concatenate(([0.0], np.cumsum(parts)))


def _integrated(samples: NDArray[np.float64], x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Integral from 0 to x of the polynomial through five samples on [0, 1]."""
    a = np.einsum("...i,ij->...j", samples, _POWERS)
    value = a[..., 4] * x
    for j in (3, 2, 1, 0):
        value = (value + a[..., j]) * x
    return np.asarray(value)


def _inverted(samples: NDArray[np.float64], share: NDArray[np.float64]) -> NDArray[np.float64]:
    """Places x in [0, 1] by which a share of the whole integral is reached: guarded Newton."""
    a = np.einsum("...i,ij->...j", samples, _POWERS)
    a /= a.sum(axis=1, keepdims=True)
    slope = a * np.arange(1, 6)
    low, high, x = np.zeros_like(share), np.ones_like(share), share.copy()
    for _ in range(60):
        value, rise = a[:, 4] * x, slope[:, 4]
        for j in (3, 2, 1, 0):
            value, rise = (value + a[:, j]) * x, rise * x + slope[:, j]
        short = value < share
        low, high = np.where(short, x, low), np.where(short, high, x)
        step = (value - share) / np.where(rise > 0, rise, np.inf)
        new = np.where((x - step >= low) & (x - step <= high), x - step, (low + high) / 2)
        done = bool(np.all(np.abs(new - x) < 1e-14))
        x = new
        if done:
            break
    return x
