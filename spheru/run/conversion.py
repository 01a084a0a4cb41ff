"""Transformed fraction and heat flow over time, from the arrivals of the fronts.

Simulated and mean field side by side on one set of times, and the intervals of what is read off
the simulated curve.
"""

from __future__ import annotations

import itertools
from functools import cache, partial
from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import RunError
from spheru.measure.intervals import TILES, tile_interval, tile_waves
from spheru.run.course import Course, landmarks
from spheru.run.result import Conversion

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage
    from spheru.run.course import Landmarks
    from spheru.run.estimate import Estimate

__all__ = [
    "SMOOTHING",
    "conversion",
    "conversion_of_counts",
    "count_arrivals",
    "counts_shape",
    "highest_arrival",
    "last_arrival",
]

SMOOTHING: Final = 0.15  # window of the simulated rate, as a share of the time from 10 to 90 %
_BINS: Final = 1 << 12  # of the grown length, for the histogram of arrivals
_ROWS: Final = 400  # of conversion.csv, half of them even in time and half in fraction
_READ_OFF: Final = (
    "peak_temperature", "onset_temperature", "half_temperature", "half_time", "mean_time",
)  # fmt: skip


def conversion(image: LabelImage, expected: Estimate, *, spherulites: int) -> Conversion:
    """Return transformed fraction and heat flow over time.

    Parameters
    ----------
    image : LabelImage
        The map with its arrivals.
    expected : Estimate
        The mean field of the same run; its clock turns grown length into time.
    spherulites : int
        Number of spherulites in the map, which decides into how many tiles it is cut.

    Returns
    -------
    conversion : Conversion
        Both curves, and the landmarks of the simulated one with intervals over tiles. The heat
        flow is (heat of fusion) (crystallinity inside a spherulite) d(fraction)/dt, averaged over
        the window that the landmarks state.
    """
    if image.arrival is None:
        raise RunError("the map carries no arrivals")
    last = last_arrival(highest_arrival(image.arrival), expected)
    counts = np.zeros(counts_shape(image.frame), dtype=np.int64)
    tile, found = count_arrivals(image.arrival, last)
    counts[tile] = found
    return conversion_of_counts(counts, last, expected, spherulites=spherulites)


def conversion_of_counts(
    counts: NDArray[np.int64], last: float, expected: Estimate, *, spherulites: int
) -> Conversion:
    """Return transformed fraction and heat flow from arrivals that are already counted.

    Parameters
    ----------
    counts : ndarray of int64, shape `counts_shape`
        Arrivals in every tile, as `count_arrivals` counts them.
    last : float
        Upper end of the histogram [m].
    expected : Estimate
        The mean field of the same run.
    spherulites : int
        Number of spherulites in the map.

    Returns
    -------
    conversion : Conversion
        As `conversion` returns it.
    """
    found, material = expected.kinetics, expected.settings.material
    clock, frame = found.clock, expected.plan.frame
    totals = counts.astype(np.float64)
    moments = np.append(clock.time_at(np.linspace(0.0, last, _BINS + 1)), clock.time[-1])
    waves = tile_waves(spherulites, frame.extent, frame.periodic)

    def course(count: NDArray[np.float64]) -> Course:
        fraction = np.concatenate([[0.0], np.cumsum(count[:-1])]) / count.sum()
        return Course(time=moments, fraction=np.append(fraction, fraction[-1]))

    @cache  # each curve is read once for all its landmarks
    def read(count: bytes) -> Landmarks:
        return landmarks(course(np.frombuffer(count)), clock, material.t_m0, smoothing=SMOOTHING)

    def statistic(count: NDArray[np.float64], name: str) -> NDArray[np.float64]:
        values = [getattr(read(row.tobytes()), name) for row in np.atleast_2d(count)]
        return np.array([np.nan if v is None else v for v in values]).reshape(count.shape[:-1])

    intervals = {
        name: tile_interval(totals, partial(statistic, name=name), waves) for name in _READ_OFF
    }
    intervals["fraction_transformed"] = tile_interval(
        totals, lambda count: 1 - count[..., -1] / count.sum(axis=-1), waves
    )
    whole = totals.sum(axis=0)
    simulated, marks = course(whole), read(whole.tobytes())
    predicted = Course(time=clock.time, fraction=found.fraction)
    time = _times(predicted)
    heat = material.heat_of_fusion * material.crystallinity
    return Conversion(
        time=time,
        temperature=clock.temperature_at(time),
        fraction=simulated.at(time),
        fraction_estimate=predicted.at(time),
        heat_flow=heat * simulated.rate(time, marks.smoothing_time),
        heat_flow_estimate=heat * predicted.rate(time, marks.smoothing_time),
        landmarks=marks,
        intervals=intervals,
    )


