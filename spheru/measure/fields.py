"""Fields of view: equal windows of plane pictures, and means over them with their accuracy.

Where the fields lie and what their scatter says; what is counted in them is not known here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from scipy.special import stdtrit

from spheru.errors import ValidityError
from spheru.image.label_image import LabelImage
from spheru.measure.intervals import Statistic, replica_interval

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["Field", "FieldMean", "split_fields"]

_PER_FIELD: Final = 50  # spherulites: a count of fewer says little (ASTM E112, memory)
_MOST_SPLITS: Final = 5  # along each axis: 25 fields are enough for Student's interval
_MOST_FIELDS: Final = 100_000  # for a wanted accuracy; more is no answer


@dataclass(frozen=True, slots=True, kw_only=True)
class Field:
    """A window of a plane picture.

    Attributes
    ----------
    image : LabelImage
        The whole picture.
    start : tuple of int
        First row and column.
    shape : tuple of int
        Number of rows and columns.
    """

    image: LabelImage
    start: tuple[int, int]
    shape: tuple[int, int]


@dataclass(frozen=True, slots=True, kw_only=True)
class FieldMean:
    """A quantity counted in several fields of view, all of one size.

    Attributes
    ----------
    values : tuple of float
        One value per field, >= 0.

    Notes
    -----
    Fields from independent places give the 95 % interval its meaning. Those that lie side by side
    in one picture share the spherulites at their edges and are not quite independent.

    References
    ----------
    .. [1] ASTM E112, statistical analysis: CI = t s/sqrt(n), relative accuracy CI/mean; 10 % or
       less is usually accepted. (memory)

    Examples
    --------
    Five fields: mean 10, standard deviation sqrt(10/4) = 1.58114; Student's factor at 4 degrees
    of freedom is 2.776, so the half width is 2.776 * 1.58114/sqrt(5) = 1.963, or 19.6 %.

    >>> mean = FieldMean(values=(8.0, 9.0, 10.0, 11.0, 12.0))
    >>> mean.statistic
    Statistic(value=10.0, low=8.03675..., high=11.96324...)
    >>> round(mean.relative_accuracy, 4)
    0.1963

    For 10 %: 12 fields give 2.201 * 1.58114/sqrt(12) = 1.0046, 13 give 2.179 * 1.58114/sqrt(13)
    = 0.9555.

    >>> mean.fields_needed(0.1)
    13
    """

    values: tuple[float, ...]

    @property
    def fields(self) -> int:
        """Number of fields."""
        return len(self.values)

    @property
    def statistic(self) -> Statistic:
        """Mean over the fields and its 95 % interval; none for a single field."""
        return replica_interval(self.values)

    @property
    def relative_accuracy(self) -> float:
        """Half width of the interval by the mean [-]; nan where there is none."""
        mean = self.statistic
        return (mean.high - mean.value) / mean.value if mean.value > 0 else math.nan

    def fields_needed(self, accuracy: float = 0.1) -> int | None:
        """Return how many fields it takes in all to reach a relative accuracy.

        Parameters
        ----------
        accuracy : float, optional
            Half width of the 95 % interval by the mean [-], above 0.

        Returns
        -------
        fields : int or None
            Smallest number, >= 2, with which Student's interval is that narrow, if further fields
            scatter like those that are there; None where fewer than two are, or where it would
            take over a hundred thousand.

        Raises
        ------
        ValidityError
            If the accuracy is not above 0.
        """
        if not accuracy > 0:
            raise ValidityError(f"fields needed: expected an accuracy above 0, got {accuracy}")
        now = self.relative_accuracy
        if math.isnan(now):
            return None
        per_field = now * math.sqrt(self.fields) / float(stdtrit(self.fields - 1, 0.975))
        low, high = 1, _MOST_FIELDS  # too few, enough
        while high - low > 1:
            middle = (low + high) // 2
            half = float(stdtrit(middle - 1, 0.975)) * per_field / math.sqrt(middle)
            low, high = (low, middle) if half <= accuracy else (middle, high)
        return high if high < _MOST_FIELDS else None


def split_fields(
    images: LabelImage | Sequence[LabelImage], *, split: int | None = None
) -> tuple[Field, ...]:
    """Return equal fields of view of one or several plane pictures.

    Parameters
    ----------
    images : LabelImage or sequence of LabelImage
        Pictures of one pixel size.
    split : int, optional
        Fields along each axis of each picture, >= 1. Where it is None: as many, up to 5, as hold
        at least 50 spherulites each on the average.

    Returns
    -------
    fields : tuple of Field
        split**2 fields of each picture, row by row.

    Raises
    ------
    ValidityError
        If there is no picture, one is not plane, their pixels differ, or the split does not fit.

    Examples
    --------
    >>> import numpy as np
    >>> from spheru.image.frame import Frame
    >>> frame = Frame(shape=(4, 6), pixel=1e-6)
    >>> image = LabelImage(labels=np.ones((4, 6), dtype=int), frame=frame)
    >>> [field.start for field in split_fields(image, split=2)]
    [(0, 0), (0, 3), (2, 0), (2, 3)]
    """
    pictures = [images] if isinstance(images, LabelImage) else list(images)
    if not pictures:
        raise ValidityError("fields: expected at least one picture, got none")
    for image in pictures:
        if image.frame.dimension != 2:
            raise ValidityError(
                "fields: counts are made in plane pictures, got a volume; take sections of it"
            )
    if len({image.frame.pixel for image in pictures}) > 1:
        raise ValidityError("fields: expected pictures of one pixel size")
    if split is None:
        fewest = min(image.count for image in pictures)
        split = max(1, min(_MOST_SPLITS, math.isqrt(fewest // _PER_FIELD)))
        split = min(split, *(n for image in pictures for n in image.frame.shape))
    if split < 1 or any(split > n for image in pictures for n in image.frame.shape):
        raise ValidityError(f"fields: a split of {split} does not fit the picture")
    fields = []
    for image in pictures:
        height, width = (n // split for n in image.frame.shape)
        fields += [
            Field(image=image, start=(i * height, j * width), shape=(height, width))
            for i in range(split)
            for j in range(split)
        ]
    return tuple(fields)
