"""Compiled loops of the exact engine: cells of births, candidates of a block, pixels.

Plain arrays in pixel units; what they mean and which blocks are taken is settled in ``exact``.

Candidates of a block are kept as a structure of arrays, one list per level of blocks: place
relative to the centre of the top block and birth length relative to one of them (float32), and the
index of the birth (int32).
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np
from llvmlite import ir  # type: ignore[import-untyped]
from numba import types
from numba.extending import intrinsic, overload

from spheru.jit import kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

    B1: TypeAlias = NDArray[np.bool_]
    F4: TypeAlias = NDArray[np.float32]
    F8: TypeAlias = NDArray[np.float64]
    Real: TypeAlias = float | np.float32
    I4: TypeAlias = NDArray[np.int32]
    I8: TypeAlias = NDArray[np.int64]
    U4: TypeAlias = NDArray[np.uint32]

__all__ = ["cells_kernel", "owned_kernel", "relabel_kernel", "tessellate_kernel"]


@kernel()
def cells_kernel(
    place: F8,
    birth: F8,
    low: F8,
    cell: F8,
    dims: I8,
    start_out: I8,
    population_out: F8,
    row_out: I4,
) -> None:
    """Sort births into the cells of a grid by counting.

    Parameters
    ----------
    place : ndarray of float64, shape (3, n)
        Places z, y, x of the nuclei in pixels.
    birth : ndarray of float64, shape (n,)
        Birth lengths in pixels.
    low, cell : ndarray of float64, shape (3,)
        Corner of the grid and edges of a cell in pixels.
    dims : ndarray of int64, shape (3,)
        Numbers of cells.
    start_out : ndarray of int64, shape (cells + 2,), zeros
        Cell c holds the sorted births start_out[c] to start_out[c + 1].
    population_out : ndarray of float64, shape (4, n)
        Sorted places z, y, x and birth lengths.
    row_out : ndarray of int32, shape (n,)
        Row of each sorted birth.
    """
    n = place.shape[1]
    which = np.empty(n, np.int64)
    for i in range(n):
        c = 0
        for k in range(3):
            index = int((place[k, i] - low[k]) / cell[k])
            index = min(max(index, 0), dims[k] - 1)
            c = c * dims[k] + index
        which[i] = c
        start_out[c + 2] += 1
    for c in range(2, start_out.size):
        start_out[c] += start_out[c - 1]
    for i in range(n):
        at = start_out[which[i] + 1]
        start_out[which[i] + 1] += 1
        for k in range(3):
            population_out[k, at] = place[k, i]
        population_out[3, at] = birth[i]
        row_out[at] = i


@kernel()
def _reach(
    centre: F8,
    half: F8,
    low: F8,
    cell: F8,
    dims: I8,
    period: F8,
    reach: float,
    span: I8,
) -> bool:
    """Set the range of unwrapped cells within `reach` of a block; True where it holds all."""
    everything = True
    for k in range(3):
        far = reach
        if period[k] > 0.0:
            far = min(far, 0.5 * period[k] + 1e-6)  # other images are never the nearest
        first = math.floor((centre[k] - half[k] - far - low[k]) / cell[k] - 1e-6)
        last = math.floor((centre[k] + half[k] + far - low[k]) / cell[k] + 1e-6)
        if period[k] > 0.0:
            everything = everything and far < reach
        else:
            everything = everything and first <= 0 and last >= dims[k] - 1
            first = min(max(first, 0), dims[k] - 1)
            last = min(max(last, 0), dims[k] - 1)
        span[k, 0] = first
        span[k, 1] = last
    return everything


@kernel()
def _bound(
    centre: F8,
    half: F8,
    population: F8,
    start: I8,
    dims: I8,
    period: F8,
    span: I8,
) -> tuple[float, float]:
    """Tell when the births of a range of cells have taken a whole block, and by which birth length.

    Range and period let a cell stand one period before or after the frame at most.
    """
    bound = 1e150
    least = 0.0
    for iz in range(span[0, 0], span[0, 1] + 1):
        wz = -1 if iz < 0 else (1 if iz >= dims[0] else 0)
        for iy in range(span[1, 0], span[1, 1] + 1):
            wy = -1 if iy < 0 else (1 if iy >= dims[1] else 0)
            line = ((iz - wz * dims[0]) * dims[1] + iy - wy * dims[1]) * dims[2]
            for ix in range(span[2, 0], span[2, 1] + 1):
                wx = -1 if ix < 0 else (1 if ix >= dims[2] else 0)
                c = line + ix - wx * dims[2]
                for i in range(start[c], start[c + 1]):
                    z = abs(population[0, i] + wz * period[0] - centre[0]) + half[0]
                    y = abs(population[1, i] + wy * period[1] - centre[1]) + half[1]
                    x = abs(population[2, i] + wx * period[2] - centre[2]) + half[2]
                    spare = bound - population[3, i]
                    far = (z * z + y * y + x * x) * (1.0 + 1e-12)
                    if far < spare * abs(spare):
                        least = population[3, i]
                        bound = least + math.sqrt(far)
    return bound, least


@kernel()
def _collect(
    centre: F8,
    half: F8,
    population: F8,
    start: I8,
    low: F8,
    cell: F8,
    dims: I8,
    period: F8,
    span: I8,
    reach: float,
    base: float,
    near: F4,
    index: I4,
) -> int:
    """Copy the births of the cells within `reach` of a block to the first list; return how many.

    Those that find no room are counted only.
    """
    cz, cy, cx = centre[0], centre[1], centre[2]
    nx = dims[2]
    count = 0
    room = index.shape[1] - 8
    reach = reach * reach * (1.0 + 1e-9) + 1e-9
    for iz in range(span[0, 0], span[0, 1] + 1):
        wz = -1 if iz < 0 else (1 if iz >= dims[0] else 0)
        gap = max(abs(low[0] + (iz + 0.5) * cell[0] - cz) - 0.5 * cell[0] - half[0], 0.0)
        left_z = reach - gap * gap
        shift_z = wz * period[0] - cz
        for iy in range(span[1, 0], span[1, 1] + 1):
            wy = -1 if iy < 0 else (1 if iy >= dims[1] else 0)
            gap = max(abs(low[1] + (iy + 0.5) * cell[1] - cy) - 0.5 * cell[1] - half[1], 0.0)
            left = left_z - gap * gap
            if left < 0.0:
                continue
            wide = half[2] + math.sqrt(left)
            first = math.floor(max((cx - wide - low[2]) / cell[2] - 1e-6, span[2, 0]))
            last = math.floor(min((cx + wide - low[2]) / cell[2] + 1e-6, span[2, 1]))
            line = ((iz - wz * dims[0]) * dims[1] + iy - wy * dims[1]) * nx
            shift_y = wy * period[1] - cy
            while first <= last:
                wx = -1 if first < 0 else (1 if first >= nx else 0)
                stop = min(last, wx * nx + nx - 1)
                begin = start[line + first - wx * nx]
                more = start[line + stop - wx * nx + 1] - begin
                shift_x = wx * period[2] - cx
                first = stop + 1
                if count + more <= room:
                    for i in range(more):
                        near[0, 0, count + i] = population[0, begin + i] + shift_z
                        near[0, 1, count + i] = population[1, begin + i] + shift_y
                        near[0, 2, count + i] = population[2, begin + i] + shift_x
                        near[0, 3, count + i] = population[3, begin + i] - base
                        index[0, count + i] = begin + i
                count += more
    return count


@kernel()
def _prune(
    near: F4,
    index: I4,
    source: int,
    k: int,
    block: F4,
    squared: bool,
    end: Real,
    slack: Real,
    ahead: Real,
    value: F4,
    radius: F4,
    rank: F4,
    flag: I4,
    pick: I4,
) -> int:
    """Keep the candidates that may win a pixel of a block, one list further; return their number.

    The winner at the centre of the block (or one that nearly wins) is held against each of the
    others. Loops run on to the next multiple of eight, over what earlier lists left there: so they
    stay whole vectors. `ahead` lifts all values above 0, where floats sort as their bits do.
    """
    cz, cy, cx = block[0], block[1], block[2]
    hz, hy, hx = block[3], block[4], block[5]
    hh = hz * hz + hy * hy + hx * hx
    h = np.sqrt(hh)
    eights = (k + 7) // 8 * 8
    if squared:
        for j in range(eights):
            dz = cz - near[source, 0, j]
            dy = cy - near[source, 1, j]
            dx = cx - near[source, 2, j]
            value[j] = dz * dz + dy * dy + dx * dx
            rank[j] = value[j]
    else:
        for j in range(eights):
            dz = cz - near[source, 0, j]
            dy = cy - near[source, 1, j]
            dx = cx - near[source, 2, j]
            r = np.sqrt(dz * dz + dy * dy + dx * dx)
            value[j] = r + near[source, 3, j]
            rank[j] = value[j] + ahead
            radius[j] = np.float32(1.0) / (r + np.float32(1e-20))
    # The low bits make room for the number of the candidate, so that one minimum finds both.
    low = 255
    while low < k:
        low = 2 * low + 1
    number = np.int32(low)
    bits = rank.view(np.int32)
    least = np.int32(2147483647)
    for j in range(k):
        key = np.int32((bits[j] & ~number) | np.int32(j))
        least = min(least, key)
    i = int(least & number)
    flag[0] = least & ~number
    best = value[i]
    if squared:
        reach = np.sqrt(end) + h
        reach = reach * reach + slack
        if flag.view(np.float32)[0] > reach:
            return 0
        z, y, x = near[source, 0, i], near[source, 1, i], near[source, 2, i]
        limit = min(best + slack, reach)
        hz, hy, hx = hz + hz, hy + hy, hx + hx
        for j in range(eights):
            gain = (
                abs(near[source, 0, j] - z) * hz
                + abs(near[source, 1, j] - y) * hy
                + abs(near[source, 2, j] - x) * hx
            )
            flag[j] = np.int32(value[j] - gain <= limit)
    else:
        if flag.view(np.float32)[0] - ahead > end + h + slack:
            return 0
        r = radius[i]
        z = (cz - near[source, 0, i]) * r
        y = (cy - near[source, 1, i]) * r
        x = (cx - near[source, 2, i]) * r
        bend = min(np.float32(0.5) * hh * r, np.float32(1e30))
        limit = best + slack
        for j in range(eights):
            r = radius[j]
            uz = (cz - near[source, 0, j]) * r
            uy = (cy - near[source, 1, j]) * r
            ux = (cx - near[source, 2, j]) * r
            gain = abs(z - uz) * hz + abs(y - uy) * hy + abs(x - ux) * hx + bend
            other = abs(uz) * hz + abs(uy) * hy + abs(ux) * hx + h
            gain = min(other, gain)
            flag[j] = np.int32(value[j] - gain <= limit)
    n = 0
    for j in range(k):
        pick[n] = j
        n += flag[j]
    target = source + 1
    for m in range(n):
        j = pick[m]
        near[target, 0, m] = near[source, 0, j]
        near[target, 1, m] = near[source, 1, j]
        near[target, 2, m] = near[source, 2, j]
        near[target, 3, m] = near[source, 3, j]
        index[target, m] = index[source, j]
    return n


@kernel(inline=True)
def _rank(
    value: Real,
    label: int,
    best: Real,
    second: Real,
    owner: int,
) -> tuple[Real, Real, int]:
    """Let one more value in among the best and the second best."""
    loser = max(best, value)
    second = min(second, loser)
    owner = label if value < best else owner
    best = min(best, value)
    return best, second, owner


@kernel()
def _leaf(
    near: F4,
    level: int,
    label: I4,
    k: int,
    z0: Real,
    y0: Real,
    x0: Real,
    pz: F4,
    py: F4,
    px: F4,
    pp: F4,
    squared: bool,
    end: Real,
    best: F4,
    second: F4,
    owner: I4,
) -> None:
    """Find, for the pixels of a leaf, the smallest and second smallest value and the owner.

    Squared values lack the squared distance of the pixel from the corner, which all share.
    Candidates go four or two at a time through the pixels, so that these stay in registers.
    """
    n = best.size
    for p in range(n):
        second[p] = np.float32(3e30)
        owner[p] = 0
    j = 0
    if squared:
        two = np.float32(-2.0)
        for p in range(n):
            best[p] = end - pp[p]
        while j < k - 2:
            az = near[level, 0, j] - z0
            ay = near[level, 1, j] - y0
            ax = near[level, 2, j] - x0
            at = az * az + ay * ay + ax * ax + near[level, 3, j]
            az, ay, ax = two * az, two * ay, two * ax
            bz = near[level, 0, j + 1] - z0
            by = near[level, 1, j + 1] - y0
            bx = near[level, 2, j + 1] - x0
            bt = bz * bz + by * by + bx * bx + near[level, 3, j + 1]
            bz, by, bx = two * bz, two * by, two * bx
            cz = near[level, 0, j + 2] - z0
            cy = near[level, 1, j + 2] - y0
            cx = near[level, 2, j + 2] - x0
            ct = cz * cz + cy * cy + cx * cx + near[level, 3, j + 2]
            cz, cy, cx = two * cz, two * cy, two * cx
            dz = near[level, 0, j + 3] - z0
            dy = near[level, 1, j + 3] - y0
            dx = near[level, 2, j + 3] - x0
            dt = dz * dz + dy * dy + dx * dx + near[level, 3, j + 3]
            dz, dy, dx = two * dz, two * dy, two * dx
            la, lb, lc, ld = label[j], label[j + 1], label[j + 2], label[j + 3]
            for p in range(n):
                o, s, m = best[p], second[p], owner[p]
                v = at + az * pz[p] + ay * py[p] + ax * px[p]
                o, s, m = _rank(v, la, o, s, m)
                v = bt + bz * pz[p] + by * py[p] + bx * px[p]
                o, s, m = _rank(v, lb, o, s, m)
                v = ct + cz * pz[p] + cy * py[p] + cx * px[p]
                o, s, m = _rank(v, lc, o, s, m)
                v = dt + dz * pz[p] + dy * py[p] + dx * px[p]
                o, s, m = _rank(v, ld, o, s, m)
                best[p], second[p], owner[p] = o, s, m
            j += 4
        if j < k:
            az = near[level, 0, j] - z0
            ay = near[level, 1, j] - y0
            ax = near[level, 2, j] - x0
            at = az * az + ay * ay + ax * ax + near[level, 3, j]
            az, ay, ax = two * az, two * ay, two * ax
            bz = near[level, 0, j + 1] - z0
            by = near[level, 1, j + 1] - y0
            bx = near[level, 2, j + 1] - x0
            bt = bz * bz + by * by + bx * bx + near[level, 3, j + 1]
            bz, by, bx = two * bz, two * by, two * bx
            la, lb = label[j], label[j + 1]
            for p in range(n):
                o, s, m = best[p], second[p], owner[p]
                v = at + az * pz[p] + ay * py[p] + ax * px[p]
                o, s, m = _rank(v, la, o, s, m)
                v = bt + bz * pz[p] + by * py[p] + bx * px[p]
                o, s, m = _rank(v, lb, o, s, m)
                best[p], second[p], owner[p] = o, s, m
    else:
        for p in range(n):
            best[p] = end
        while j < k - 2:
            az = near[level, 0, j] - z0
            ay = near[level, 1, j] - y0
            ax = near[level, 2, j] - x0
            at = near[level, 3, j]
            bz = near[level, 0, j + 1] - z0
            by = near[level, 1, j + 1] - y0
            bx = near[level, 2, j + 1] - x0
            bt = near[level, 3, j + 1]
            cz = near[level, 0, j + 2] - z0
            cy = near[level, 1, j + 2] - y0
            cx = near[level, 2, j + 2] - x0
            ct = near[level, 3, j + 2]
            dz = near[level, 0, j + 3] - z0
            dy = near[level, 1, j + 3] - y0
            dx = near[level, 2, j + 3] - x0
            dt = near[level, 3, j + 3]
            la, lb, lc, ld = label[j], label[j + 1], label[j + 2], label[j + 3]
            for p in range(n):
                o, s, m = best[p], second[p], owner[p]
                ez, ey, ex = pz[p] - az, py[p] - ay, px[p] - ax
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + at
                o, s, m = _rank(v, la, o, s, m)
                ez, ey, ex = pz[p] - bz, py[p] - by, px[p] - bx
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + bt
                o, s, m = _rank(v, lb, o, s, m)
                ez, ey, ex = pz[p] - cz, py[p] - cy, px[p] - cx
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + ct
                o, s, m = _rank(v, lc, o, s, m)
                ez, ey, ex = pz[p] - dz, py[p] - dy, px[p] - dx
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + dt
                o, s, m = _rank(v, ld, o, s, m)
                best[p], second[p], owner[p] = o, s, m
            j += 4
        if j < k:
            az = near[level, 0, j] - z0
            ay = near[level, 1, j] - y0
            ax = near[level, 2, j] - x0
            at = near[level, 3, j]
            bz = near[level, 0, j + 1] - z0
            by = near[level, 1, j + 1] - y0
            bx = near[level, 2, j + 1] - x0
            bt = near[level, 3, j + 1]
            la, lb = label[j], label[j + 1]
            for p in range(n):
                o, s, m = best[p], second[p], owner[p]
                ez, ey, ex = pz[p] - az, py[p] - ay, px[p] - ax
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + at
                o, s, m = _rank(v, la, o, s, m)
                ez, ey, ex = pz[p] - bz, py[p] - by, px[p] - bx
                v = np.sqrt(ez * ez + ey * ey + ex * ex) + bt
                o, s, m = _rank(v, lb, o, s, m)
                best[p], second[p], owner[p] = o, s, m


@kernel()
def _pair(
    near: F4,
    level: int,
    label: I4,
    z0: Real,
    y0: Real,
    x0: Real,
    pz: F4,
    py: F4,
    px: F4,
    squared: bool,
    gap: F4,
    owner: I4,
) -> None:
    """Find, for the pixels of a leaf, the owner of the two there are, and by how much it leads."""
    az, ay, ax = near[level, 0, 0] - z0, near[level, 1, 0] - y0, near[level, 2, 0] - x0
    bz, by, bx = near[level, 0, 1] - z0, near[level, 1, 1] - y0, near[level, 2, 1] - x0
    la, lb = label[0], label[1]
    if squared:
        two = np.float32(2.0)
        t = (az * az + ay * ay + ax * ax) - (bz * bz + by * by + bx * bx)
        gz, gy, gx = two * (bz - az), two * (by - ay), two * (bx - ax)
        for p in range(owner.size):
            lead = t + gz * pz[p] + gy * py[p] + gx * px[p]
            owner[p] = la if lead <= np.float32(0.0) else lb
            gap[p] = abs(lead)
    else:
        t = near[level, 3, 0] - near[level, 3, 1]
        for p in range(owner.size):
            dz, dy, dx = pz[p] - az, py[p] - ay, px[p] - ax
            ez, ey, ex = pz[p] - bz, py[p] - by, px[p] - bx
            lead = t + np.sqrt(dz * dz + dy * dy + dx * dx) - np.sqrt(ez * ez + ey * ey + ex * ex)
            owner[p] = la if lead <= np.float32(0.0) else lb
            gap[p] = abs(lead)


@kernel()
def _covers(
    near: F4,
    level: int,
    block: F4,
    squared: bool,
    limit: Real,
    slack: Real,
) -> bool:
    """Tell whether the first candidate has taken the whole block before the end."""
    reach2 = np.float32(0.0)
    for axis in range(3):
        d = abs(block[axis] - near[level, axis, 0]) + block[axis + 3]
        reach2 += d * d
    if squared:
        return bool(reach2 + slack < limit)
    return bool(np.sqrt(reach2) + near[level, 3, 0] + slack < limit)


@kernel()
def _winner(
    z: float,
    y: float,
    x: float,
    centre: F8,
    near: F4,
    index: I4,
    level: int,
    k: int,
    squared: bool,
    bound: Real,
    population: F8,
    row: I4,
    period: F8,
) -> tuple[float, int]:
    """Find the owner of one pixel in float64: smallest value, then lowest row.

    Only candidates whose value in float32 is below `bound` are looked at.
    """
    best = np.inf
    label = 0
    pz = np.float32(z - centre[0])
    py = np.float32(y - centre[1])
    px = np.float32(x - centre[2])
    for j in range(k):
        ez = pz - near[level, 0, j]
        ey = py - near[level, 1, j]
        ex = px - near[level, 2, j]
        rough = ez * ez + ey * ey + ex * ex
        if not squared:
            rough = np.sqrt(rough) + near[level, 3, j]
        if rough > bound:
            continue
        i = index[level, j]
        dz = abs(z - population[0, i])
        dy = abs(y - population[1, i])
        dx = abs(x - population[2, i])
        if period[0] > 0.0:
            dz = min(dz, period[0] - dz)
        if period[1] > 0.0:
            dy = min(dy, period[1] - dy)
        if period[2] > 0.0:
            dx = min(dx, period[2] - dx)
        value = population[3, i] + math.sqrt(dz * dz + dy * dy + dx * dx)
        if value < best or (value == best and row[i] + 1 < label):
            best = value
            label = row[i] + 1
    return best, label


@kernel()
def _by_label(
    near: F4,
    level: int,
    label: I4,
    k: int,
) -> None:
    """Sort the few candidates of a leaf by label, so that the first of equal ones wins."""
    for m in range(1, k):
        z, y, x, last = near[level, 0, m], near[level, 1, m], near[level, 2, m], label[m]
        j = m - 1
        while j >= 0 and label[j] > last:
            for axis in range(3):
                near[level, axis, j + 1] = near[level, axis, j]
            label[j + 1] = label[j]
            j -= 1
        near[level, 0, j + 1] = z
        near[level, 1, j + 1] = y
        near[level, 2, j + 1] = x
        label[j + 1] = last


def _stream(tile: Any, take: int, out: Any, put: int, count: int, skip: int) -> None:  # noqa: ARG001 (matters to the compiled twin)
    """Copy a row, past the cache where this is compiled: nobody reads it soon.

    Such a store does not fetch what it overwrites, so that scattered rows come at the speed of a
    fill. The locks by which threads hand over their work order these stores before it.
    """
    out[put : put + count] = tile[take : take + count]


@overload(_stream)
def _stream_compiled(tile: Any, take: Any, out: Any, put: Any, count: Any, skip: Any) -> Any:  # noqa: ARG001 (numba's way)
    def body(tile: Any, take: Any, out: Any, put: Any, count: Any, skip: Any) -> None:
        stop = put + count
        whole = min(put + (skip - put) % 16, stop)
        last = whole + (stop - whole) // 16 * 16
        take -= put
        for at in range(put, whole):
            _store_one(tile, take + at, out, at)
        for at in range(whole, last, 8):
            _store_eight(tile, take + at, out, at)
        for at in range(last, stop):
            _store_one(tile, take + at, out, at)

    return body


def _streaming_store(count: int) -> Any:
    """Write code that moves some values of 4 bytes, to a multiple of their common size."""

    def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
        kind = ir.IntType(32) if count == 1 else ir.VectorType(ir.IntType(32), count)
        source, target = (
            builder.bitcast(
                builder.gep(
                    context.make_array(signature.args[k])(context, builder, values[k]).data,
                    [values[k + 1]],
                ),
                kind.as_pointer(),
            )
            for k in (0, 2)
        )
        store = builder.store(builder.load(source, align=4), target, align=4 * count)
        hint = builder.module.add_metadata([ir.Constant(ir.IntType(32), 1)])
        store.set_metadata("nontemporal", hint)
        return context.get_dummy_value()

    return generate


def _one(_context: Any, tile: Any, take: Any, out: Any, put: Any) -> Any:
    return types.void(tile, take, out, put), _streaming_store(1)


def _eight(_context: Any, tile: Any, take: Any, out: Any, put: Any) -> Any:
    return types.void(tile, take, out, put), _streaming_store(8)


_store_one: Any = intrinsic(_one)
_store_eight: Any = intrinsic(_eight)


@kernel()
def tessellate_kernel(
    begin: int,
    stop: int,
    population: F8,
    row: I4,
    start: I8,
    low: F8,
    cell: F8,
    dims: I8,
    period: F8,
    floor: float,
    shape: I8,
    corner: I8,
    window: I8,
    blocks: I8,
    squared: bool,
    halves: bool,
    end: float,
    pixel: float,
    with_arrival: bool,
    skip: int,
    labels_out: U4,
    arrival_skip: int,
    arrival_out: F4,
) -> None:
    """Give each pixel to the birth whose front arrives first; ties go to the lowest row.

    Parameters
    ----------
    begin, stop : int
        Range of the tiles that the window touches, counted z, y, x.
    population, row, start, low, cell, dims
        Sorted births as `cells_kernel` leaves them.
    period : ndarray of float64, shape (3,)
        Periods in pixels, 0 where an axis is not periodic; places lie within 0 and the period.
    floor : float
        Smallest birth length in pixels.
    shape : ndarray of int64, shape (3,)
        Numbers of pixels of the whole grid. Tiles count from its corner, so that a window has
        the same bytes as the same part of the whole.
    corner, window : ndarray of int64, shape (3,)
        First pixel of the window and its numbers of pixels nz, ny, nx.
    blocks : ndarray of int64, shape (levels, 3)
        Edges in pixels of the tiles, which are put together in the cache and written out as a
        whole, of the blocks that candidates are gathered for, and so on to the leaves; each is a
        multiple of the next.
    squared : bool
        Whether squared distances do: all birth lengths are equal, and no arrival is wanted.
    halves : bool
        Whether, moreover, places and periods are whole multiples of half a pixel and there is no
        end: squared distances are exact then, and equal where they seem so.
    end : float
        Grown length in pixels after which no pixel is taken; inf for none.
    pixel : float
        Pixel edge [m].
    with_arrival : bool
        Whether `arrival_out` is filled.
    skip, arrival_skip : int
        Values of `labels_out` and `arrival_out` before the first cache line that is all theirs.
    labels_out : ndarray of uint32, shape (nz * ny * nx,) of the window
        Row + 1 of the owner; 0 where nothing arrives by `end`.
    arrival_out : ndarray of float32, the same shape
        Grown length at arrival [m]; inf where the label is 0.
    """
    levels = blocks.shape[0]
    tz, ty, tx = blocks[0, 0], blocks[0, 1], blocks[0, 2]
    high = corner + window
    fz, fy, fx = corner[0] // tz, corner[1] // ty, corner[2] // tx
    by, bx = (high[1] - 1) // ty + 1 - fy, (high[2] - 1) // tx + 1 - fx
    lz, ly, lx = blocks[levels - 1, 0], blocks[levels - 1, 1], blocks[levels - 1, 2]
    n = lz * ly * lx
    pz = np.empty(n, np.float32)
    py = np.empty(n, np.float32)
    px = np.empty(n, np.float32)
    pp = np.empty(n, np.float32)
    for p in range(n):
        pz[p] = p // (ly * lx)
        py[p] = p // lx % ly
        px[p] = p % lx
        pp[p] = pz[p] * pz[p] + py[p] * py[p] + px[p] * px[p]
    best = np.empty(n, np.float32)
    gap = np.empty(n, np.float32)
    owner = np.empty(n, np.int32)
    tile = np.zeros(tz * ty * tx, np.uint32)
    tile_times = np.zeros(tz * ty * tx if with_arrival else 1, np.float32)
    room = 256
    near = np.zeros((levels + 1, 4, room + 8), np.float32)
    index = np.zeros((levels + 1, room + 8), np.int32)
    value = np.zeros(room + 8, np.float32)
    radius = np.zeros(room + 8, np.float32)
    rank = np.zeros(room + 8, np.float32)
    flag = np.zeros(room + 8, np.int32)
    pick = np.zeros(room + 8, np.int32)
    label = np.zeros(room + 8, np.int32)
    counts = np.zeros(levels + 1, np.int64)
    depth = 1
    for level in range(2, levels):
        depth += (
            (blocks[level - 1, 0] // blocks[level, 0])
            * (blocks[level - 1, 1] // blocks[level, 1])
            * (blocks[level - 1, 2] // blocks[level, 2])
        )
    stack = np.empty((depth, 4), np.int64)
    centre = np.empty(3)
    half = np.empty(3)
    nothing = np.zeros(3)
    span = np.empty((3, 2), np.int64)
    block = np.empty(6, np.float32)
    size = np.empty(3, np.int64)
    inner = np.empty(3, np.int64)
    for axis in range(3):
        inner[axis] = blocks[0, axis] // blocks[1, axis]
    for top in range(begin, stop):
        oz = (fz + top // (by * bx)) * tz
        oy = (fy + top // bx % by) * ty
        ox = (fx + top % bx) * tx
        # What the window shows of the tile.
        za, zb = max(oz, corner[0]), min(oz + tz, high[0])
        ya, yb = max(oy, corner[1]), min(oy + ty, high[1])
        xa, xb = max(ox, corner[2]), min(ox + tx, high[2])
        for part in range(inner[0] * inner[1] * inner[2]):
            stack[0, 0] = 1
            stack[0, 1] = oz + part // (inner[1] * inner[2]) * blocks[1, 0]
            stack[0, 2] = oy + part // inner[2] % inner[1] * blocks[1, 1]
            stack[0, 3] = ox + part % inner[2] * blocks[1, 2]
            if (
                stack[0, 1] >= zb or stack[0, 1] + blocks[1, 0] <= za
                or stack[0, 2] >= yb or stack[0, 2] + blocks[1, 1] <= ya
                or stack[0, 3] >= xb or stack[0, 3] + blocks[1, 2] <= xa
            ):  # fmt: skip
                continue
            for axis in range(3):
                extent = min(blocks[1, axis], shape[axis] - stack[0, axis + 1])
                centre[axis] = stack[0, axis + 1] + 0.5 * extent
                half[axis] = 0.5 * (extent - 1)
            # When will the births about the centre have taken the block? Others come before or
            # never.
            reach = 0.6 * max(cell[0], cell[1], cell[2])
            bound = 1e150
            base = floor
            everything = False
            while bound == 1e150 and not everything:
                everything = _reach(centre, nothing, low, cell, dims, period, reach, span)
                bound, base = _bound(centre, half, population, start, dims, period, span)
                reach *= 2.0
            reach = max(min(bound, end) - floor, 0.0)
            _reach(centre, half, low, cell, dims, period, reach, span)
            k = _collect(
                centre, half, population, start, low, cell, dims, period, span, reach,
                base, near, index,
            )  # fmt: skip
            if k > room:
                room = 2 * k
                near = np.zeros((levels + 1, 4, room + 8), np.float32)
                index = np.zeros((levels + 1, room + 8), np.int32)
                value = np.zeros(room + 8, np.float32)
                radius = np.zeros(room + 8, np.float32)
                rank = np.zeros(room + 8, np.float32)
                flag = np.zeros(room + 8, np.int32)
                pick = np.zeros(room + 8, np.int32)
                label = np.zeros(room + 8, np.int32)
                k = _collect(
                    centre, half, population, start, low, cell, dims, period, span, reach,
                    base, near, index,
                )  # fmt: skip
            scale = np.float32(0.0)
            for j in range(k):
                far = (
                    abs(near[0, 0, j]) + abs(near[0, 1, j])
                    + abs(near[0, 2, j]) + abs(near[0, 3, j])
                )  # fmt: skip
                scale = max(scale, far)
            scale = np.float32(scale + half[0] + half[1] + half[2] + 1.0)
            counts[0] = k
            exact = halves and scale < np.float32(1000.0)
            slack = np.float32(4e-6 * (scale * scale if squared else scale))
            close = np.float32(2e-6 * (scale * scale if squared else scale))
            ahead = np.float32((base - floor) * (1.0 + 1e-6) + 1e-5 * scale)
            if exact:
                close = np.float32(-1.0)
            limit = np.float32(min(end - base, 1e15))
            if squared:
                limit = limit * limit
            held = 1
            while held > 0:
                held -= 1
                level, z0, y0, x0 = stack[held, 0], stack[held, 1], stack[held, 2], stack[held, 3]
                size[0] = min(blocks[level, 0], shape[0] - z0)
                size[1] = min(blocks[level, 1], shape[1] - y0)
                size[2] = min(blocks[level, 2], shape[2] - x0)
                if size[0] <= 0 or size[1] <= 0 or size[2] <= 0:
                    continue
                for axis in range(3):
                    block[axis] = stack[held, axis + 1] + 0.5 * size[axis] - centre[axis]
                    block[axis + 3] = 0.5 * (size[axis] - 1)
                k = _prune(
                    near, index, level - 1, counts[level - 1], block, squared, limit, slack, ahead,
                    value, radius, rank, flag, pick,
                )  # fmt: skip
                counts[level] = k
                put0 = ((z0 - oz) * ty + y0 - oy) * tx + x0 - ox
                # One owner for the whole block, or none.
                if k <= 1 and not with_arrival:
                    only = np.uint32(0)
                    if k == 1:
                        only = np.uint32(row[index[level, 0]] + 1)
                    if k == 0 or _covers(near, level, block, squared, limit, slack):
                        for z in range(size[0]):
                            for y in range(size[1]):
                                put = np.uint64(put0 + (z * ty + y) * tx)
                                for x in range(np.uint64(blocks[level, 2])):
                                    tile[put + x] = only
                        continue
                if level + 1 < levels:
                    for z in range(blocks[level, 0] // blocks[level + 1, 0] - 1, -1, -1):
                        for y in range(blocks[level, 1] // blocks[level + 1, 1] - 1, -1, -1):
                            for x in range(blocks[level, 2] // blocks[level + 1, 2] - 1, -1, -1):
                                stack[held, 0] = level + 1
                                stack[held, 1] = z0 + z * blocks[level + 1, 0]
                                stack[held, 2] = y0 + y * blocks[level + 1, 1]
                                stack[held, 3] = x0 + x * blocks[level + 1, 2]
                                held += 1
                    continue
                for j in range(k):
                    label[j] = row[index[level, j]] + 1
                if exact:
                    _by_label(near, level, label, k)
                pair = (
                    k == 2
                    and not with_arrival
                    and _covers(near, level, block, squared, limit, slack)
                )
                if pair:
                    _pair(
                        near, level, label,
                        np.float32(z0 + 0.5 - centre[0]),
                        np.float32(y0 + 0.5 - centre[1]),
                        np.float32(x0 + 0.5 - centre[2]),
                        pz, py, px, squared, gap, owner,
                    )  # fmt: skip
                else:
                    # What lacks to two or four candidates is made up by some that never arrive.
                    for j in range(k, k + 3):
                        for axis in range(3):
                            near[level, axis, j] = 0.0
                        near[level, 3, j] = 2e30
                        label[j] = 0
                    _leaf(
                        near, level, label, k,
                        np.float32(z0 + 0.5 - centre[0]),
                        np.float32(y0 + 0.5 - centre[1]),
                        np.float32(x0 + 0.5 - centre[2]),
                        pz, py, px, pp, squared, limit, best, gap, owner,
                    )  # fmt: skip
                    for p in range(n):
                        gap[p] -= best[p]
                doubtful = np.int32(0)
                for p in range(n):
                    doubtful = np.int32(doubtful + np.int32(gap[p] < close))
                width = np.uint64(lx)
                for z in range(lz):
                    for y in range(ly):
                        take = np.uint64((z * ly + y) * lx)
                        put = np.uint64(put0 + (z * ty + y) * tx)
                        for x in range(width):
                            tile[put + x] = owner[take + x]
                if with_arrival:
                    for z in range(size[0]):
                        for y in range(size[1]):
                            for x in range(size[2]):
                                p = (z * ly + y) * lx + x
                                at = put0 + (z * ty + y) * tx + x
                                tile_times[at] = (
                                    (best[p] + base) * pixel if owner[p] > 0 else np.inf
                                )
                if doubtful > 0:
                    for z in range(size[0]):
                        for y in range(size[1]):
                            for x in range(size[2]):
                                p = (z * ly + y) * lx + x
                                if gap[p] < close:
                                    rough = np.float32(3e30)
                                    if not pair:
                                        rough = best[p] + close + close
                                        if squared:
                                            rough += pp[p]
                                    time, winner = _winner(
                                        z0 + z + 0.5, y0 + y + 0.5, x0 + x + 0.5,
                                        centre, near, index, level, k, squared,
                                        rough, population, row, period,
                                    )  # fmt: skip
                                    if time > end:
                                        winner = 0
                                    at = put0 + (z * ty + y) * tx + x
                                    tile[at] = winner
                                    if with_arrival:
                                        tile_times[at] = time * pixel if winner > 0 else np.inf
        for z in range(za, zb):
            for y in range(ya, yb):
                take = ((z - oz) * ty + y - oy) * tx + xa - ox
                put = ((z - corner[0]) * window[1] + y - corner[1]) * window[2] + xa - corner[2]
                _stream(tile, take, labels_out, put, xb - xa, skip)
                if with_arrival:
                    _stream(tile_times, take, arrival_out, put, xb - xa, arrival_skip)


@kernel()
def owned_kernel(
    labels: U4,
    owned_out: B1,
) -> None:
    """Mark the labels of a plane that own a pixel; `owned_out` is of shape (labels + 1,)."""
    for y in range(labels.shape[0]):
        last = labels[y, 0]
        owned_out[last] = True
        for x in range(labels.shape[1]):
            if labels[y, x] != last:
                last = labels[y, x]
                owned_out[last] = True


@kernel()
def relabel_kernel(
    labels: U4,
    number: U4,
) -> None:
    """Replace each label of a plane by ``number[label]`` in place."""
    for y in range(labels.shape[0]):
        for x in range(labels.shape[1]):
            labels[y, x] = number[labels[y, x]]
