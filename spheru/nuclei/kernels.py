"""Compiled loops of the thinning of nuclei."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from spheru.jit import kernel, prange

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["cell_sort_kernel", "thinning_kernel"]


@kernel()
def cell_sort_kernel(
    position: NDArray[np.float64],
    length: NDArray[np.float64],
    order: NDArray[np.int64],
    low: NDArray[np.float64],
    edge: NDArray[np.float64],
    shape: NDArray[np.int64],
    start_out: NDArray[np.int64],
    point_out: NDArray[np.float64],
    row_out: NDArray[np.int64],
) -> None:
    """Sort births into cells, counting.

    Parameters
    ----------
    position : ndarray of float64, shape (n, D)
        Places, the last axis fastest.
    length : ndarray of float64, shape (n,)
        Grown length at birth.
    order : ndarray of int64, shape (n,)
        Rows in the order that they shall have within a cell.
    low, edge : ndarray of float64, shape (3,)
        Corner of the grid and edges of a cell.
    shape : ndarray of int64, shape (3,)
        Number of cells per axis.
    start_out : ndarray of int64, shape (cells + 1,)
        Where the rows of each cell begin in `row_out`; zero on entry.
    point_out : ndarray of float64, shape (n, 4)
        Places on three axes and lengths, cell by cell.
    row_out : ndarray of int64, shape (n,)
        Rows, cell by cell.
    """
    n = len(order)
    axes = position.shape[1]
    skip = 3 - axes
    cell = np.empty(n, np.int32)
    for i in range(n):
        flat = 0
        for k in range(axes):
            c = int(np.floor((position[i, k] - low[skip + k]) / edge[skip + k]))
            flat = flat * shape[skip + k] + min(max(c, 0), shape[skip + k] - 1)
        cell[i] = flat
        start_out[flat + 1] += 1
    for c in range(len(start_out) - 1):
        start_out[c + 1] += start_out[c]
    place = start_out[:-1].copy()
    for m in range(n):
        i = order[m]
        at = place[cell[i]]
        place[cell[i]] += 1
        row_out[at] = i
        point_out[at, 0] = 0.0
        for k in range(axes):
            point_out[at, skip + k] = position[i, k]
        point_out[at, 3] = length[i]


@kernel()
def _swallower(
    point: NDArray[np.float64],
    period: NDArray[np.float64],
    begin: int,
    end: int,
    i: int,
) -> int:
    """Return the first of some births that has grown over birth i before it was born, else -1.

    Looks at the rows from `begin` to before `end`, whose lengths rise.
    """
    for j in range(begin, end):
        reach = point[i, 3] - point[j, 3]
        if reach <= 0:
            return -1
        distance2 = 0.0
        for k in range(3):
            d = abs(point[i, k] - point[j, k])
            d = min(d, abs(period[k] - d))
            distance2 += d * d
        if distance2 < reach * reach:
            return j
    return -1


@kernel(parallel=True)
def thinning_kernel(
    point: NDArray[np.float64],
    row: NDArray[np.int64],
    start: NDArray[np.int64],
    low: NDArray[np.float64],
    edge: NDArray[np.float64],
    period: NDArray[np.float64],
    earliest: NDArray[np.float64],
    level_start: NDArray[np.int64],
    level_shape: NDArray[np.int64],
    rings: int,
    alive_out: NDArray[np.bool_],
) -> None:
    """Find the births that no grown crystal had swallowed before.

    Birth i is swallowed if any other birth j, itself possibly swallowed, has
    ``length[j] + distance(i, j) < length[i]``. Equality leaves i alive. The result does not
    depend on the order of the births nor on the number of threads.

    The birth that swallowed the one looked at before is tried first, then those nearby, ring by
    ring of cells around the own one. What is then still undecided goes down the pyramid of the
    earliest lengths, which leaves out every block of cells whose earliest crystal cannot have come
    as far as i.

    Parameters
    ----------
    point : ndarray of float64, shape (n, 4)
        Places within the grid and grown length at birth, cell by cell, the length rising in each.
    row : ndarray of int64, shape (n,)
        Row of each of them in `alive_out`.
    start : ndarray of int64, shape (cells + 1,)
        Where the births of each cell begin.
    low, edge : ndarray of float64, shape (3,)
        Corner of the grid and edges of a cell.
    period : ndarray of float64, shape (3,)
        Period of each axis (a whole number of cells), inf where there is none. Of several images
        only the nearest matters, since it is the first to arrive.
    earliest : ndarray of float64, shape (blocks,)
        Smallest length in each cell, then in each block of 2 x 2 x 2 cells, and so on up to one
        block; inf where there is none.
    level_start : ndarray of int64, shape (levels,)
        Where each level of the pyramid begins in `earliest`.
    level_shape : ndarray of int64, shape (levels, 3)
        Number of blocks of each level per axis.
    rings : int
        Number of rings that are tried before the pyramid.
    alive_out : ndarray of bool, shape (n,)
        Whether the birth survives.
    """
    n = len(point)
    levels = len(level_start)
    nz, ny, nx = level_shape[0, 0], level_shape[0, 1], level_shape[0, 2]
    first = earliest[level_start[levels - 1]]
    chunk = 1024
    for block in prange((n + chunk - 1) // chunk):
        stack = np.empty((8 * levels + 8, 4), np.int64)
        own = np.empty(3, np.int64)
        least = np.empty(3, np.int64)
        most = np.empty(3, np.int64)
        margin = np.empty(3)
        recent = block * chunk
        for i in range(block * chunk, min(n, (block + 1) * chunk)):
            tau = point[i, 3]
            by = _swallower(point, period, recent, recent + 1, i)
            done = by >= 0 or tau <= first
            for k in range(3):
                size = level_shape[0, k]
                own[k] = min(max(int(np.floor((point[i, k] - low[k]) / edge[k])), 0), size - 1)
                if period[k] < np.inf:
                    least[k] = -((size - 1) // 2)
                    most[k] = size // 2
                else:
                    least[k] = -own[k]
                    most[k] = size - 1 - own[k]
                # distance to the next cell, less what rounding may have moved
                offset = point[i, k] - low[k] - own[k] * edge[k]
                margin[k] = max(min(offset, edge[k] - offset) - 1e-9 * edge[k], 0.0)
            # 1. ring by ring of cells, near to far
            ring = 0
            while not done and ring <= rings:
                if ring > 0:
                    reach = tau - first
                    done = True
                    for k in range(3):
                        if ring <= max(-least[k], most[k]):
                            if margin[k] + (ring - 1) * edge[k] < reach:
                                done = False
                    if done:
                        break
                for oz in range(max(-ring, least[0]), min(ring, most[0]) + 1):
                    gap = margin[0] + (abs(oz) - 1) * edge[0]
                    gap2_z = gap * gap if oz != 0 else 0.0
                    cz = own[0] + oz
                    cz += nz if cz < 0 else (-nz if cz >= nz else 0)
                    for oy in range(max(-ring, least[1]), min(ring, most[1]) + 1):
                        gap = margin[1] + (abs(oy) - 1) * edge[1]
                        gap2_zy = gap2_z + (gap * gap if oy != 0 else 0.0)
                        cy = own[1] + oy
                        cy += ny if cy < 0 else (-ny if cy >= ny else 0)
                        shell = abs(oz) == ring or abs(oy) == ring
                        step = 1 if shell or ring == 0 else 2 * ring
                        for ox in range(-ring, ring + 1, step):
                            if ox < least[2] or ox > most[2]:
                                continue
                            gap = margin[2] + (abs(ox) - 1) * edge[2]
                            gap2 = gap2_zy + (gap * gap if ox != 0 else 0.0)
                            cx = own[2] + ox
                            cx += nx if cx < 0 else (-nx if cx >= nx else 0)
                            cell = (cz * ny + cy) * nx + cx
                            reach = tau - earliest[cell]
                            if reach <= 0 or reach * reach <= gap2:
                                continue
                            begin, end = start[cell], start[cell + 1]
                            by = _swallower(point, period, begin, end, i)
                            if by >= 0:
                                break
                        if by >= 0:
                            break
                    if by >= 0:
                        break
                done = done or by >= 0
                ring += 1
            # 2. down the pyramid
            depth = 0
            if not done:
                stack[0, 0] = levels - 1
                stack[0, 1] = 0
                stack[0, 2] = 0
                stack[0, 3] = 0
                depth = 1
            while depth > 0:
                depth -= 1
                level = stack[depth, 0]
                shape = level_shape[level]
                flat = (stack[depth, 1] * shape[1] + stack[depth, 2]) * shape[2] + stack[depth, 3]
                reach = tau - earliest[level_start[level] + flat]
                if reach <= 0:
                    continue
                distance2 = 0.0
                for k in range(3):
                    near = low[k] + (stack[depth, 1 + k] << level) * edge[k]
                    end = min((stack[depth, 1 + k] + 1) << level, level_shape[0, k])
                    far = low[k] + end * edge[k]
                    x = point[i, k]
                    d = max(near - x, x - far, 0.0)
                    d = min(d, max(near - x + period[k], 0.0), max(x + period[k] - far, 0.0))
                    d = max(d - 1e-9 * edge[k], 0.0)
                    distance2 += d * d
                if distance2 >= reach * reach:
                    continue
                if level > 0:
                    below = level_shape[level - 1]
                    bz, by_, bx = stack[depth, 1], stack[depth, 2], stack[depth, 3]
                    for cz in range(2 * bz, min(2 * bz + 2, below[0])):
                        for cy in range(2 * by_, min(2 * by_ + 2, below[1])):
                            for cx in range(2 * bx, min(2 * bx + 2, below[2])):
                                stack[depth, 0] = level - 1
                                stack[depth, 1] = cz
                                stack[depth, 2] = cy
                                stack[depth, 3] = cx
                                depth += 1
                    continue
                by = _swallower(point, period, start[flat], start[flat + 1], i)
                if by >= 0:
                    break
            alive_out[row[i]] = by < 0
            if by >= 0:
                recent = by
