"""Checks that the laws of the material share: one line of complaint, or silence.

No physics: what a law accepts is said by the law that calls.
"""

from __future__ import annotations

import math
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

__all__ = ["absolute_temperature", "at_least", "finite", "positive", "rising_table"]


def positive(where: str, **values: float) -> None:
    """Refuse what is not a finite number above 0.

    Parameters
    ----------
    where : str
        The law or function, which opens the message.
    **values : float
        The named numbers.

    Raises
    ------
    ValidityError
        If a value is not finite or not above 0.
    """
    for name, value in values.items():
        if not (math.isfinite(value) and value > 0.0):
            raise ValidityError(f"{where}: expected {name} finite and above 0, got {value:g}")


def at_least(where: str, bound: float, **values: float) -> None:
    """Refuse what is not a finite number of at least `bound`.

    Parameters
    ----------
    where : str
        The law or function, which opens the message.
    bound : float
        The smallest number accepted.
    **values : float
        The named numbers.

    Raises
    ------
    ValidityError
        If a value is not finite or below the bound.
    """
    for name, value in values.items():
        if not (math.isfinite(value) and value >= bound):
            raise ValidityError(
                f"{where}: expected {name} finite and at least {bound:g}, got {value:g}"
            )


def finite(where: str, name: str, values: ArrayLike) -> NDArray[np.float64]:
    """Return an array of finite numbers.

    Parameters
    ----------
    where : str
        The law or function, which opens the message.
    name : str
        What the numbers are, with their unit.
    values : array_like of float, shape (...)
        The numbers.

    Returns
    -------
    array : ndarray of float64, shape (...)
        The same numbers.

    Raises
    ------
    ValidityError
        If a number is not finite.
    """
    array = np.asarray(values, dtype=np.float64)
    good = np.isfinite(array)
    if not good.all():
        raise ValidityError(f"{where}: expected finite {name}, got {array[~good].flat[0]:g}")
    return array


def absolute_temperature(where: str, temperature: ArrayLike) -> NDArray[np.float64]:
    """Return an array of absolute temperatures.

    Parameters
    ----------
    where : str
        The law or function, which opens the message.
    temperature : array_like of float, shape (...)
        Absolute temperatures [K].

    Returns
    -------
    array : ndarray of float64, shape (...)
        The same temperatures [K].

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number.
    """
    array = np.asarray(temperature, dtype=np.float64)
    if array.size and not (array.min() > 0.0 and array.max() < math.inf):
        wrong = array[~(np.isfinite(array) & (array > 0.0))].flat[0]
        raise ValidityError(
            f"{where}: expected finite absolute temperatures above 0 K, got {wrong:g} K"
        )
    return array


def rising_table(
    where: str, argument: str, abscissa: Sequence[float], value: str, ordinate: Sequence[float]
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Return the columns of a table: arguments that rise, values above 0.

    Parameters
    ----------
    where : str
        The law, which opens the message.
    argument, value : str
        What the columns are.
    abscissa, ordinate : sequence of float, shape (n,)
        The columns.

    Returns
    -------
    abscissa, ordinate : tuple of float, length n
        The same columns.

    Raises
    ------
    ValidityError
        If there are fewer than 2 rows, the columns differ in length, the arguments do not rise, or
        a number is not finite and above 0.
    """
    x, y = tuple(map(float, abscissa)), tuple(map(float, ordinate))
    if len(x) != len(y) or len(x) < 2:
        raise ValidityError(
            f"{where}: expected two columns of equal length with at least 2 rows, "
            f"got {len(x)} of {argument} and {len(y)} of {value}"
        )
    for name, column in ((argument, x), (value, y)):
        if not all(math.isfinite(number) and number > 0.0 for number in column):
            raise ValidityError(
                f"{where}: expected every {name} finite and above 0; leave other rows out"
            )
    if any(high <= low for low, high in pairwise(x)):
        raise ValidityError(f"{where}: expected every {argument} above the one before it")
    return x, y
