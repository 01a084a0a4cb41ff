"""Gauss-Legendre rules on [0, 1], and nodes put in order.

The rule of five points is written out: numpy's polynomials, like its masked arrays, take a tenth of
a second to import, which every estimate would pay.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["GAUSS_POINTS", "GAUSS_WEIGHTS", "distinct", "weighted_sum"]

# Abramowitz & Stegun, "Handbook of Mathematical Functions", 25.4.29 and table 25.4 (memory; tested
# against numpy): roots (1/3) sqrt(5 -+ 2 sqrt(10/7)), weights (322 +- 13 sqrt(70))/900 on [-1, 1].
_inner, _outer = (math.sqrt(5 + sign * 2 * math.sqrt(10 / 7)) / 3 for sign in (-1, 1))
_large, _small = ((322 + sign * 13 * math.sqrt(70)) / 900 for sign in (1, -1))

GAUSS_POINTS: Final = (np.array([-_outer, -_inner, 0.0, _inner, _outer]) + 1) / 2
GAUSS_WEIGHTS: Final = np.array([_small, _large, 128 / 225, _large, _small]) / 2


def weighted_sum(values: NDArray[np.float64], weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the sum of values times weights over the last axis.

    The same to the last bit whatever the number of cores: a product of the linear-algebra library
    (``@``) shares long sums out over its threads.

    Parameters
    ----------
    values : ndarray of float64, shape (..., n)
        Values.
    weights : ndarray of float64, shape (n,)
        Weights.

    Returns
    -------
    total : ndarray of float64, shape (...)
        The sums.

    Examples
    --------
    1 * 3 + 2 * 4 = 11:

    >>> float(weighted_sum(np.array([1.0, 2.0]), np.array([3.0, 4.0])))
    11.0
    """
    return np.asarray((values * weights).sum(axis=-1), dtype=np.float64)


def distinct(*values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return all values in rising order, each once.

    Parameters
    ----------
    values : ndarray of float64, shape (n,)
        Finite values.

    Returns
    -------
    distinct : ndarray of float64, shape (m,)
        What `numpy.unique` gives.

    Examples
    --------
    >>> distinct(np.array([2.0, 1.0]), np.array([2.0, 3.0])).tolist()
    [1.0, 2.0, 3.0]
    """
    merged = np.sort(np.concatenate(values))
    keep = np.ones(merged.shape, dtype=np.bool_)
    np.not_equal(merged[1:], merged[:-1], out=keep[1:])
    return np.asarray(merged[keep], dtype=np.float64)
