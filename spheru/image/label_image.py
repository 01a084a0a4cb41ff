"""The label image: which spherulite owns which pixel.

The product of a simulation and of the reading of a micrograph alike; it knows no physics.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.image.frame import Frame

__all__ = ["LabelImage"]

_BLOCK: Final = 2**18  # pixels looked at in one go


@dataclass(frozen=True, slots=True, kw_only=True)
class LabelImage:
    """Labels on a grid; all arrays are read-only views of what was given.

    Attributes
    ----------
    labels : ndarray of uint32, shape of the frame
        0 where nothing has crystallised, else the number of the spherulite, 1 and up.
    frame : Frame
        The grid.
    arrival : ndarray of float32, shape of the frame, or None
        Grown length at which the front arrived [m]; inf where it did not.
    births : Births or None
        Births of the labels: row i owns label i + 1.

    Raises
    ------
    ValidityError
        If the arrays do not fit the frame.

    Examples
    --------
    >>> from spheru.image.frame import Frame
    >>> image = LabelImage(labels=np.array([[1, 1, 0]]), frame=Frame(shape=(1, 3), pixel=1e-6))
    >>> image.labels.dtype.name, image.count, round(image.fraction, 4)
    ('uint32', 1, 0.6667)
    """

    labels: NDArray[np.uint32]
    frame: Frame
    arrival: NDArray[np.float32] | None = None
    births: Births | None = None

    def __post_init__(self) -> None:
        labels = np.asarray(self.labels)
        if labels.shape != self.frame.shape:
            raise ValidityError(
                f"label image: labels of shape {labels.shape} on a frame of {self.frame.shape}"
            )
        if labels.dtype.kind not in "iu" or (labels.dtype.kind == "i" and labels.min() < 0):
            raise ValidityError(
                f"label image: expected whole numbers of 0 and up as labels, got {labels.dtype}"
            )
        object.__setattr__(self, "labels", _read_only(labels, np.uint32))
        if self.arrival is not None:
            if self.arrival.shape != self.frame.shape:
                raise ValidityError(
                    f"label image: arrival of shape {self.arrival.shape} on a frame of "
                    f"{self.frame.shape}"
                )
            object.__setattr__(self, "arrival", _read_only(self.arrival, np.float32))

    @property
    def count(self) -> int:
        """Number of labels that own at least one pixel."""
        if int(self.labels.max()) > self.labels.size:  # a table would outgrow the image
            return int(np.count_nonzero(np.unique(self.labels)))
        present = np.zeros(int(self.labels.max()) + 1, dtype=np.bool_)
        flat = self.labels.ravel()
        for start in range(0, flat.size, _BLOCK):  # indices are copied as 64 bits
            present[flat[start : start + _BLOCK]] = True
        return int(np.count_nonzero(present[1:]))

    @property
    def fraction(self) -> float:
        """Share of the pixels that have crystallised."""
        return float(np.count_nonzero(self.labels) / self.labels.size)


def _read_only(array: NDArray[Any], dtype: type[np.generic]) -> NDArray[Any]:
    view = np.ascontiguousarray(array, dtype=dtype).view()
    view.setflags(write=False)
    return view
