"""Closed forms of Kolmogorov and Avrami for a constant growth rate.

Crystals in one, two or three directions, all born at once or at a constant rate; any other case
is `spheru.theory.conversion`.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final, Literal

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = ["avrami_extended", "avrami_half_time", "avrami_mean_time"]

_BALL: Final = {1: 2.0, 2: math.pi, 3: 4 * math.pi / 3}  # measure of the ball of radius 1


def _law(density: float, rate: float, growth_rate: float, dimension: int) -> tuple[float, int]:
    """Return factor and exponent of the extended fraction K t^m."""
    if dimension not in _BALL:
        raise ValidityError(f"avrami: expected dimension 1, 2 or 3, got {dimension}")
    if not (math.isfinite(growth_rate) and growth_rate > 0):
        raise ValidityError(f"avrami: expected a growth rate above 0 m/s, got {growth_rate:g} m/s")
    if not (min(density, rate) == 0 < max(density, rate) < math.inf):
        raise ValidityError(
            "avrami: expected either a density or a nucleation rate above 0, the other one 0, got "
            f"{density:g} and {rate:g}; mixtures are the sum of their extended fractions"
        )
    factor = _BALL[dimension] * growth_rate**dimension
    if rate > 0:
        return factor * rate / (dimension + 1), dimension + 1
    return factor * density, dimension


def avrami_extended(
    time: ArrayLike,
    *,
    growth_rate: float,
    dimension: Literal[1, 2, 3],
    density: float = 0.0,
    rate: float = 0.0,
) -> NDArray[np.float64]:
    r"""Return the extended fraction at constant temperature.

    .. math::
        \Lambda = b_D N G^D t^D \text{ (all at once)}, \quad
        \Lambda = \frac{b_D}{D + 1} I G^D t^{D+1} \text{ (constant rate)}, \quad
        b_D = 2, \pi, 4\pi/3

    The transformed fraction is 1 - exp(-Lambda).

    Parameters
    ----------
    time : array_like of float, shape (...)
        Time since the start [s], >= 0.
    growth_rate : float
        Growth rate G [m/s], > 0.
    dimension : {1, 2, 3}
        Number of directions of growth, D.
    density : float
        Nuclei present from the start, N [m^-D]; 0 with a rate.
    rate : float
        Nucleation rate, I [m^-D s^-1]; 0 with a density.

    Returns
    -------
    extended : ndarray of float64, shape (...)
        Extended fraction [-].

    Raises
    ------
    ValidityError
        If a value is out of range, or both or neither of density and rate are given.

    References
    ----------
    .. [1] M. Avrami, J. Chem. Phys. 7 (1939) 1103; 8 (1940) 212. (memory)

    Examples
    --------
    D = 3, I = G = 1, t = 1: (4 pi / 3) / 4 = pi / 3 = 1.047198:

    >>> round(float(avrami_extended(1.0, growth_rate=1.0, dimension=3, rate=1.0)), 6)
    1.047198
    """
    factor, exponent = _law(density, rate, growth_rate, dimension)
    times = np.asarray(time, dtype=np.float64)
    if times.size and not times.min() >= 0:
        raise ValidityError(f"avrami: expected times >= 0 s, got {times.min():g} s")
    return np.asarray(factor * times**exponent, dtype=np.float64)


def avrami_half_time(
    *,
    growth_rate: float,
    dimension: Literal[1, 2, 3],
    density: float = 0.0,
    rate: float = 0.0,
) -> float:
    r"""Return the time by which half is transformed at constant temperature.

    .. math:: t_{1/2} = (\ln 2 / K)^{1/m} \quad \text{for} \quad \Lambda = K t^m

    Parameters
    ----------
    growth_rate, dimension, density, rate
        As for `avrami_extended`.

    Returns
    -------
    half_time : float
        Half time [s].

    Raises
    ------
    ValidityError
        As for `avrami_extended`.

    Examples
    --------
    D = 2, N = G = 1: sqrt(0.693147 / 3.141593) = 0.469719:

    >>> round(avrami_half_time(growth_rate=1.0, dimension=2, density=1.0), 6)
    0.469719
    """
    factor, exponent = _law(density, rate, growth_rate, dimension)
    return float((math.log(2) / factor) ** (1 / exponent))


def avrami_mean_time(
    *,
    growth_rate: float,
    dimension: Literal[1, 2, 3],
    density: float = 0.0,
    rate: float = 0.0,
) -> float:
    r"""Return the mean time at which a point is transformed at constant temperature.

    .. math:: \bar t = \int_0^\infty e^{-K t^m} dt = \Gamma(1 + 1/m) K^{-1/m}

    Parameters
    ----------
    growth_rate, dimension, density, rate
        As for `avrami_extended`.

    Returns
    -------
    mean_time : float
        Mean crystallisation time [s].

    Raises
    ------
    ValidityError
        As for `avrami_extended`.

    Examples
    --------
    D = 2, N = G = 1: Gamma(3/2) / sqrt(pi) = 0.886227 / 1.772454 = 0.5:

    >>> round(avrami_mean_time(growth_rate=1.0, dimension=2, density=1.0), 6)
    0.5
    """
    factor, exponent = _law(density, rate, growth_rate, dimension)
    return float(math.gamma(1 + 1 / exponent) * factor ** (-1 / exponent))
