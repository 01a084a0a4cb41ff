"""The part of the sample in which nuclei are drawn.

A box and what happens at its edges; no pixels, no nuclei.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["Region"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Region:
    """A box in the axis order z, y, x (or y, x).

    An axis is periodic (what leaves at one side comes in at the other), closed (it ends at real
    walls of the sample) or, being neither, cut out of something larger.

    Attributes
    ----------
    low, high : tuple of float
        Corners [m], ``low < high``.
    periodic, closed : tuple of bool
        Per axis; one value is taken for all.
    thickness : float or None
        Thickness of a layer [m] that is so thin that its crystals grow in two directions only;
        densities per volume then count over it. Only for two axes.

    Raises
    ------
    ValidityError
        If the corners, the edges or the thickness make no sense.

    Examples
    --------
    A layer of 2 mm by 3 mm, 5 um thick: 2e-3 * 3e-3 * 5e-6 = 3e-11 m3; its edges across y are
    3e-3 * 5e-6 = 1.5e-8 m2.

    >>> layer = Region(low=(0, 0), high=(2e-3, 3e-3), periodic=True, thickness=5e-6)
    >>> f"{layer.measure:.4g} {layer.face_area(0):.4g}"
    '3e-11 1.5e-08'
    """

    low: tuple[float, ...]
    high: tuple[float, ...]
    periodic: tuple[bool, ...] = (False,)
    closed: tuple[bool, ...] = (False,)
    thickness: float | None = None

    def __post_init__(self) -> None:
        for name, kind in (("low", float), ("high", float), ("periodic", bool), ("closed", bool)):
            object.__setattr__(self, name, self._per_axis(name, kind))
        if self.dimension not in (2, 3) or len(self.high) != self.dimension:
            raise ValidityError(
                f"region: expected corners of 2 or 3 axes, got {len(self.low)} and {len(self.high)}"
            )
        finite = all(map(math.isfinite, (*self.low, *self.high)))
        if not finite or min(self.extent) <= 0:
            raise ValidityError(
                f"region: expected finite corners [m] with low < high, got {self.low}, {self.high}"
            )
        if any(p and c for p, c in zip(self.periodic, self.closed, strict=True)):
            raise ValidityError("region: an axis cannot be both periodic and closed")
        if self.thickness is not None and (self.dimension != 2 or not self.thickness > 0):
            raise ValidityError(
                "region: expected a thickness above 0 m, and only for two axes, got "
                f"{self.thickness} for {self.dimension}"
            )

    def _per_axis(self, name: str, kind: type) -> tuple[Any, ...]:
        given = getattr(self, name)
        values = (given,) if np.ndim(given) == 0 else tuple(given)
        if kind is bool and len(values) == 1:
            values *= self.dimension
        if kind is bool and len(values) != self.dimension:
            raise ValidityError(
                f"region: expected 1 or {self.dimension} values of {name}, got {len(values)}"
            )
        return tuple(kind(v) for v in values)

    @property
    def dimension(self) -> int:
        """Number of axes, 2 or 3."""
        return len(self.low)

    @property
    def extent(self) -> tuple[float, ...]:
        """Edges [m] in the axis order."""
        return tuple(h - lo for lo, h in zip(self.low, self.high, strict=True))

    @property
    def measure(self) -> float:
        """Volume [m3]; of two axes without a thickness the area [m2]."""
        return math.prod(self.extent) * (1.0 if self.thickness is None else self.thickness)

    def face_area(self, axis: int) -> float:
        """Return the area of one face across an axis.

        Parameters
        ----------
        axis : int
            Index into the axes.

        Returns
        -------
        area : float
            Area [m2]; of two axes without a thickness the length of the edge [m].
        """
        return self.measure / self.extent[axis]

    def padded(self, margin: float) -> Region:
        """Return the region with a margin around it where it is cut.

        Parameters
        ----------
        margin : float
            Width of the margin [m], >= 0; periodic and closed axes get none.

        Returns
        -------
        region : Region
            The larger region.

        Examples
        --------
        >>> window = Region(low=(0, 0), high=(1, 1), periodic=(True, False))
        >>> window.padded(0.5).low, window.padded(0.5).high
        ((0.0, -0.5), (1.0, 1.5))
        """
        cut = [not (p or c) for p, c in zip(self.periodic, self.closed, strict=True)]
        return replace(
            self,
            low=tuple(x - margin * c for x, c in zip(self.low, cut, strict=True)),
            high=tuple(x + margin * c for x, c in zip(self.high, cut, strict=True)),
        )

    def holds(self, position: NDArray[np.float64]) -> NDArray[np.bool_]:
        """Tell which points lie in the region, its lower and upper edges included.

        Parameters
        ----------
        position : ndarray of float64, shape (n, D)
            Points [m].

        Returns
        -------
        inside : ndarray of bool, shape (n,)
            Whether they do.
        """
        inside = (position >= np.asarray(self.low)) & (position <= np.asarray(self.high))
        return np.asarray(inside.all(axis=1), dtype=np.bool_)
