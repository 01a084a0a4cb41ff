"""The one pass over the pixels that measuring needs.

Sums only; what they mean is `spheru.measure.labels`' business.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from spheru.jit import kernel

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

__all__ = ["label_kernel"]


@kernel()
def label_kernel(
    labels: NDArray[np.uint32],
    periodic: NDArray[np.bool_],
    tile: NDArray[np.int64],
    pixels_out: NDArray[np.int64],
    first_out: NDArray[np.int32],
    low_out: NDArray[np.int32],
    high_out: NDArray[np.int32],
    sum_out: NDArray[np.int64],
    faces_out: NDArray[np.int64],
) -> None:
    """Sum up every label, and count the faces between labels, row by row and run by run.

    All positions of a label are taken relative to its first pixel in memory; along a periodic
    axis each run of pixels is moved by whole periods to where its first pixel is nearest. That is
    exact for labels that are shorter than half the period.

    Parameters
    ----------
    labels : ndarray of uint32, shape (nz, ny, nx)
        0 is no label.
    periodic : ndarray of bool, shape (3,)
        Axes that go on at their other side.
    tile : ndarray of int64, shape (3, max(nz, ny, nx))
        Per axis and place, what the index of the tile grows by.
    pixels_out : ndarray of int64, shape (n,)
        Pixels of each label; n is above the largest label; 0 on entry.
    first_out : ndarray of int32, shape (n, 3)
        First pixel of each label.
    low_out, high_out : ndarray of int32, shape (n, 3)
        Smallest and largest offset from the first pixel; 0 on entry.
    sum_out : ndarray of int64, shape (n, 3)
        Sum of the offsets from the first pixel; 0 on entry.
    faces_out : ndarray of int64, shape (tiles, 3)
        Faces between two labels by axis, in the tile of the pixel on the upper side; 0 on entry.
    """
    nz, ny, nx = labels.shape
    half = (nz // 2, ny // 2, nx // 2)
    for z in range(nz):
        below = z - 1 if z > 0 else (nz - 1 if periodic[0] else z)
        for y in range(ny):
            before = y - 1 if y > 0 else (ny - 1 if periodic[1] else y)
            row_tile = tile[0, z] + tile[1, y]
            left = labels[z, y, nx - 1] if periodic[2] else labels[z, y, 0]
            start = 0
            while start < nx:
                own = labels[z, y, start]
                end = start + 1
                while end < nx and labels[z, y, end] == own:
                    end += 1
                if own != 0:
                    if own != left != 0:
                        faces_out[row_tile + tile[2, start], 2] += 1
                    for x in range(start, end):
                        other = labels[z, before, x]
                        if own != other != 0:
                            faces_out[row_tile + tile[2, x], 1] += 1
                    if below != z:
                        for x in range(start, end):
                            other = labels[below, y, x]
                            if own != other != 0:
                                faces_out[row_tile + tile[2, x], 0] += 1
                    length = end - start
                    if pixels_out[own] == 0:
                        first_out[own, 0] = z
                        first_out[own, 1] = y
                        first_out[own, 2] = start
                    pixels_out[own] += length
                    dz = z - first_out[own, 0]
                    if periodic[0] and dz > half[0]:
                        dz -= nz
                    dy = y - first_out[own, 1]
                    if periodic[1] and dy > half[1]:
                        dy -= ny
                    elif periodic[1] and dy < -half[1]:
                        dy += ny
                    dx = start - first_out[own, 2]
                    if periodic[2] and dx > half[2]:
                        dx -= nx
                    elif periodic[2] and dx < -half[2]:
                        dx += nx
                    sum_out[own, 0] += length * dz
                    sum_out[own, 1] += length * dy
                    sum_out[own, 2] += length * dx + length * (length - 1) // 2
                    low_out[own, 0] = min(low_out[own, 0], dz)
                    low_out[own, 1] = min(low_out[own, 1], dy)
                    low_out[own, 2] = min(low_out[own, 2], dx)
                    high_out[own, 0] = max(high_out[own, 0], dz)
                    high_out[own, 1] = max(high_out[own, 1], dy)
                    high_out[own, 2] = max(high_out[own, 2], dx + length - 1)
                left = own
                start = end
