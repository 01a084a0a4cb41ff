"""The grid on which a label image stands.

Shape, pixel size and what happens at the edges; no physics, no pixel values.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

__all__ = ["Frame"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Frame:
    """A grid of square pixels or cubic voxels.

    The centre of pixel i along an axis stands at ``origin + (i + 0.5) * pixel``.

    Attributes
    ----------
    shape : tuple of int
        Number of pixels in the axis order z, y, x (or y, x); each >= 1.
    pixel : float
        Edge of a pixel [m], > 0; the same for all axes.
    origin : tuple of float
        Corner of the grid [m]; one number is taken for all axes.
    periodic : tuple of bool
        Whether the grid goes on at its other side, per axis; one value is taken for all.
    closed : tuple of bool
        Whether the axis ends at real walls of the sample (a film's faces), so that a spherulite
        that touches them is whole; one value is taken for all. An axis that is neither periodic
        nor closed is cut out of something larger.
    plane_z : float or None
        Height of a plane section through a three-dimensional sample [m]; None where the grid is
        the sample itself.

    Raises
    ------
    ValidityError
        If a shape, a pixel or an edge makes no sense.

    Examples
    --------
    >>> frame = Frame(shape=(2, 4), pixel=1e-6, periodic=True)
    >>> frame.dimension, frame.periodic
    (2, (True, True))
    >>> frame.extent
    (2e-06, 4e-06)
    """

    shape: tuple[int, ...]
    pixel: float
    origin: tuple[float, ...] = (0.0,)
    periodic: tuple[bool, ...] = (False,)
    closed: tuple[bool, ...] = (False,)
    plane_z: float | None = None

    def __post_init__(self) -> None:
        shape = tuple(int(n) for n in self.shape)
        if len(shape) not in (2, 3) or min(shape) < 1:
            raise ValidityError(
                f"frame: expected 2 or 3 axes of at least 1 pixel, got {self.shape}"
            )
        object.__setattr__(self, "shape", shape)
        if np.ndim(self.pixel) != 0:
            raise ValidityError(
                "frame: pixels must have equal edges along all axes; resample the image to the "
                f"smallest of {tuple(np.atleast_1d(self.pixel).tolist())} m first"
            )
        object.__setattr__(self, "pixel", float(self.pixel))
        if not (math.isfinite(self.pixel) and self.pixel > 0):
            raise ValidityError(f"frame: expected a pixel above 0 m, got {self.pixel}")
        for name, kind in (("origin", float), ("periodic", bool), ("closed", bool)):
            object.__setattr__(self, name, self._per_axis(name, kind))
        if not all(map(math.isfinite, self.origin)):
            raise ValidityError(f"frame: expected a finite origin [m], got {self.origin}")
        if any(p and c for p, c in zip(self.periodic, self.closed, strict=True)):
            raise ValidityError("frame: an axis cannot be both periodic and closed")
        if self.plane_z is not None:
            if len(shape) != 2:
                raise ValidityError("frame: only a grid of two axes can be a plane section")
            object.__setattr__(self, "plane_z", float(self.plane_z))

    def _per_axis(self, name: str, kind: type) -> tuple[Any, ...]:
        given = getattr(self, name)
        values = (given,) if np.ndim(given) == 0 else tuple(given)
        if len(values) == 1:
            values *= len(self.shape)
        if len(values) != len(self.shape):
            raise ValidityError(
                f"frame: expected 1 or {len(self.shape)} values of {name}, got {len(values)}"
            )
        return tuple(kind(v) for v in values)

    @property
    def dimension(self) -> int:
        """Number of axes of the grid, 2 or 3."""
        return len(self.shape)

    @property
    def pixels(self) -> int:
        """Number of pixels."""
        return math.prod(self.shape)

    @property
    def extent(self) -> tuple[float, ...]:
        """Edges of the grid [m] in the axis order of the shape."""
        return tuple(n * self.pixel for n in self.shape)

    @property
    def measure(self) -> float:
        """Area [m2] or volume [m3] of the grid."""
        return math.prod(self.extent)

    @property
    def pixel_measure(self) -> float:
        """Area [m2] or volume [m3] of a pixel."""
        return float(self.pixel**self.dimension)

    def centres(self, axis: int) -> NDArray[np.float64]:
        """Return the places of the pixel centres along an axis.

        Parameters
        ----------
        axis : int
            Index into the shape.

        Returns
        -------
        centres : ndarray of float64, shape (shape[axis],)
            Places [m].

        Examples
        --------
        >>> Frame(shape=(1, 3), pixel=2.0).centres(1).tolist()
        [1.0, 3.0, 5.0]
        """
        steps = np.arange(self.shape[axis], dtype=np.float64) + 0.5
        return np.asarray(self.origin[axis] + steps * self.pixel, dtype=np.float64)

    def holds(self, position: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Tell which points lie within the grid.

        Parameters
        ----------
        position : ndarray of float64, shape (n, D)
            Points [m]; for a section of a sample the first of three axes is left out of account.

        Returns
        -------
        inside : ndarray of bool, shape (n,)
            Lower edges belong to the grid; upper ones do so at closed axes, where they are walls.

        Examples
        --------
        >>> film = Frame(shape=(2, 4), pixel=1.0, closed=(True, False))
        >>> film.holds(np.array([[2.0, 0.0], [0.0, 4.0]])).tolist()
        [True, False]
        """
        points = position[:, -self.dimension :]
        low = np.asarray(self.origin)
        high = low + np.asarray(self.extent)
        below = (points < high) | ((points == high) & np.asarray(self.closed))
        inside: NDArray[np.bool_] = ((points >= low) & below).all(axis=1)
        return inside

    def crop(self, start: Sequence[int], shape: Sequence[int]) -> Frame:
        """Return the frame of a part of the grid, no longer periodic where it was cut.

        Parameters
        ----------
        start : sequence of int
            First pixel along each axis.
        shape : sequence of int
            Number of pixels along each axis.

        Returns
        -------
        frame : Frame
            The part. An axis taken in full keeps its edges.
        """
        whole = tuple(n == m for n, m in zip(shape, self.shape, strict=True))
        return Frame(
            shape=tuple(shape),
            pixel=self.pixel,
            origin=tuple(o + s * self.pixel for o, s in zip(self.origin, start, strict=True)),
            periodic=tuple(p and w for p, w in zip(self.periodic, whole, strict=True)),
            closed=tuple(c and w for c, w in zip(self.closed, whole, strict=True)),
            plane_z=self.plane_z,
        )
