"""What a series says from point to point: local exponents, nucleating efficiency.

Pure functions of numbers; where these come from is `spheru.run.series`.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from spheru.measure.intervals import Statistic

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

__all__ = ["local_exponents", "nucleating_efficiency"]


def local_exponents(x: Sequence[float], y: Sequence[Statistic]) -> list[Statistic]:
    """Return the local exponents d ln y/d ln x with their 95 % intervals.

    The slope at a point is that of the parabola through it and its two neighbours in ln x and
    ln y (at the ends: through the three last points), which is exact where the exponent changes
    evenly. With the weights w_k of the three values the half width is
    (sum (w_k h_k)^2)^(1/2), h_k being half widths in ln y, as if chance were independent from
    point to point.

    Parameters
    ----------
    x : sequence of float, length n
        Abscissas > 0, all different, in any order.
    y : sequence of Statistic, length n
        Values > 0 with their intervals; without an interval the exponent has none.

    Returns
    -------
    exponents : list of Statistic, length n
        nan where there are fewer than two points, or a value is not above 0.

    Examples
    --------
    y = 8/x has the exponent -1 everywhere.

    >>> values = [Statistic(value=8.0), Statistic(value=4.0), Statistic(value=1.0)]
    >>> [round(e.value, 12) for e in local_exponents([1.0, 2.0, 8.0], values)]
    [-1.0, -1.0, -1.0]

    Two points with half widths of 3 and 4 % over one unit of ln x: (0.03^2 + 0.04^2)^(1/2) = 0.05.

    >>> ends = [Statistic(value=1.0, low=math.exp(-h), high=math.exp(h)) for h in (0.03, 0.04)]
    >>> slope = local_exponents([1.0, math.e], ends)[0]
    >>> round(slope.low, 12), round(slope.high, 12)
    (-0.05, 0.05)
    """
    logs = np.log(np.array(x, dtype=np.float64))
    values = np.array([_log(s.value) for s in y])
    halves = np.array([(_log(s.high) - _log(s.low)) / 2 for s in y])
    found = []
    order = np.argsort(logs)
    rank = np.argsort(order)
    for k in range(len(logs)):
        first = int(np.clip(rank[k] - 1, 0, max(len(logs) - 3, 0)))
        near = order[first : first + 3]
        if len(near) < 2:
            found.append(Statistic(value=math.nan))
            continue
        weights = _slope_weights(logs[near], float(logs[k]))
        slope = float(weights @ values[near])
        half = float(np.sqrt(np.sum((weights * halves[near]) ** 2)))
        found.append(Statistic(value=slope, low=slope - half, high=slope + half))
    return found


def nucleating_efficiency(peak: float, *, neat: float, self_seeded: float) -> float:
    """Return the nucleating efficiency on the scale of Fillon et al. [1]_.

    Parameters
    ----------
    peak : float
        Peak temperature with the agent [K or degC].
    neat, self_seeded : float
        Peak temperatures of the neat polymer and of the best self-seeded one, in the same unit.

    Returns
    -------
    efficiency : float
        100 (peak - neat)/(self_seeded - neat) [%].

    References
    ----------
    .. [1] Fillon et al., J. Polym. Sci. B 31 (1993) 1395 (memory).

    Examples
    --------
    A rise from 112 to 119 degC where self-seeding reaches 140 degC: 7/28 = 25 %.

    >>> nucleating_efficiency(119.0, neat=112.0, self_seeded=140.0)
    25.0
    """
    return 100 * (peak - neat) / (self_seeded - neat)


def _slope_weights(x: NDArray[np.float64], at: float) -> NDArray[np.float64]:
    """Return by which weights the values at two or three places give the slope at one."""
    weights = []
    for k in range(len(x)):
        others = np.delete(x, k)
        rise = 1.0 if len(others) == 1 else float(np.sum(at - others))
        weights.append(rise / float(np.prod(x[k] - others)))
    return np.array(weights)


def _log(value: float) -> float:
    return math.log(value) if value > 0 else math.nan
