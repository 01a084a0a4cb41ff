"""The passes over the pixels that measuring needs.

Sums only; what they mean is the business of `spheru.measure.labels`, `shapes` and `edges`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from spheru.jit import kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["box_kernel", "label_kernel", "patch_kernel", "shape_kernel", "smooth_label_kernel"]


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
                    part = labels[z, before, start:end]
                    for i in range(len(part)):
                        if own != part[i] != 0:
                            faces_out[row_tile + tile[2, start + i], 1] += 1
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


@kernel()
def shape_kernel(
    labels: NDArray[np.uint32],
    periodic: NDArray[np.bool_],
    middle: NDArray[np.int32],
    step: NDArray[np.int64],
    moment_out: NDArray[np.int64],
    exit_out: NDArray[np.int64],
) -> None:
    """Sum up first and second moments of every label, and where test lines leave it, run by run.

    Positions are taken relative to `middle`, along a periodic axis to its nearest image.

    Parameters
    ----------
    labels : ndarray of uint32, shape (nz, ny, nx)
        0 is no label.
    periodic : ndarray of bool, shape (3,)
        Axes that go on at their other side.
    middle : ndarray of int32, shape (n, 3)
        A pixel near the centre of each label; n is above the largest label.
    step : ndarray of int64, shape (m, 3)
        Directions of the test lines, in pixels.
    moment_out : ndarray of int64, shape (n, 9)
        Sums of z, y, x, zz, yy, xx, yx, zx, zy; 0 on entry.
    exit_out : ndarray of int64, shape (n, m)
        Pixels of a label from which one step leads out of it, or out of the frame; 0 on entry.
    """
    nz, ny, nx = labels.shape
    for z in range(nz):
        for y in range(ny):
            start = 0
            while start < nx:
                own = labels[z, y, start]
                end = start + 1
                while end < nx and labels[z, y, end] == own:
                    end += 1
                if own != 0:
                    length = end - start
                    dz = z - middle[own, 0]
                    if periodic[0]:
                        if 2 * dz > nz:
                            dz -= nz
                        elif 2 * dz < -nz:
                            dz += nz
                    dy = y - middle[own, 1]
                    if periodic[1]:
                        if 2 * dy > ny:
                            dy -= ny
                        elif 2 * dy < -ny:
                            dy += ny
                    dx = start - middle[own, 2]
                    if periodic[2]:
                        if 2 * dx + length - 1 > nx:
                            dx -= nx
                        elif 2 * dx + length - 1 < -nx:
                            dx += nx
                    sum_x = length * dx + length * (length - 1) // 2
                    moment_out[own, 0] += length * dz
                    moment_out[own, 1] += length * dy
                    moment_out[own, 2] += sum_x
                    moment_out[own, 3] += length * dz * dz
                    moment_out[own, 4] += length * dy * dy
                    moment_out[own, 5] += (
                        length * dx * dx
                        + dx * length * (length - 1)
                        + (length - 1) * length * (2 * length - 1) // 6
                    )
                    moment_out[own, 6] += dy * sum_x
                    moment_out[own, 7] += dz * sum_x
                    moment_out[own, 8] += length * dz * dy
                    for k in range(step.shape[0]):
                        z1 = z + step[k, 0]
                        if periodic[0]:
                            z1 %= nz
                        y1 = y + step[k, 1]
                        if periodic[1]:
                            y1 %= ny
                        if z1 < 0 or z1 >= nz or y1 < 0 or y1 >= ny:
                            exit_out[own, k] += length
                            continue
                        shift = step[k, 2]
                        row = labels[z1, y1]
                        first = min(max(start, -shift), end)
                        last = max(min(end, nx - shift), first)
                        part = row[first + shift : last + shift]
                        out = 0
                        for i in range(len(part)):
                            out += part[i] != own
                        for x in range(start, first):
                            out += not periodic[2] or row[(x + shift) % nx] != own
                        for x in range(last, end):
                            out += not periodic[2] or row[(x + shift) % nx] != own
                        exit_out[own, k] += out
                start = end


@kernel()
def box_kernel(
    labels: NDArray[np.uint32],
    low: NDArray[np.int64],
    high: NDArray[np.int64],
    pixels_out: NDArray[np.int64],
) -> None:
    """Count the pixels of every label within a box.

    Parameters
    ----------
    labels : ndarray of uint32, shape (nz, ny, nx)
        Labels, 0 among them.
    low, high : ndarray of int64, shape (3,)
        First pixel of the box along each axis, and the first one beyond it.
    pixels_out : ndarray of int64, shape (n,)
        Pixels of each label; n is above the largest label; 0 on entry.
    """
    for z in range(low[0], high[0]):
        for y in range(low[1], high[1]):
            for x in range(low[2], high[2]):
                pixels_out[labels[z, y, x]] += 1


@kernel(inline=True)
def _join(parent: NDArray[np.uint32], one: int, other: int) -> None:
    """Let two runs hang together; the earlier root wins."""
    while parent[one] != one:
        parent[one] = parent[parent[one]]
        one = parent[one]
    while parent[other] != other:
        parent[other] = parent[parent[other]]
        other = parent[other]
    if one < other:
        parent[other] = one
    else:
        parent[one] = other


@kernel()
def patch_kernel(
    labels: NDArray[np.uint32],
    periodic: NDArray[np.bool_],
    parent: NDArray[np.uint32],
    patch_out: NDArray[np.uint32],
    owner_out: NDArray[np.uint32],
    count_out: NDArray[np.int64],
) -> None:
    """Give numbers to the patches of pixels of one label that hang together.

    Pixels hang together by their faces, and by an edge (in a plane: a corner) where both of the
    pixels beside it carry other labels. Runs of pixels along x are joined by union and find; the
    patches are numbered by their first pixels in memory.

    Parameters
    ----------
    labels : ndarray of uint32, shape (nz, ny, nx)
        0 is no label and has no patches.
    periodic : ndarray of bool, shape (3,)
        Axes that go on at their other side.
    parent : ndarray of uint32, shape (r,)
        Room to work in; r is above the number of runs.
    patch_out : ndarray of uint32, shape (nz, ny, nx)
        Number of the patch, 1 and up; 0 where the label is 0.
    owner_out : ndarray of uint32, shape (r,)
        Label of each patch.
    count_out : ndarray of int64, shape (1,)
        Number of patches.
    """
    nz, ny, nx = labels.shape
    run = 0
    for z in range(nz):
        for y in range(ny):
            row, patch_row = labels[z, y], patch_out[z, y]
            start = 0
            while start < nx:
                own = row[start]
                end = start + 1
                while end < nx and row[end] == own:
                    end += 1
                if own == 0:
                    patch_row[start:end] = 0
                else:
                    run += 1
                    parent[run] = run
                    patch_row[start:end] = run
                    for back in range(2):  # the row before this one, and that in the layer below
                        if (y if back == 0 else z) == 0:
                            continue
                        z1, y1 = (z, y - 1) if back == 0 else (z - 1, y)
                        part, patch_part = labels[z1, y1, start:end], patch_out[z1, y1, start:end]
                        joined = np.uint32(0)
                        for i in range(len(part)):
                            if part[i] == own and patch_part[i] != joined:
                                joined = patch_part[i]
                                _join(parent, run, joined)
                        if start > 0 and row[start - 1] != 0 and part[0] != 0:
                            if labels[z1, y1, start - 1] == own:  # by a corner
                                _join(parent, run, patch_out[z1, y1, start - 1])
                        if end < nx and row[end] != 0 and part[-1] != 0:
                            if labels[z1, y1, end] == own:
                                _join(parent, run, patch_out[z1, y1, end])
                start = end
            if periodic[2] and labels[z, y, 0] == labels[z, y, nx - 1] != 0:
                _join(parent, patch_out[z, y, 0], patch_out[z, y, nx - 1])
        if periodic[1]:
            for x in range(nx):
                if labels[z, 0, x] == labels[z, ny - 1, x] != 0:
                    _join(parent, patch_out[z, 0, x], patch_out[z, ny - 1, x])
    if periodic[0]:
        for y in range(ny):
            for x in range(nx):
                if labels[0, y, x] == labels[nz - 1, y, x] != 0:
                    _join(parent, patch_out[0, y, x], patch_out[nz - 1, y, x])
    # by corners, in the planes of y and x, z and x, z and y: what the runs have not seen
    for plane in range(3):
        step_z, step_y, step_x = plane > 0, plane != 1, plane < 2
        if step_z and nz == 1:
            continue
        for z in range(nz):
            z1 = z + step_z
            if z1 == nz:
                if not periodic[0]:
                    continue
                z1 = 0
            for y in range(ny):
                y1 = y + step_y
                if y1 == ny:
                    if not periodic[1]:
                        continue
                    y1 = 0
                # the square's corners: (z, y, x), one step along either axis, one along both
                za, ya = (z, y1) if plane == 2 else (z, y)
                zb, yb = (z1, y) if plane == 2 else (z1, y1)
                here, aside = labels[z, y], labels[za, ya]
                beyond, across = labels[zb, yb], labels[z1, y1]
                unseen = plane == 2 or z1 < z or y1 < y
                for x in range(
                    0 if unseen else nx - 1, nx if periodic[2] or not step_x else nx - 1
                ):
                    x1 = x + step_x
                    if x1 == nx:
                        x1 = 0
                    own, one = here[x], aside[x1]
                    if own == one:
                        continue
                    other, far = beyond[x], across[x1]
                    if own == other or min(own, one, other) == 0:
                        continue
                    if own == far:
                        _join(parent, patch_out[z, y, x], patch_out[z1, y1, x1])
                    if one == other and far != 0:
                        _join(parent, patch_out[za, ya, x1], patch_out[zb, yb, x])
    count = 0
    for k in range(1, run + 1):
        if parent[k] == k:  # the parent of any other run stands before it, already numbered
            count += 1
            parent[k] = count
        else:
            parent[k] = parent[parent[k]]
    for z in range(nz):
        for y in range(ny):
            for x in range(nx):
                own = labels[z, y, x]
                if own != 0:
                    patch = parent[patch_out[z, y, x]]
                    patch_out[z, y, x] = patch
                    owner_out[patch] = own
    count_out[0] = count


@kernel()
def smooth_label_kernel(
    labels: NDArray[np.uint32],
    periodic: NDArray[np.bool_],
    row: NDArray[np.float64],
    column: NDArray[np.float64],
    reach: float,
    label_out: NDArray[np.uint32],
) -> None:
    """Return the label that weighs most about each point, with weights (1 - (r/reach)^2)^2.

    A straight boundary in a grid is a staircase; the line on which two labels weigh the same is
    all but straight again. Of equal weights the lowest label wins.

    Parameters
    ----------
    labels : ndarray of uint32, shape (ny, nx)
        The picture.
    periodic : ndarray of bool, shape (2,)
        Axes that go on at their other side.
    row, column : ndarray of float64, shape (n,)
        Points within the picture [pixels]; the centre of the first pixel stands at 0.5.
    reach : float
        Distance beyond which pixels do not weigh [pixels], > 0.8.
    label_out : ndarray of uint32, shape (n,)
        The labels.
    """
    ny, nx = labels.shape
    side = 2 * int(np.ceil(reach)) + 1
    seen = np.empty(side * side, dtype=np.uint32)
    share = np.empty(side * side, dtype=np.float64)
    steep = 1.0 / (reach * reach)
    for k in range(len(row)):
        y0 = int(np.ceil(row[k] - 0.5 - reach))
        y1 = int(np.floor(row[k] - 0.5 + reach))
        x0 = int(np.ceil(column[k] - 0.5 - reach))
        x1 = int(np.floor(column[k] - 0.5 + reach))
        found = 0
        for y in range(y0, y1 + 1):
            v = y
            if periodic[0]:
                v = y % ny
            elif y < 0 or y >= ny:
                continue
            dy = y + 0.5 - row[k]
            for x in range(x0, x1 + 1):
                u = x
                if periodic[1]:
                    u = x % nx
                elif x < 0 or x >= nx:
                    continue
                dx = x + 0.5 - column[k]
                weight = 1.0 - steep * (dy * dy + dx * dx)
                if weight <= 0.0:
                    continue
                own = labels[v, u]
                place = 0
                while place < found and seen[place] != own:
                    place += 1
                if place == found:
                    seen[found] = own
                    share[found] = 0.0
                    found += 1
                share[place] += weight * weight
        best = 0
        for place in range(1, found):
            if share[place] > share[best] or (
                share[place] == share[best] and seen[place] < seen[best]
            ):
                best = place
        label_out[k] = seen[best]
