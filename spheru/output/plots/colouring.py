"""Colours for the labels of a map, so that neighbours differ.

A graph colouring and a palette; nothing is drawn here.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
from skimage.color import lab2rgb

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

__all__ = ["COLOURS", "colour_codes", "neighbour_pairs", "palette"]

COLOURS: Final = 10  # a map in the plane needs 4, on a torus 7; more of them look livelier
_CHROMA: Final = 35.0  # nearly the most that sRGB has at these lightnesses in every hue
_LIGHTNESS: Final = (65.0, 76.0)  # in turn, so that neighbours differ in grey print as well


def neighbour_pairs(
    labels: NDArray[np.integer], *, periodic: Sequence[bool] = (False, False)
) -> NDArray[np.int64]:
    """Return the pairs of labels that share an edge of a pixel.

    Parameters
    ----------
    labels : ndarray of int, shape (rows, columns)
        Labels; 0 has no neighbours.
    periodic : sequence of bool, optional
        Axes that go on at their other side.

    Returns
    -------
    pairs : ndarray of int64, shape (m, 2)
        Each pair once, the lower label first, in rising order.

    Examples
    --------
    >>> neighbour_pairs(np.array([[1, 2, 0, 3]])).tolist()
    [[1, 2]]
    >>> neighbour_pairs(np.array([[1, 2, 0, 3]]), periodic=(False, True)).tolist()
    [[1, 2], [1, 3]]
    """
    found = []
    for axis in (0, 1):
        rows = np.moveaxis(labels, axis, 0)
        found.append((rows[:-1].ravel(), rows[1:].ravel()))
        if periodic[axis]:
            found.append((rows[-1], rows[0]))
    keys = []
    base = np.int64(labels.max(initial=0)) + 1
    for one, other in found:
        differ = (one != other) & (one != 0) & (other != 0)
        a, b = one[differ].astype(np.int64), other[differ].astype(np.int64)
        keys.append(np.unique(np.minimum(a, b) * base + np.maximum(a, b)))
    key = np.unique(np.concatenate(keys))
    return np.stack([key // base, key % base], axis=1)


def colour_codes(pairs: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """Return a colour for each label so that the two of a pair differ.

    Greedy, the labels with most neighbours first (Welsh and Powell [1]_); of the colours that are
    free the one used least so far. A further colour comes in where none is free.

    Parameters
    ----------
    pairs : ndarray of int64, shape (m, 2)
        Labels that must differ, 1 to `count`.
    count : int
        Highest label.

    Returns
    -------
    codes : ndarray of int64, shape (count + 1,)
        Number of the colour, 0 and up, by label; label 0 has -1.

    References
    ----------
    .. [1] Welsh and Powell, The Computer Journal 10 (1967) 85 (memory).

    Examples
    --------
    >>> codes = colour_codes(np.array([[1, 2], [2, 3], [1, 3]]), 3)
    >>> len(set(codes[1:].tolist()))
    3
    """
    both = np.concatenate([pairs, pairs[:, ::-1]])
    both = both[np.argsort(both[:, 0], kind="stable")]
    start = np.searchsorted(both[:, 0], np.arange(count + 2))
    neighbours = both[:, 1].tolist()
    codes = [-1] * (count + 1)
    used = [0] * COLOURS
    for label in (np.argsort(-np.diff(start)[1:], kind="stable") + 1).tolist():
        taken = {codes[other] for other in neighbours[start[label] : start[label + 1]]}
        free = [code for code in range(len(used)) if code not in taken]
        if not free:
            free = [len(used)]
            used.append(0)
        code = min(free, key=used.__getitem__)
        codes[label] = code
        used[code] += 1
    return np.array(codes, dtype=np.int64)


def palette(count: int) -> NDArray[np.uint8]:
    """Return colours at equal steps of hue in CIELAB, of moderate chroma.

    Parameters
    ----------
    count : int
        How many.

    Returns
    -------
    colours : ndarray of uint8, shape (count, 3)
        sRGB; light and less light ones in turn.

    Examples
    --------
    >>> palette(3).shape
    (3, 3)
    """
    step = np.arange(count)
    hue = 2 * np.pi * step / count
    lightness = np.asarray(_LIGHTNESS)[step % 2]
    lab = np.stack([lightness, _CHROMA * np.cos(hue), _CHROMA * np.sin(hue)], axis=1)
    return np.asarray(np.rint(lab2rgb(lab) * 255), dtype=np.uint8)
