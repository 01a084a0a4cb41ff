"""What one pass over a label image tells of each label, in pixels.

Counts and boxes; no lengths, no statistics.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from spheru.measure.intervals import TILES
from spheru.measure.kernels import label_kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage

__all__ = ["LabelSums", "cut_axes", "sum_labels"]


@dataclass(frozen=True, slots=True, kw_only=True)
class LabelSums:
    """Sums over the pixels of each label, and the faces between labels.

    A label that crosses a periodic edge is put together again. That is exact for labels shorter
    than half the period; the centre and box of longer ones mean little along that axis.

    Attributes
    ----------
    label : ndarray of uint32, shape (n,)
        Labels that own a pixel, rising.
    pixels : ndarray of int64, shape (n,)
        Their number of pixels.
    centre : ndarray of float64, shape (n, D)
        Mean place of the pixels in pixels from the corner of the grid (the centre of the first
        pixel stands at 0.5); within the grid.
    low, high : ndarray of int64, shape (n, D)
        First and last pixel along each axis; beyond the grid for labels that cross a periodic edge.
    faces : ndarray of int64, shape (8**D, D)
        Faces between two different labels (0 is none) across each axis, in each of 8 tiles along
        each axis.
    pairs : ndarray of int64, shape (8**D, D)
        Neighbouring pixels across each axis in each tile, whatever their labels.
    """

    label: NDArray[np.uint32]
    pixels: NDArray[np.int64]
    centre: NDArray[np.float64]
    low: NDArray[np.int64]
    high: NDArray[np.int64]
    faces: NDArray[np.int64]
    pairs: NDArray[np.int64]


def cut_axes(frame: Frame) -> NDArray[np.bool_]:
    """Return which axes are cut out of something larger: neither periodic nor closed.

    Parameters
    ----------
    frame : Frame
        The grid.

    Returns
    -------
    cut : ndarray of bool, shape (D,)
        One value per axis.
    """
    cut: NDArray[np.bool_] = ~(np.array(frame.periodic) | np.array(frame.closed))
    return cut


def sum_labels(image: LabelImage) -> LabelSums:
    """Go once over the pixels of an image and sum up each label.

    Parameters
    ----------
    image : LabelImage
        Labels on a grid of 2 or 3 axes.

    Returns
    -------
    sums : LabelSums
        Sums in pixels.

    Examples
    --------
    Label 7 sits astride the periodic edge, on pixels 3 and 0: its middle is the edge itself.

    >>> from spheru.image.frame import Frame
    >>> from spheru.image.label_image import LabelImage
    >>> frame = Frame(shape=(1, 4), pixel=1e-6, periodic=True)
    >>> sums = sum_labels(LabelImage(labels=np.array([[7, 2, 2, 7]]), frame=frame))
    >>> sums.label.tolist(), sums.pixels.tolist(), sums.centre[:, 1].tolist()
    ([2, 7], [2, 2], [2.0, 0.0])
    >>> int(sums.faces[:, 1].sum())
    2
    """
    frame = image.frame
    labels = image.labels
    names: NDArray[np.uint32] | None = None
    peak = int(labels.max())
    if peak > labels.size // 16:  # the tables would outgrow the image: number anew
        names = np.union1d(labels, [0]).astype(np.uint32)
        labels = np.searchsorted(names, labels).astype(np.uint32)
        labels.setflags(write=False)  # the kernel is compiled for the read-only arrays of an image
        peak = len(names) - 1

    shape = (1,) * (3 - frame.dimension) + frame.shape
    periodic = np.array((False,) * (3 - frame.dimension) + frame.periodic)
    pixels = np.zeros(peak + 1, dtype=np.int64)
    first, low, high = (np.zeros((peak + 1, 3), dtype=np.int32) for _ in range(3))
    total = np.zeros((peak + 1, 3), dtype=np.int64)
    faces = np.zeros((TILES**frame.dimension, 3), dtype=np.int64)
    label_kernel(
        labels.reshape(shape),
        periodic,
        _tile_steps(shape, frame.dimension),
        pixels,
        first,
        low,
        high,
        total,
        faces,
    )

    label = np.flatnonzero(pixels)
    axes = slice(3 - frame.dimension, 3)
    start = first[label, axes].astype(np.int64)
    centre = start + total[label, axes] / pixels[label, None] + 0.5
    for axis in np.flatnonzero(frame.periodic):
        centre[:, axis] %= frame.shape[axis]
    return LabelSums(
        label=(label if names is None else names[label]).astype(np.uint32),
        pixels=pixels[label],
        centre=centre,
        low=start + low[label, axes],
        high=start + high[label, axes],
        faces=faces[:, axes],
        pairs=_pairs(frame),
    )


def _tile_of(length: int) -> NDArray[np.int64]:
    return np.arange(length, dtype=np.int64) * TILES // length


def _tile_steps(shape: tuple[int, ...], dimension: int) -> NDArray[np.int64]:
    steps = np.zeros((3, max(shape)), dtype=np.int64)
    for axis in range(3 - dimension, 3):
        steps[axis, : shape[axis]] = _tile_of(shape[axis]) * TILES ** (2 - axis)
    return steps


def _pairs(frame: Frame) -> NDArray[np.int64]:
    """Return the neighbouring pixels across each axis in each tile."""
    places = [np.bincount(_tile_of(n), minlength=TILES) for n in frame.shape]
    pairs = np.empty((TILES**frame.dimension, frame.dimension), dtype=np.int64)
    for axis, periodic in enumerate(frame.periodic):
        along = [p.copy() for p in places]
        if not periodic:
            along[axis][0] -= 1  # the first pixel has no neighbour before it
        product = along[0]
        for more in along[1:]:
            product = np.multiply.outer(product, more)
        pairs[:, axis] = product.ravel()
    return pairs
