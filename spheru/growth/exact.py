"""The exact engine: births to a label image where the growth rate varies in time only.

Each pixel goes to the birth whose front arrives first, a Johnson-Mehl tessellation (Voronoi where
all are born together); no time steps, no physics. Gradients of the growth rate are not for here.
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final, TypeAlias

import numpy as np

from spheru.errors import ValidityError
from spheru.growth.kernels import (
    cells_kernel,
    owned_kernel,
    relabel_kernel,
    tessellate_kernel,
)
from spheru.image.label_image import LabelImage
from spheru.jit import threads as kernel_threads

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.image.frame import Frame

__all__ = ["Population", "Window", "memory_needed", "tessellate"]

Window: TypeAlias = tuple[slice, ...]

# Parts of the work that the threads take one after the other.
SLABS: Final = 32

# Edges z, y, x of the tiles that are put together in the cache, of the blocks that candidates are
# gathered for, and so on to the leaves, by the least grain size in pixels they are for: the fastest
# of those tried. Longer along x, so that whole cache lines are written.
Edges: TypeAlias = tuple[tuple[int, int, int], ...]
FLAT_BLOCKS: Final[dict[float, Edges]] = {
    60: ((1, 128, 128), (1, 128, 128), (1, 32, 64), (1, 16, 32)),
    16: ((1, 128, 128), (1, 64, 64), (1, 16, 32)),
    0: ((1, 64, 128), (1, 16, 32), (1, 8, 16)),
}
SOLID_BLOCKS: Final[dict[float, Edges]] = {
    16: ((32, 32, 64), (32, 32, 32), (8, 16, 16), (4, 8, 8)),
    8: ((16, 16, 128), (16, 16, 16), (8, 8, 16), (4, 8, 8)),
    0: ((16, 16, 128), (16, 16, 16), (8, 8, 8), (4, 4, 8)),
}


def tessellate(
    births: Births,
    frame: Frame,
    *,
    end: float = math.inf,
    arrival: bool = False,
    threads: int | None = None,
    period_z: float | None = None,
    window: Window | None = None,
    progress: Callable[[float], None] | None = None,
) -> LabelImage:
    r"""Give each pixel to the birth whose front arrives first.

    .. math:: \text{label}(x) = 1 + \arg\min_i (\tau_i + |x - x_i|)

    Ties go to the lowest row.

    Parameters
    ----------
    births : Births
        Nuclei; row i owns label i + 1. They may lie outside the frame on axes that are not
        periodic; on periodic ones they are wrapped.
    frame : Frame
        The grid. With `plane_z` it is a plane section of a sample in three dimensions.
    end : float, optional
        Grown length at the end of the history [m]: a pixel that is reached at exactly `end` has
        crystallised, one that would be reached later keeps label 0.
    arrival : bool, optional
        Whether to return the grown length at arrival as well.
    threads : int, optional
        Number of threads, all where None. The result does not depend on it.
    period_z : float, optional
        For a section: period of the sample across the plane [m]; None where it has none.
    window : tuple of slice, optional
        Part of the frame to grow, a slice of whole pixels per axis; all where it is None. To grow
        many windows of one frame see `Population`.
    progress : callable, optional
        Called with the share of the work done, 0 to 1, some twenty times.

    Returns
    -------
    image : LabelImage
        Labels, births and, if asked for, arrival [m]. Of a whole section only those births are
        kept that own a pixel, and the labels count these. A window has the births, labels and
        arrival of the same part of the whole, byte for byte, and the frame of the part.

    Raises
    ------
    ValidityError
        If births and frame do not go together or `end`, `period_z` or `window` makes no sense.

    Notes
    -----
    The result equals, pixel for pixel, the argmin over all births of the float64 value
    ``tau/h + sqrt(dz*dz + dy*dy + dx*dx)`` with h the pixel edge, coordinates
    ``(x - origin)/h`` (wrapped into the period where there is one), pixel centres at i + 0.5 and
    ``d = min(|d|, period - |d|)`` on periodic axes. A section stands at z = 0.5, births at
    ``(z - plane_z)/h + 0.5``. Blocks of pixels are split while several births may own a part of
    them; the pixels of the smallest ones are compared in float32, and again in float64 where the
    two best are too close to tell.

    Examples
    --------
    By hand: the right nucleus is born 1 um later, so the front stops where x - 0.5 = 1 + (4.5 - x),
    at x = 3 um; the pixel centred at 2.5 um goes to the left, the one at 3.5 um to the right.

    >>> from spheru.births import Births
    >>> from spheru.image.frame import Frame
    >>> births = Births(position=[[0.5e-6, 0.5e-6], [0.5e-6, 4.5e-6]], grown_length=[0.0, 1e-6])
    >>> frame = Frame(shape=(1, 5), pixel=1e-6)
    >>> tessellate(births, frame).labels.tolist()
    [[1, 1, 1, 2, 2]]
    >>> tessellate(births, frame, end=1.5e-6).labels.tolist()
    [[1, 1, 0, 0, 2]]
    """
    population = Population.of(births, frame, period_z=period_z)
    labels = _memory(None, _part(frame, window)[1], np.uint32)
    image = population.tessellate(
        window=window, end=end, arrival=arrival, threads=threads, progress=progress, out=labels
    )
    if frame.plane_z is None or window is not None:
        return image
    with kernel_threads(threads) as count:
        kept = _keep_owners(births, labels, count)
    return replace(image, births=kept)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Population:
    """Births made ready for a frame: sorted once, to grow any number of windows of it.

    Attributes
    ----------
    births : Births
        Nuclei; row i owns label i + 1.
    frame : Frame
        The whole grid.
    period : ndarray of float64, shape (3,)
        Periods along z, y, x in pixels, 0 where there is none.
    low, cell, dims : ndarray, shape (3,)
        Corner of the grid of cells and edges of a cell in pixels; numbers of cells.
    start, place, row : ndarray
        Births sorted into cells, as `spheru.growth.kernels.cells_kernel` leaves them.
    blocks : ndarray of int64, shape (levels, 3)
        Edges of the blocks of pixels, from the top ones to the leaves.
    """

    births: Births
    frame: Frame
    period: NDArray[np.float64]
    low: NDArray[np.float64]
    cell: NDArray[np.float64]
    dims: NDArray[np.int64]
    start: NDArray[np.int64]
    place: NDArray[np.float64]
    row: NDArray[np.int32]
    blocks: NDArray[np.int64]

    @classmethod
    def of(cls, births: Births, frame: Frame, *, period_z: float | None = None) -> Population:
        """Make births ready for a frame.

        Parameters
        ----------
        births, frame, period_z
            As in `tessellate`.

        Returns
        -------
        population : Population
            Births in cells.

        Raises
        ------
        ValidityError
            If births and frame do not go together or `period_z` makes no sense.
        """
        _check(births, frame, period_z)
        place, birth, period = _pixel_units(births, frame, period_z)
        low, cell, dims = _cells(place, period)
        start = np.zeros(int(np.prod(dims)) + 2, np.int64)
        sorted_place = np.empty((4, len(births)))
        row = np.empty(len(births), np.int32)
        cells_kernel(place, birth, low, cell, dims, start, sorted_place, row)
        return cls(
            births=births,
            frame=frame,
            period=period,
            low=low,
            cell=cell,
            dims=dims,
            start=start,
            place=sorted_place,
            row=row,
            blocks=_blocks(_grid(frame), place),
        )

    def tessellate(
        self,
        *,
        window: Window | None = None,
        end: float = math.inf,
        arrival: bool = False,
        threads: int | None = None,
        progress: Callable[[float], None] | None = None,
        out: NDArray[np.uint32] | None = None,
        arrival_out: NDArray[np.float32] | None = None,
    ) -> LabelImage:
        """Give each pixel of a window to the birth whose front arrives first.

        Parameters
        ----------
        window, end, arrival, threads, progress
            As in `tessellate`.
        out : ndarray of uint32, shape of the window, C-contiguous, optional
            Memory for the labels, which spares the price of fresh memory; what is returned looks
            at it.
        arrival_out : ndarray of float32, shape of the window, C-contiguous, optional
            The same for the arrival.

        Returns
        -------
        image : LabelImage
            Labels (row + 1, of sections too), all births and, if asked for, arrival [m].

        Raises
        ------
        ValidityError
            If `end`, `window`, `out` or `arrival_out` makes no sense.
        """
        if math.isnan(end):
            raise ValidityError("tessellate: expected a grown length [m] as end, got nan")
        corner, shape, frame = _part(self.frame, window)
        labels = _memory(out, shape, np.uint32)
        times = _memory(arrival_out, shape, np.float32) if arrival else None
        birth = self.place[3]
        end_pixels = end / frame.pixel
        if len(birth) == 0 or end_pixels < birth.min():
            labels.fill(0)
            if times is not None:
                times.fill(np.inf)
        else:
            with kernel_threads(threads) as count:
                self._grow(corner, end_pixels, labels, times, count, progress)
        return LabelImage(labels=labels, frame=frame, arrival=times, births=self.births)

    def _grow(
        self,
        start: tuple[int, ...],
        end: float,
        labels: NDArray[np.uint32],
        times: NDArray[np.float32] | None,
        threads: int,
        progress: Callable[[float], None] | None,
    ) -> None:
        shape = np.array(_grid(self.frame), np.int64)
        corner = np.array((0, *start)[-3:], np.int64)
        size = np.array((1, *labels.shape)[-3:], np.int64)
        top = self.blocks[0]
        tops = int(np.prod((corner + size - 1) // top + 1 - corner // top))
        floor = float(self.place[3].min())
        squared = times is None and bool(floor == self.place[3].max())
        halves = squared and math.isinf(end) and abs(floor) < 1e6 and self._on_halves()
        flat = labels.reshape(-1)
        arrivals = np.empty(0, np.float32) if times is None else times.reshape(-1)

        def slab(begin: int, stop: int) -> None:
            tessellate_kernel(
                begin, stop, self.place, self.row, self.start, self.low, self.cell, self.dims,
                self.period, floor, shape, corner, size, self.blocks, squared, halves, end,
                self.frame.pixel, times is not None, _skip(flat), flat, _skip(arrivals), arrivals,
            )  # fmt: skip

        marks = np.linspace(0, tops, SLABS + 1).astype(np.int64)
        _on_threads(slab, marks, threads, progress)

    def _on_halves(self) -> bool:
        """Whether places and periods are whole multiples of half a pixel."""
        for values in (self.period, self.place[:3, :1000], self.place[:3]):
            doubled = 2.0 * values
            if not np.array_equal(doubled, np.rint(doubled)):
                return False
        return True


def memory_needed(frame: Frame, *, arrival: bool = False) -> int:
    """Return the memory that `tessellate` takes for its result.

    Parameters
    ----------
    frame : Frame
        The grid.
    arrival : bool, optional
        Whether the grown length at arrival is asked for.

    Returns
    -------
    memory : int
        Bytes: 4 per pixel for the labels and 4 for the arrival. The births take about 80 each on
        top.

    Examples
    --------
    >>> from spheru.image.frame import Frame
    >>> memory_needed(Frame(shape=(10, 20), pixel=1e-6), arrival=True)
    1600
    """
    return frame.pixels * (8 if arrival else 4)


def _check(births: Births, frame: Frame, period_z: float | None) -> None:
    wanted = 3 if frame.plane_z is not None else frame.dimension
    if births.dimension != wanted:
        raise ValidityError(
            f"tessellate: expected births in {wanted} dimensions for this frame, got "
            f"{births.dimension}; a plane section of a sample needs plane_z"
        )
    if len(births) >= 2**31 - 1:
        raise ValidityError(f"tessellate: {len(births)} births are more than labels can count")
    if period_z is not None and frame.plane_z is None:
        raise ValidityError("tessellate: period_z is for a plane section only")
    if period_z is not None and not (math.isfinite(period_z) and period_z > 0):
        raise ValidityError(f"tessellate: expected a period_z above 0 m, got {period_z}")


def _grid(frame: Frame) -> tuple[int, ...]:
    return (1, *frame.shape)[-3:]


def _part(frame: Frame, window: Window | None) -> tuple[tuple[int, ...], tuple[int, ...], Frame]:
    """First pixel, numbers of pixels and frame of a window."""
    if window is None:
        return (0,) * frame.dimension, frame.shape, frame
    if len(window) != frame.dimension:
        raise ValidityError(
            f"tessellate: expected a window of {frame.dimension} slices, got {len(window)}"
        )
    spans = [part.indices(count) for part, count in zip(window, frame.shape, strict=True)]
    if any(step != 1 or stop <= start for start, stop, step in spans):
        raise ValidityError(
            f"tessellate: expected a window of at least one pixel without steps within "
            f"{frame.shape}, got {window}"
        )
    corner = tuple(start for start, _, _ in spans)
    shape = tuple(stop - start for start, stop, _ in spans)
    return corner, shape, frame.crop(corner, shape)


def _memory(
    given: NDArray[Any] | None, shape: tuple[int, ...], dtype: type[np.generic]
) -> NDArray[Any]:
    """Check the given memory, else take fresh one at a cache line, so that rows fill lines."""
    if given is not None:
        if given.shape != shape or given.dtype != dtype or not given.flags.carray:
            raise ValidityError(
                f"tessellate: expected contiguous memory of {np.dtype(dtype)} and shape {shape}, "
                f"got {given.dtype} and {given.shape}"
            )
        return given
    count = math.prod(shape)
    room = np.empty(count + 15, dtype)
    skip = _skip(room)
    return room[skip : skip + count].reshape(shape)


def _skip(array: NDArray[Any]) -> int:
    """Count the values before the first that begins a cache line."""
    return int(-array.ctypes.data % 64 // 4)


def _pixel_units(
    births: Births, frame: Frame, period_z: float | None
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Places (3, n), birth lengths (n,) and periods (3,) in pixels; 0 for no period."""
    place = np.full((3, len(births)), 0.5)
    period = np.zeros(3)
    axes = frame.dimension
    for axis in range(axes):
        at = 3 - axes + axis
        column = births.dimension - axes + axis
        place[at] = (births.position[:, column] - frame.origin[axis]) / frame.pixel
        period[at] = frame.shape[axis] if frame.periodic[axis] else 0.0
    if frame.plane_z is not None:
        place[0] = (births.position[:, 0] - frame.plane_z) / frame.pixel + 0.5
        period[0] = 0.0 if period_z is None else period_z / frame.pixel
    for k in np.flatnonzero(period):
        outside = (place[k] < 0) | (place[k] >= period[k])
        wrapped = np.mod(place[k, outside], period[k])
        place[k, outside] = np.where(wrapped < period[k], wrapped, 0.0)  # -1e-20 gives the period
    return place, births.grown_length / frame.pixel, period


