"""The record of the births of crystals that passes from nuclei to growth.

Where and when, nothing more: no law, no grid.
"""

from __future__ import annotations

from dataclasses import dataclass, field, fields, replace
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = ["Births"]

_DTYPES = {"origin": np.uint8, "form": np.uint8}


@dataclass(frozen=True, slots=True, kw_only=True)
class Births:
    """Where and when crystals are born; all arrays are read-only.

    Row i owns label i + 1 of a label image.

    Attributes
    ----------
    position : ndarray of float64, shape (n, D)
        Places of the nuclei [m] in the axis order z, y, x (or y, x).
    grown_length : ndarray of float64, shape (n,)
        Length grown, at the moment of birth, by a crystal born at the start [m]: the integral of
        the growth rate over time.
    time : ndarray of float64, shape (n,), or None
        Time of birth [s].
    temperature : ndarray of float64, shape (n,), or None
        Temperature at birth [K].
    origin : ndarray of uint8, shape (n,), or None
        Which source made the nucleus: an index into `origin_names`.
    form : ndarray of uint8, shape (n,), or None
        Crystal form: an index into `form_names`.
    origin_names, form_names : tuple of str
        Names of the codes.

    Raises
    ------
    ValidityError
        If shapes do not fit or a position or grown length is not finite.

    Examples
    --------
    >>> births = Births(position=[[0.0, 1e-6], [2e-6, 3e-6]], grown_length=[0.0, 1e-7])
    >>> len(births), births.dimension
    (2, 2)
    >>> births.take([1]).position.tolist()
    [[2e-06, 3e-06]]
    """

    position: NDArray[np.float64]
    grown_length: NDArray[np.float64]
    time: NDArray[np.float64] | None = None
    temperature: NDArray[np.float64] | None = None
    origin: NDArray[np.uint8] | None = None
    form: NDArray[np.uint8] | None = None
    origin_names: tuple[str, ...] = field(default=())
    form_names: tuple[str, ...] = field(default=())

    def __post_init__(self) -> None:
        for name in ("position", "grown_length", "time", "temperature", "origin", "form"):
            value = getattr(self, name)
            if value is not None:
                array = np.array(value, dtype=_DTYPES.get(name, np.float64), order="C")
                array.setflags(write=False)
                object.__setattr__(self, name, array)
        if self.position.ndim != 2 or self.position.shape[1] not in (2, 3):
            raise ValidityError(
                f"births: expected positions of shape (n, 2) or (n, 3), got {self.position.shape}"
            )
        for name in ("grown_length", "time", "temperature", "origin", "form"):
            value = getattr(self, name)
            if value is not None and value.shape != (len(self),):
                raise ValidityError(
                    f"births: expected {len(self)} values of {name}, got shape {value.shape}"
                )
        if not (np.isfinite(self.position).all() and np.isfinite(self.grown_length).all()):
            raise ValidityError("births: positions and grown lengths must be finite")

    def __len__(self) -> int:
        return int(self.position.shape[0])

    @property
    def dimension(self) -> int:
        """Number of axes of the positions, 2 or 3."""
        return int(self.position.shape[1])

    def take(self, rows: ArrayLike) -> Births:
        """Return some of the births, in the order asked for.

        Parameters
        ----------
        rows : array_like of int or of bool
            Indices of the rows, or a mask.

        Returns
        -------
        births : Births
            The chosen rows.
        """
        chosen = np.asarray(rows)
        if chosen.size == 0:
            chosen = chosen.astype(np.intp)
        arrays = {
            f.name: getattr(self, f.name)[chosen]
            for f in fields(self)
            if isinstance(getattr(self, f.name), np.ndarray)
        }
        return replace(self, **arrays)
