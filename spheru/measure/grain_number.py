"""The grain-size number, in the manner of ASTM E112 and of ISO 643.

Numbers from counts per area and from mean intercepts, and back; nothing is counted here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final, Literal, get_args

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.intervals import Statistic

__all__ = [
    "GrainSizeRow",
    "GrainSizeScale",
    "count_from_number",
    "grain_number",
    "grain_size_row",
    "intercept_from_number",
    "number_from_count",
    "number_from_intercept",
]

GrainSizeScale = Literal["astm-e112", "iso-643"]

_AT_ZERO: Final = {  # grains per area at number 0 [m-2]
    "astm-e112": 0.5 / 64.516e-9,  # 1/2 per square inch at 100 times: 1 in2 is 64.516e-9 m2 there
    "iso-643": 8e6,
}
_INTERCEPT_AT_ZERO: Final = 0.32e-3  # m


@dataclass(frozen=True, slots=True, kw_only=True)
class GrainSizeRow:
    """A row of the table of grain-size numbers.

    Attributes
    ----------
    number : float
        Grain-size number G.
    per_area : float
        Grains per area of the section, N_A [m-2].
    mean_area : float
        1/N_A [m2].
    diameter : float
        Edge of the square of that area, d [m].
    mean_intercept : float
        Mean length of the pieces that grains cut out of a line, l [m].
    intercepts_per_length : float
        1/l [m-1].
    """

    number: float
    per_area: float
    mean_area: float
    diameter: float
    mean_intercept: float
    intercepts_per_length: float


def number_from_count(per_area: float, *, scale: GrainSizeScale = "astm-e112") -> float:
    r"""Return the grain-size number of a count per area.

    .. math:: G = \log_2 (N_A / N_0)

    with N_0 = 7.75002 mm-2 (ASTM E112: 2^(G-1) per square inch at 100 times) or 8 mm-2 (ISO 643).

    Parameters
    ----------
    per_area : float
        Grains per area N_A [m-2], > 0.
    scale : {"astm-e112", "iso-643"}, optional
        The scale of numbers; ISO's are lower by log2(8/7.75002) = 0.0458.

    Returns
    -------
    number : float
        Grain-size number [-].

    Raises
    ------
    ValidityError
        If the count is not above 0.
    UnknownNameError
        If the scale is not one of the two.

    References
    ----------
    .. [1] ASTM E112 (preview seen): definition; G = 3.321928 log10 N_A - 2.954 (memory).
    .. [2] ISO 643: m = 8 * 2^G grains per mm2 (memory).

    Examples
    --------
    124 per mm2: 124/7.75002 = 16.0000, so 4; 128 per mm2 are 8 * 2^4.

    >>> round(number_from_count(124e6), 4), number_from_count(128e6, scale="iso-643")
    (4.0, 4.0)
    """
    _require_positive("a count per area", "m-2", per_area)
    return math.log2(per_area / _at_zero(scale))


def count_from_number(number: float, *, scale: GrainSizeScale = "astm-e112") -> float:
    """Return the count per area of a grain-size number; the inverse of `number_from_count`.

    Parameters
    ----------
    number : float
        Grain-size number [-], finite.
    scale : {"astm-e112", "iso-643"}, optional
        The scale of numbers.

    Returns
    -------
    per_area : float
        Grains per area [m-2].

    Raises
    ------
    ValidityError
        If the number is not finite, or leads beyond the range of numbers.
    UnknownNameError
        If the scale is not one of the two.

    Examples
    --------
    >>> count_from_number(3.0, scale="iso-643")
    64000000.0
    """
    return _at_zero(scale) * _power(number)


def number_from_intercept(mean_intercept: float) -> float:
    r"""Return the grain-size number of a mean intercept.

    .. math:: G = -2 \log_2 (l / 0.32\,\mathrm{mm}) = -6.643856 \log_{10}(l/\mathrm{mm}) - 3.288

    Both standards take this law; with the one for counts it has l = 0.890842 N_A^(-1/2) built in,
    so that the two numbers of one structure differ where its grains are of another shape or
    spread: in plane Poisson-Voronoi cells, l = (pi/4) N_A^(-1/2), by 0.36.

    Parameters
    ----------
    mean_intercept : float
        Mean intercept l [m], > 0.

    Returns
    -------
    number : float
        Grain-size number [-].

    Raises
    ------
    ValidityError
        If the intercept is not above 0.

    References
    ----------
    .. [1] ASTM E112 (quoted in public source text, seen). ISO 643: the same (memory).

    Examples
    --------
    0.08 mm is a quarter of 0.32 mm: 2 log2(4) = 4.

    >>> round(number_from_intercept(80e-6), 9)
    4.0
    """
    _require_positive("a mean intercept", "m", mean_intercept)
    return -2.0 * math.log2(mean_intercept / _INTERCEPT_AT_ZERO)


def intercept_from_number(number: float) -> float:
    """Return the mean intercept of a grain-size number; the inverse of `number_from_intercept`.

    Parameters
    ----------
    number : float
        Grain-size number [-], finite.

    Returns
    -------
    mean_intercept : float
        Mean intercept [m].

    Raises
    ------
    ValidityError
        If the number is not finite, or leads beyond the range of numbers.

    Examples
    --------
    >>> round(intercept_from_number(10.0) * 1e6, 9)
    10.0
    """
    return _INTERCEPT_AT_ZERO * _power(-0.5 * number)


def grain_number(
    statistic: Statistic, *, of: Literal["count", "intercept"], scale: GrainSizeScale = "astm-e112"
) -> Statistic:
    """Return the grain-size number of a measured count or intercept, with its interval.

    Parameters
    ----------
    statistic : Statistic
        Grains per area [m-2], or mean intercept [m].
    of : {"count", "intercept"}
        Which of the two it is.
    scale : {"astm-e112", "iso-643"}, optional
        The scale of numbers.

    Returns
    -------
    number : Statistic
        Grain-size number [-], low <= value <= high; nan where there is nothing above 0.

    Raises
    ------
    UnknownNameError
        If the scale or the quantity is not one of the two.

    Examples
    --------
    An intercept of 20 um, between 10 and 40 um: 8, between 6 and 10.

    >>> grain_number(Statistic(value=20e-6, low=10e-6, high=40e-6), of="intercept").scaled(0.5)
    Statistic(value=4.0, low=3.0, high=5.0)
    """
    if of not in ("count", "intercept"):
        raise UnknownNameError("quantity", of, ("count", "intercept"))
    _at_zero(scale)

    def number(x: float) -> float:
        if not (math.isfinite(x) and x > 0):
            return math.nan
        exact = number_from_count(x, scale=scale) if of == "count" else number_from_intercept(x)
        return round(exact, 12)

    low, high = statistic.low, statistic.high
    if of == "intercept":
        low, high = high, low
    return Statistic(value=number(statistic.value), low=number(low), high=number(high))


def grain_size_row(number: float) -> GrainSizeRow:
    """Return the row of the table of ASTM E112 that belongs to a grain-size number.

    Parameters
    ----------
    number : float
        Grain-size number [-]; "00" is -1.

    Returns
    -------
    row : GrainSizeRow
        Count, area, diameter, intercept.

    Raises
    ------
    ValidityError
        If the number is not finite, or leads beyond the range of numbers.

    Examples
    --------
    >>> row = grain_size_row(8.0)
    >>> round(row.per_area * 1e-6), round(row.diameter * 1e6, 1), round(row.mean_intercept * 1e6, 6)
    (1984, 22.5, 20.0)
    """
    per_area = count_from_number(number)
    mean_intercept = intercept_from_number(number)
    return GrainSizeRow(
        number=number,
        per_area=per_area,
        mean_area=1.0 / per_area,
        diameter=per_area**-0.5,
        mean_intercept=mean_intercept,
        intercepts_per_length=1.0 / mean_intercept,
    )


def _at_zero(scale: str) -> float:
    if scale not in _AT_ZERO:
        raise UnknownNameError("scale of grain-size numbers", scale, get_args(GrainSizeScale))
    return _AT_ZERO[scale]


def _power(exponent: float) -> float:
    if not abs(exponent) < 500:
        raise ValidityError(f"grain-size number: expected one within -500 to 500, got {exponent}")
    return float(2.0**exponent)


def _require_positive(what: str, unit: str, value: float) -> None:
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"grain-size number: expected {what} above 0 {unit}, got {value}")
