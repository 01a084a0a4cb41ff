"""Round numbers for people to read: classes of size, lengths of scale bars.

Shared by tables and figures; nothing is written or drawn here.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.measure.sizes import Sizes

__all__ = ["class_edges", "round_down"]


def round_down(value: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is not above a number.

    Parameters
    ----------
    value : float
        A positive finite number.

    Returns
    -------
    rounded : float
        The round number.

    Raises
    ------
    ValidityError
        If the number is not positive and finite.

    Examples
    --------
    >>> round_down(0.5), round_down(73.0), round_down(4.99)
    (0.5, 50.0, 2.0)
    """
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"round number: expected a number above 0, got {value}")
    power = math.floor(math.log10(value))
    steps = (float(f"{digit}e{p}") for p in (power + 1, power, power - 1) for digit in (5, 2, 1))
    return next(step for step in steps if step <= value * (1 + 1e-12))


def class_edges(sizes: Sizes) -> NDArray[np.float64]:
    """Return equally wide classes of equivalent diameter with round limits.

    The width is a round number not above that of Freedman and Diaconis [1]_, 2 IQR n^(-1/3), or
    not above 1/25 of the largest diameter where that is more: 64 classes at most.

    Parameters
    ----------
    sizes : Sizes
        The spherulites; those of weight 0 do not count.

    Returns
    -------
    edges : ndarray of float64, shape (k + 1,)
        Limits of the classes [µm]; empty where no spherulite counts.

    References
    ----------
    .. [1] Freedman and Diaconis, Z. Wahrscheinlichkeitstheorie 57 (1981) 453 (memory).
    """
    diameter = sizes.diameter[sizes.weight > 0] * 1e6
    if diameter.size == 0:
        return np.zeros(0)
    low, high = np.quantile(diameter, (0.25, 0.75))
    largest, smallest = float(diameter.max()), float(diameter.min())
    width = round_down(max(2 * float(high - low) * diameter.size ** (-1 / 3), largest / 25))
    first, last = math.floor(smallest * (1 - 1e-9) / width), math.floor(largest / width) + 1
    return np.asarray(np.arange(first, last + 1) * width, dtype=np.float64)
