"""The largest grain of a section, in the manner of ASTM E930.

One grain against the rest, and whether the comparison is meant for such a structure.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import ValidityError
from spheru.measure.grain_number import number_from_count

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

__all__ = ["LargestGrain", "largest_grain"]

_COARSER: Final = 3.0  # grain-size numbers between the largest grains and the rest, at least
_SHARE: Final = 0.05  # of the area that such grains may take


@dataclass(frozen=True, slots=True, kw_only=True)
class LargestGrain:
    """The largest grain and the rest.

    Attributes
    ----------
    area : float
        Area of the largest grain [m2].
    number : float
        Grain-size number of a structure of such grains, ALA [-].
    rest_number : float
        Grain-size number of the mean area of the grains that are not that much coarser [-]; nan
        where there are none.
    outliers : int
        Grains at least 3 numbers coarser than the rest.
    share : float
        Their share of the picture's area [-].
    applies : bool
        Whether the method is meant for such a structure.
    reason : str
        Why, or why not.
    """

    area: float
    number: float
    rest_number: float
    outliers: int
    share: float
    applies: bool
    reason: str


def largest_grain(areas: ArrayLike, *, frame_area: float) -> LargestGrain:
    """Return the grain-size number of the largest grain, and whether it says anything.

    Parameters
    ----------
    areas : array_like of float, shape (n,)
        Areas of the grains of a section [m2], > 0. Grains that the edge of the picture cuts belong
        to it with what is seen of them: the largest is at least as large as said.
    frame_area : float
        Area of the picture [m2], at least that of all grains.

    Returns
    -------
    largest : LargestGrain
        Largest grain, the rest, and the verdict.

    Raises
    ------
    ValidityError
        If there is no grain, an area is not above 0, or the grains do not fit into the picture.

    Notes
    -----
    The method is for few grains that stand apart: at least 3 numbers coarser than the rest (8
    times the area) and 5 % of the area or less. The rest is found from all but the largest by
    leaving out what is that much coarser, until nothing changes.

    References
    ----------
    .. [1] ASTM E930, page of the standard (seen): the rule of 3 numbers and 5 %. Number from the
       area 1/N_A as in ASTM E112: as measured, not from a chart or callipers. (memory)

    Examples
    --------
    99 grains of 1 and one of 16 times 1/7936 mm2: 10, and log2(16) = 4 numbers coarser: 6. Its
    share is 16/400 = 4 %.

    >>> one = 0.064516e-6 / 2**9
    >>> largest = largest_grain([one] * 99 + [16 * one], frame_area=400 * one)
    >>> round(largest.number, 6), round(largest.rest_number, 6), largest.outliers, largest.applies
    (6.0, 10.0, 1, True)
    """
    size = np.sort(np.asarray(areas, dtype=np.float64).ravel())
    if not size.size or not (np.isfinite(size) & (size > 0)).all():
        raise ValidityError("largest grain: expected at least one area, all above 0 m2")
    if not size.sum() <= frame_area * (1.0 + 1e-9):
        raise ValidityError(
            f"largest grain: grains of {size.sum():.6g} m2 in all in a picture of "
            f"{frame_area:.6g} m2; expected the areas in m2"
        )
    rest = size[: max(len(size) - 1, 1)]
    while True:
        fewer = size[size < 2.0**_COARSER * rest.mean() * (1.0 - 1e-12)]
        if len(fewer) == len(rest):
            break
        rest = fewer
    outliers = size[len(rest) :]
    share = float(outliers.sum()) / float(frame_area)
    if not outliers.size:
        reason = f"no grain is {_COARSER:g} numbers coarser than the rest"
    elif share > _SHARE:
        reason = f"the coarse grains take {100 * share:.3g} % of the area, over {100 * _SHARE:g} %"
    else:
        reason = (
            f"{len(outliers)} of {len(size)} grains, {100 * share:.3g} % of the area, at least "
            f"{_COARSER:g} numbers coarser than the rest"
        )
    return LargestGrain(
        area=float(size[-1]),
        number=number_from_count(1.0 / float(size[-1])),
        rest_number=number_from_count(1.0 / float(rest.mean())) if rest.size else math.nan,
        outliers=len(outliers),
        share=share,
        applies=len(outliers) > 0 and share <= _SHARE,
        reason=reason,
    )