def _cells(
    place: NDArray[np.float64], period: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.int64]]:
    """Corner, edges and numbers of cells with about two births each."""
    if place.shape[1] == 0:
        return np.zeros(3), np.ones(3), np.ones(3, np.int64)
    low = np.where(period > 0, 0.0, place.min(axis=1))
    extent = np.where(period > 0, period, place.max(axis=1) - low)
    dims = np.ones(3, np.int64)
    wanted = place.shape[1] / 2
    axes = [axis for axis in np.argsort(extent) if extent[axis] > 0]
    # Thin axes first: one that is thinner than a cell leaves the cells to the others.
    while axes and wanted > 1:
        edge = float(np.prod(extent[axes]) / wanted) ** (1 / len(axes))
        axis = axes.pop(0)
        dims[axis] = max(1, round(extent[axis] / edge))
        wanted /= dims[axis]
    return low, np.where(extent > 0, extent, 1.0) / dims, dims


def _blocks(grid: tuple[int, ...], place: NDArray[np.float64]) -> NDArray[np.int64]:
    """Edges of the blocks in pixels, from the top ones to the leaves."""
    births = place.shape[1]
    extent = np.ptp(place, axis=1) if births else np.zeros(3)
    axes = extent > 1.0
    size = (float(np.prod(extent[axes])) / max(1, births)) ** (1 / max(1, int(axes.sum())))
    choices = FLAT_BLOCKS if grid[0] == 1 else SOLID_BLOCKS
    edges = next(edges for least, edges in choices.items() if size >= least)
    return np.array(edges, np.int64)


