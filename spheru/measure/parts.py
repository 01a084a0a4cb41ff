"""Sums over a volume that is never in memory as a whole: part by part, then put together.

The sums are whole numbers, so that they do not depend on how the volume is cut or in which order
the parts come: they equal those of `spheru.measure.labels.sum_labels`. No file is known here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from spheru.measure.intervals import TILES
from spheru.measure.kernels import label_kernel
from spheru.measure.labels import LabelSums, gathered_sums, tile_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from numpy.typing import NDArray

    from spheru.image.frame import Frame

__all__ = ["PartSums", "merge_parts", "sum_part"]


@dataclass(frozen=True, slots=True, kw_only=True)
class PartSums:
    """Sums over the pixels of each label within a part of a volume.

    Attributes
    ----------
    label : ndarray of uint32, shape (n,)
        Labels that own a pixel of the part, rising.
    pixels : ndarray of int64, shape (n,)
        Their number of pixels in the part.
    first : ndarray of int32, shape (n, 3)
        The first of these pixels in memory, counted from the corner of the volume.
    low, high : ndarray of int32, shape (n, 3)
        Smallest and largest offset from the first pixel.
    total : ndarray of int64, shape (n, 3)
        Sum of the offsets from the first pixel.
    faces : ndarray of int64, shape (8**3, 3)
        Faces between two labels by axis in each tile of the volume; those at the lower sides of
        the part are among them, those at its upper sides belong to the parts beyond.
    """

    label: NDArray[np.uint32]
    pixels: NDArray[np.int64]
    first: NDArray[np.int32]
    low: NDArray[np.int32]
    high: NDArray[np.int32]
    total: NDArray[np.int64]
    faces: NDArray[np.int64]


def sum_part(
    labels: NDArray[np.uint32],
    frame: Frame,
    start: Sequence[int],
    below: Callable[[int], NDArray[np.uint32]],
) -> PartSums:
    """Go once over the pixels of a part of a volume and sum up each label.

    Parameters
    ----------
    labels : ndarray of uint32, shape (nz, ny, nx)
        The part; read-only, as the arrays of an image are.
    frame : Frame
        The grid of the whole volume.
    start : sequence of int
        First pixel of the part along each axis.
    below : callable
        Takes an axis and returns the labels of the layer of pixels next to the part on its lower
        side, in the shape of that side; asked only where there is one, across a periodic edge too.

    Returns
    -------
    sums : PartSums
        Sums of the part.
    """
    whole = np.array(frame.shape)
    runs_through = np.array(labels.shape) == whole
    dense, names = _numbered(labels)
    steps = [
        tile_of(frame.shape[axis])[first : first + length] * TILES ** (2 - axis)
        for axis, (first, length) in enumerate(zip(start, labels.shape, strict=True))
    ]
    tile = np.zeros((3, max(labels.shape)), dtype=np.int64)
    for axis, step in enumerate(steps):
        tile[axis, : len(step)] = step
    pixels = np.zeros(len(names), dtype=np.int64)
    first, low, high = (np.zeros((len(names), 3), dtype=np.int32) for _ in range(3))
    total = np.zeros((len(names), 3), dtype=np.int64)
    faces = np.zeros((TILES**3, 3), dtype=np.int64)
    periodic = np.array(frame.periodic) & runs_through
    label_kernel(dense, periodic, tile, pixels, first, low, high, total, faces)
    for axis in range(3):
        if start[axis] > 0 or (frame.periodic[axis] and not runs_through[axis]):
            faces[:, axis] += _side_faces(
                labels[(slice(None),) * axis + (0,)], below(axis), axis, steps
            )
    keep = slice(1, None)  # row 0 is no label
    return PartSums(
        label=names[keep],
        pixels=pixels[keep],
        first=first[keep] + np.array(start, dtype=np.int32),
        low=low[keep],
        high=high[keep],
        total=total[keep],
        faces=faces,
    )


def merge_parts(
    parts: Iterable[PartSums],
    frame: Frame,
    labels: int,
    rows: Callable[[], Iterable[tuple[Sequence[int], NDArray[np.uint32]]]],
) -> LabelSums:
    """Put the sums of all parts of a volume together.

    Parameters
    ----------
    parts : iterable of PartSums
        Every part once, in any order; gone through twice.
    frame : Frame
        The grid of the whole volume.
    labels : int
        The highest label.
    rows : callable
        Returns bands of whole rows of the volume, each with its first pixel. Called only where a
        label is longer than half a period, so that only single rows tell where its pixels belong.

    Returns
    -------
    sums : LabelSums
        What `sum_labels` gives for the whole volume.
    """
    shape = np.array(frame.shape)
    pixels = np.zeros(labels + 1, dtype=np.int64)
    place = np.full(labels + 1, frame.pixels, dtype=np.int64)
    faces = np.zeros((TILES**3, 3), dtype=np.int64)
    for part in parts:
        pixels[part.label] += part.pixels
        at = np.ravel_multi_index(tuple(part.first.T), frame.shape)
        place[part.label] = np.minimum(place[part.label], at)
        faces += part.faces
    place[pixels == 0] = 0
    first = np.stack(np.unravel_index(place, frame.shape), axis=1).astype(np.int32)
    del place

    low, high = (np.zeros((labels + 1, 3), dtype=np.int32) for _ in range(2))
    total = np.zeros((labels + 1, 3), dtype=np.int64)
    for part in parts:
        row = part.label
        shift = _nearest(part.first - first[row], frame)
        low[row] = np.minimum(low[row], part.low + shift)
        high[row] = np.maximum(high[row], part.high + shift)
        total[row] += part.total + part.pixels[:, None] * shift

    half = shape // 2
    long = (((low <= -half) | (high >= half)) & np.array(frame.periodic)).any(axis=1) & (pixels > 0)
    if long.any():
        low[long], high[long], total[long] = 0, 0, 0
        for start, band in rows():
            _add_runs(band, start, frame, long, first, low, high, total)
    return gathered_sums(
        frame, pixels=pixels, first=first, low=low, high=high, total=total, faces=faces
    )


def _numbered(
    labels: NDArray[np.uint32],
) -> tuple[NDArray[np.uint32], NDArray[np.uint32]]:
    """Return labels without gaps, 0 staying 0, and what the numbers stand for."""
    flat = labels.reshape(-1)
    at = np.append(0, np.flatnonzero(flat[1:] != flat[:-1]) + 1)
    run = flat[at]  # far fewer than pixels
    seen = np.zeros(int(run.max()) + 1, dtype=np.bool_)
    seen[run] = True
    seen[0] = True
    names = np.flatnonzero(seen).astype(np.uint32)
    number = np.empty(len(seen), dtype=np.uint32)  # only the rows of `names` are ever touched
    number[names] = np.arange(len(names), dtype=np.uint32)
    dense = np.repeat(number[run], np.diff(at, append=flat.size)).reshape(labels.shape)
    dense.setflags(write=False)  # the kernel is compiled for the read-only arrays of an image
    return dense, names


def _side_faces(
    own: NDArray[np.uint32],
    other: NDArray[np.uint32],
    axis: int,
    steps: Sequence[NDArray[np.int64]],
) -> NDArray[np.int64]:
    """Count the faces between the first layer of a part and the layer below it, by tile."""
    across = [step for k, step in enumerate(steps) if k != axis]
    tile = steps[axis][0] + np.add.outer(across[0], across[1])
    return np.bincount(tile[(own != other) & (own != 0) & (other != 0)], minlength=TILES**3)


def _nearest(offset: NDArray[np.int32], frame: Frame) -> NDArray[np.int32]:
    """Return offsets, along periodic axes moved by the period where that makes them shorter."""
    for axis in np.flatnonzero(frame.periodic):
        length = frame.shape[axis]
        offset[:, axis] -= length * (offset[:, axis] > length // 2)
        offset[:, axis] += length * (offset[:, axis] < -(length // 2))
    return offset


def _add_runs(
    band: NDArray[np.uint32],
    start: Sequence[int],
    frame: Frame,
    chosen: NDArray[np.bool_],
    first: NDArray[np.int32],
    low: NDArray[np.int32],
    high: NDArray[np.int32],
    total: NDArray[np.int64],
) -> None:
    """Add the runs of pixels of some labels, each moved as a whole, as `label_kernel` does."""
    begins = np.ones(band.shape, dtype=np.bool_)
    begins[..., 1:] = band[..., 1:] != band[..., :-1]
    at = np.flatnonzero(begins)
    length = np.diff(at, append=band.size)
    label = band.reshape(-1)[at]
    used = chosen[label]
    at, length, label = at[used], length[used], label[used]
    place = np.stack(np.unravel_index(at, band.shape), axis=1) + np.array(start)
    offset = _nearest((place - first[label]).astype(np.int32), frame)
    last = offset.copy()
    last[:, 2] += (length - 1).astype(np.int32)
    np.minimum.at(low, label, offset)
    np.maximum.at(high, label, last)
    sums = length[:, None] * offset.astype(np.int64)
    sums[:, 2] += length * (length - 1) // 2
    np.add.at(total, label, sums)
