"""Take out the nuclei that were overgrown before they could start.

A nucleus that would be born inside a grown crystal never lives. Which ones these are does not
depend on the order in which they are looked at; the loops stand in `spheru.nuclei.kernels`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import ValidityError
from spheru.jit import threads as use_threads
from spheru.nuclei.kernels import cell_sort_kernel, thinning_kernel

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.nuclei.region import Region

__all__ = ["survivors"]

_PER_CELL: Final = 12.0  # births per cell of the grid: the fastest of 1 to 24
_RINGS: Final = 2  # rings of cells that are tried before the pyramid


def survivors(births: Births, region: Region, *, threads: int | None = None) -> NDArray[np.bool_]:
    r"""Tell which births are not inside a crystal that has grown over their place before.

    With grown lengths :math:`\tau` at birth, nucleus i is swallowed if there is any j, itself
    possibly swallowed, with

    .. math:: \tau_j + |x_i - x_j| < \tau_i .

    That j may be swallowed itself changes nothing: whatever has swallowed j had come to the place
    of j before, and by the triangle inequality comes to the place of i no later than j would.

    Parameters
    ----------
    births : Births
        Where and when nuclei start if nothing had grown yet, n rows.
    region : Region
        Says which axes are periodic; there the nearest image counts, and places are wrapped.
    threads : int, optional
        Number of threads; all where it is None. The result does not depend on it.

    Returns
    -------
    alive : ndarray of bool, shape (n,)
        Whether each birth survives. At equality it does.

    Raises
    ------
    ValidityError
        If births and region have different numbers of axes.

    Examples
    --------
    Born 3 um away from the first when that has grown 2 um, the second lives; born 1 um away, the
    third does not. Across the periodic edge the fourth is 10 - 9.5 = 0.5 um away, and dies too.

    >>> from spheru.births import Births
    >>> from spheru.nuclei.region import Region
    >>> births = Births(
    ...     position=[[0, 0], [0, 3e-6], [0, 1e-6], [0, 9.5e-6]], grown_length=[0, 2e-6, 2e-6, 2e-6]
    ... )
    >>> region = Region(low=(0, 0), high=(1e-5, 1e-5), periodic=True)
    >>> survivors(births, region).tolist()
    [True, True, False, False]
    """
    if births.dimension != region.dimension:
        raise ValidityError(
            f"thinning: the births have {births.dimension} axes, the region {region.dimension}"
        )
    alive = np.ones(len(births), dtype=np.bool_)
    if len(births) < 2:
        return alive
    low, extent, period = _box(births, region)
    position = births.position
    skip = 3 - births.dimension
    for axis in np.flatnonzero(np.isfinite(period)):
        place = position[:, axis - skip]
        if place.min() < low[axis] or place.max() > low[axis] + period[axis]:
            position = position.copy()
            position[:, axis - skip] = low[axis] + np.mod(place - low[axis], period[axis])
    shape = _cells(extent, len(births))
    edge = np.where(extent > 0, extent / shape, 1.0)  # births may lie in a plane or on a line
    start = np.zeros(int(shape.prod()) + 1, dtype=np.int64)
    point = np.empty((len(births), 4))
    row = np.empty(len(births), dtype=np.int64)
    rising = np.argsort(births.grown_length, kind="stable")
    cell_sort_kernel(position, births.grown_length, rising, low, edge, shape, start, point, row)
    earliest, level_start, level_shape = _pyramid(point[:, 3], start, shape)
    with use_threads(threads):
        thinning_kernel(
            point,
            row,
            start,
            low,
            edge,
            period,
            earliest,
            level_start,
            level_shape,
            _RINGS,
            alive,
        )
    return alive


def _box(births: Births, region: Region) -> tuple[NDArray[np.float64], ...]:
    """Return corner, extent and period (inf: none) of the grid on three axes."""
    low, extent, period = np.zeros(3), np.zeros(3), np.full(3, np.inf)
    skip = 3 - region.dimension
    for axis in range(region.dimension):
        if region.periodic[axis]:
            low[skip + axis] = region.low[axis]
            extent[skip + axis] = period[skip + axis] = region.extent[axis]
        else:
            low[skip + axis] = births.position[:, axis].min()
            extent[skip + axis] = np.ptp(births.position[:, axis])
    return low, extent, period


def _cells(extent: NDArray[np.float64], births: int) -> NDArray[np.int64]:
    """Return numbers of cells per axis: nearly cubes, one where an axis is thinner than that."""
    shape = np.ones(3, dtype=np.int64)
    wanted = max(births / _PER_CELL, 1.0)
    wide = [axis for axis in np.argsort(extent) if extent[axis] > 0]
    while wide:
        edge = np.exp((np.log(extent[wide]).sum() - np.log(wanted)) / len(wide))
        if extent[wide[0]] >= edge:
            shape[wide] = np.maximum(extent[wide] / edge, 1).astype(np.int64)
            break
        wide.pop(0)
    return shape


def _pyramid(
    length: NDArray[np.float64], start: NDArray[np.int64], shape: NDArray[np.int64]
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.int64]]:
    """Return the smallest length in each cell and in ever larger blocks of cells, level by level.

    A block is twice as wide as those of the level below, along each axis.
    """
    filled = np.append(length, np.inf)
    least = np.where(start[1:] > start[:-1], filled[start[:-1]], np.inf).reshape(shape)
    levels = [least]
    while levels[-1].size > 1:
        above = levels[-1]
        for axis in range(3):
            above = np.minimum.reduceat(above, np.arange(0, above.shape[axis], 2), axis=axis)
        levels.append(above)
    sizes = [level.size for level in levels]
    level_start = np.concatenate([[0], np.cumsum(sizes)[:-1]]).astype(np.int64)
    level_shape = np.array([level.shape for level in levels], dtype=np.int64)
    return np.concatenate([level.ravel() for level in levels]), level_start, level_shape
