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
    from numpy.typing import NDArray

    from spheru.image.label_image import LabelImage
    from spheru.run.course import Landmarks
    from spheru.run.estimate import Estimate

__all__ = ["SMOOTHING", "conversion"]

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
    found, material = expected.kinetics, expected.settings.material
    clock, frame = found.clock, image.frame
    if image.arrival is None:
        raise RunError("the map carries no arrivals")
    last = _last_arrival(image.arrival, float(clock.grown_length[-1]))
    moments = np.append(clock.time_at(np.linspace(0.0, last, _BINS + 1)), clock.time[-1])
    counts = _arrivals(image.arrival, last)
    waves = tile_waves(spherulites, frame.extent, frame.periodic)

    def course(count: NDArray[np.float64]) -> Course:
        fraction = np.concatenate([[0.0], np.cumsum(count[:-1])]) / count.sum()
        return Course(time=moments, fraction=np.append(fraction, fraction[-1]))

    @cache  # each curve is read once for all its landmarks
    def read(count: bytes) -> Landmarks:
        return landmarks(course(np.frombuffer(count)), clock, material.t_m0, smoothing=SMOOTHING)

    def statistic(totals: NDArray[np.float64], name: str) -> NDArray[np.float64]:
        values = [getattr(read(row.tobytes()), name) for row in np.atleast_2d(totals)]
        return np.array([np.nan if v is None else v for v in values]).reshape(totals.shape[:-1])

    intervals = {
        name: tile_interval(counts, partial(statistic, name=name), waves) for name in _READ_OFF
    }
    intervals["fraction_transformed"] = tile_interval(
        counts, lambda count: 1 - count[..., -1] / count.sum(axis=-1), waves
    )
    whole = counts.sum(axis=0)
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


def _last_arrival(arrival: NDArray[np.float32], final: float) -> float:
    """Return the upper end of the histogram of arrivals [m]."""
    last = float(arrival.max(where=np.isfinite(arrival), initial=0.0))
    return min(max(last, 1e-3 * final), final)


def _arrivals(arrival: NDArray[np.float32], last: float) -> NDArray[np.float64]:
    """Return per tile how many pixels each step of grown length reached, and how many none.

    Shape (tiles, _BINS + 1); the last column holds those that were not reached.
    """
    edges = [-(-np.arange(TILES + 1) * n // TILES) for n in arrival.shape]
    parts = [[slice(a, b) for a, b in itertools.pairwise(edge)] for edge in edges]
    rows = []
    for tile in itertools.product(*parts):
        part = arrival[tile]
        reached = part[np.isfinite(part)]
        place = np.minimum((reached * (_BINS / last)).astype(np.int64), _BINS - 1)
        count = np.bincount(place, minlength=_BINS + 1)
        count[_BINS] = part.size - reached.size
        rows.append(count)
    return np.array(rows, dtype=np.float64)


def _times(course: Course) -> NDArray[np.float64]:
    """Return times that follow the curve from its start to its end."""
    begin, end = course.reaches(1e-5), course.reaches(1 - 1e-5)
    pad = 0.1 * (end - begin)
    low, high = max(begin - pad, course.time[0]), min(end + pad, course.time[-1])
    even = np.linspace(low, high, _ROWS // 2)
    shares = np.array([course.reaches(s) for s in np.linspace(0.002, 0.998, _ROWS // 2)])
    return np.unique(np.concatenate([even, shares]))
