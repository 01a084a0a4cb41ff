"""What a pass over a label image tells of each label, in pixels; labels taken apart into patches.

Counts and boxes; no lengths, no statistics.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from spheru.image.label_image import LabelImage
from spheru.measure.intervals import TILES
from spheru.measure.kernels import label_kernel, patch_kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.image.frame import Frame

__all__ = [
    "LabelSums",
    "connected_patches",
    "cut_axes",
    "dense_labels",
    "gathered_sums",
    "in_space",
    "sum_labels",
    "tile_of",
]


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
    labels, names = dense_labels(image.labels)
    shape, periodic = in_space(frame)
    peak = int(labels.max())
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

    return gathered_sums(
        frame, pixels=pixels, first=first, low=low, high=high, total=total, faces=faces, names=names
    )


def gathered_sums(
    frame: Frame,
    *,
    pixels: NDArray[np.int64],
    first: NDArray[np.int32],
    low: NDArray[np.int32],
    high: NDArray[np.int32],
    total: NDArray[np.int64],
    faces: NDArray[np.int64],
    names: NDArray[np.uint32] | None = None,
) -> LabelSums:
    """Return the sums of the labels that own a pixel from what `label_kernel` leaves.

    Parameters
    ----------
    frame : Frame
        The grid.
    pixels, first, low, high, total, faces : ndarray
        What the kernel leaves, row by row of the labels from 0 on.
    names : ndarray of uint32 or None, optional
        Labels of the rows where these are not their numbers.

    Returns
    -------
    sums : LabelSums
        Sums in pixels.
    """
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


def in_space(frame: Frame) -> tuple[tuple[int, ...], NDArray[np.bool_]]:
    """Return shape and periodicity of a frame with three axes, as the kernels take them.

    Parameters
    ----------
    frame : Frame
        A grid of 2 or 3 axes.

    Returns
    -------
    shape : tuple of int
        Length 3; a plane is one layer.
    periodic : ndarray of bool, shape (3,)
        A plane does not go on above and below.
    """
    missing = 3 - frame.dimension
    return (1,) * missing + frame.shape, np.array((False,) * missing + frame.periodic)


def dense_labels(
    labels: NDArray[np.uint32],
) -> tuple[NDArray[np.uint32], NDArray[np.uint32] | None]:
    """Return labels by which tables can be indexed without outgrowing the image.

    Parameters
    ----------
    labels : ndarray of uint32
        Labels of any height.

    Returns
    -------
    dense : ndarray of uint32, shape of the labels
        The labels themselves where the highest is low enough, else numbered anew without gaps;
        read-only, as the kernels are compiled for the arrays of an image.
    names : ndarray of uint32 or None
        What the new numbers stand for, 0 first; None where the labels are as they were.
    """
    if int(labels.max()) <= labels.size // 16:
        return labels, None
    names = np.union1d(labels, [0]).astype(np.uint32)
    dense = np.searchsorted(names, labels).astype(np.uint32)
    dense.setflags(write=False)
    return dense, names


def connected_patches(image: LabelImage) -> tuple[LabelImage, NDArray[np.uint32]]:
    """Take labels apart into the patches that hang together.

    Pixels hang together by their faces, and by an edge (in a plane: a corner) where both of the
    pixels beside it carry other labels. So the staircase of a boundary does not cut off single
    pixels, and a thin line of label 0 still parts what it runs between.

    Parameters
    ----------
    image : LabelImage
        Labels on a grid of 2 or 3 axes; patches go on across periodic edges.

    Returns
    -------
    patches : LabelImage
        Numbers of the patches, 1 and up by their first pixels in memory, on the same frame.
    owner : ndarray of uint32, shape (patches + 1,)
        Label of each patch; 0 for number 0.

    Examples
    --------
    Label 7 stands on both sides of label 2: three patches in a strip, two in a ring.

    >>> from spheru.image.frame import Frame
    >>> for periodic in (False, True):
    ...     frame = Frame(shape=(1, 4), pixel=1e-6, periodic=periodic)
    ...     strip = LabelImage(labels=np.array([[7, 2, 2, 7]]), frame=frame)
    ...     patches, owner = connected_patches(strip)
    ...     print(patches.labels.tolist(), owner.tolist())
    [[1, 2, 2, 3]] [0, 7, 2, 7]
    [[1, 2, 2, 1]] [0, 7, 2]
    """
    shape, periodic = in_space(image.frame)
    labels = image.labels.reshape(shape)
    changes = np.count_nonzero(labels[..., 1:] != labels[..., :-1])
    parent, owner = (np.zeros(changes + shape[0] * shape[1] + 1, dtype=np.uint32) for _ in range(2))
    patch = np.empty(shape, dtype=np.uint32)
    count = np.zeros(1, dtype=np.int64)
    patch_kernel(labels, periodic, parent, patch, owner, count)
    patches = LabelImage(labels=patch.reshape(image.frame.shape), frame=image.frame)
    return patches, owner[: int(count[0]) + 1].copy()


def tile_of(length: int) -> NDArray[np.int64]:
    """Return in which of the 8 tiles along an axis each of its pixels lies."""
    return np.arange(length, dtype=np.int64) * TILES // length


def _tile_steps(shape: tuple[int, ...], dimension: int) -> NDArray[np.int64]:
    steps = np.zeros((3, max(shape)), dtype=np.int64)
    for axis in range(3 - dimension, 3):
        steps[axis, : shape[axis]] = tile_of(shape[axis]) * TILES ** (2 - axis)
    return steps


def _pairs(frame: Frame) -> NDArray[np.int64]:
    """Return the neighbouring pixels across each axis in each tile."""
    places = [np.bincount(tile_of(n), minlength=TILES) for n in frame.shape]
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