def highest_arrival(arrival: NDArray[np.float32]) -> float:
    """Return the largest arrival [m] of the pixels that were reached; 0 where none was."""
    return float(arrival.max(where=np.isfinite(arrival), initial=0.0))


def counts_shape(frame: Frame) -> tuple[int, int]:
    """Return the shape of the counts of arrivals of a map: tiles, and bins + 1."""
    return TILES**frame.dimension, _BINS + 1


def last_arrival(highest: float, expected: Estimate) -> float:
    """Return the upper end of the histogram of arrivals.

    Parameters
    ----------
    highest : float
        Largest arrival of the map [m]; 0 where nothing was reached.
    expected : Estimate
        The mean field of the same run.

    Returns
    -------
    last : float
        Grown length [m], within that of the whole history.
    """
    final = float(expected.kinetics.clock.grown_length[-1])
    return min(max(highest, 1e-3 * final), final)


def count_arrivals(
    arrival: NDArray[np.float32],
    last: float,
    *,
    start: Sequence[int] | None = None,
    whole: Sequence[int] | None = None,
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Count per tile how many pixels each step of grown length reached, and how many none.

    Parameters
    ----------
    arrival : ndarray of float32, shape (..)
        Grown length at arrival [m] in the map or a part of it; inf where nothing arrived.
    last : float
        Upper end of the histogram [m].
    start, whole : sequence of int, optional
        First pixel of the part, and shape of the whole map, along each axis.

    Returns
    -------
    tile : ndarray of int64, shape (n,)
        Tiles of the whole map, 8 along each axis, that the part meets; rising.
    counts : ndarray of int64, shape (n, bins + 1)
        Pixels of the part in each; the last column holds those that were not reached.
    """
    whole = arrival.shape if whole is None else whole
    start = (0,) * arrival.ndim if start is None else start
    parts = []
    for first, length, n in zip(start, arrival.shape, whole, strict=True):
        edges = np.clip(-(-np.arange(TILES + 1) * n // TILES) - first, 0, length)
        pairs = enumerate(itertools.pairwise(edges.tolist()))
        parts.append([(k, slice(a, b)) for k, (a, b) in pairs if a < b])
    tiles, rows = [], []
    for tile in itertools.product(*parts):
        part = arrival[tuple(place for _, place in tile)]
        reached = part[np.isfinite(part)]
        place = np.minimum((reached * (_BINS / last)).astype(np.int64), _BINS - 1)
        count = np.bincount(place, minlength=_BINS + 1)
        count[_BINS] = part.size - reached.size
        tiles.append(np.ravel_multi_index([k for k, _ in tile], (TILES,) * arrival.ndim))
        rows.append(count)
    return np.array(tiles, dtype=np.int64), np.array(rows, dtype=np.int64)


def _times(course: Course) -> NDArray[np.float64]:
    """Return times that follow the curve from its start to its end."""
    begin, end = course.reaches(1e-5), course.reaches(1 - 1e-5)
    pad = 0.1 * (end - begin)
    low, high = max(begin - pad, course.time[0]), min(end + pad, course.time[-1])
    even = np.linspace(low, high, _ROWS // 2)
    shares = np.array([course.reaches(s) for s in np.linspace(0.002, 0.998, _ROWS // 2)])
    return np.unique(np.concatenate([even, shares]))