def _on_threads(
    work: Callable[[int, int], None],
    marks: NDArray[np.int64],
    threads: int,
    progress: Callable[[float], None] | None = None,
) -> None:
    """Call ``work(begin, stop)`` between the marks on Python threads; kernels free the GIL."""
    pairs = zip(marks[:-1].tolist(), marks[1:].tolist(), strict=True)
    pool = ThreadPoolExecutor(threads)
    try:
        jobs = [pool.submit(work, begin, stop) for begin, stop in pairs]
        for done, job in enumerate(jobs, start=1):
            job.result()
            if progress is not None:
                progress(done / len(jobs))
    finally:
        pool.shutdown(cancel_futures=True)  # so that an interruption does not wait for the rest


def _keep_owners(births: Births, labels: NDArray[np.uint32], threads: int) -> Births:
    """Keep the births that own a pixel and count the labels anew, in place."""
    owned = np.zeros(len(births) + 1, np.bool_)
    marks = np.linspace(0, len(labels), SLABS + 1).astype(np.int64)
    _on_threads(lambda begin, stop: owned_kernel(labels[begin:stop], owned), marks, threads)
    owned[0] = False
    number = np.cumsum(owned, dtype=np.uint32) * owned
    _on_threads(lambda begin, stop: relabel_kernel(labels[begin:stop], number), marks, threads)
    return births.take(owned[1:])
