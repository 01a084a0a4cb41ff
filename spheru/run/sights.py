"""How a map is looked at: the two-dimensional picture of a volume.

No physics and no light; pictures of light are another room's work.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.run.settings import Sample

__all__ = ["picture", "picture_of_volume"]

_PILE: Final = 128  # pixels along the edges of a pile of columns that is looked through at once


def picture(image: LabelImage, sample: Sample) -> LabelImage:
    """Return the map as it is looked at.

    Parameters
    ----------
    image : LabelImage
        The map that was grown.
    sample : Sample
        What is looked at; `sight` says how a film is seen: its middle plane (``"mid"``), its lower
        face (``"face"``), or through it, every point showing the spherulite that fills most of the
        thickness there (``"through"``; the lowest label of equal ones).

    Returns
    -------
    picture : LabelImage
        Two axes; the map itself where it has no more. A block shows its middle plane.
    """
    if image.frame.dimension == 2:
        return image
    return picture_of_volume(image.frame, image.births, sample, lambda part: image.labels[part])


def picture_of_volume(
    frame: Frame,
    births: Births | None,
    sample: Sample,
    read: Callable[[tuple[slice, ...]], NDArray[np.uint32]],
) -> LabelImage:
    """Return the picture of a volume of which only parts need to be in memory.

    Parameters
    ----------
    frame : Frame
        The grid of the volume.
    births : Births or None
        Births of its labels.
    sample : Sample
        As for `picture`.
    read : callable
        Takes a slice per axis and returns the labels of that part.

    Returns
    -------
    picture : LabelImage
        Two axes.
    """
    depth, rows, columns = frame.shape
    labels: NDArray[np.uint32]
    if sample.view == "film" and sample.sight == "through":
        labels, height = np.empty((rows, columns), dtype=np.uint32), frame.extent[0] / 2
        for y in range(0, rows, _PILE):
            for x in range(0, columns, _PILE):
                part = (slice(y, min(y + _PILE, rows)), slice(x, min(x + _PILE, columns)))
                labels[part] = _fills_most(read((slice(0, depth), *part)))
    else:
        row = 0 if sample.view == "film" and sample.sight == "face" else depth // 2
        labels = read((slice(row, row + 1), slice(0, rows), slice(0, columns)))[0]
        height = float(frame.centres(0)[row])
    flat = Frame(
        shape=frame.shape[1:],
        pixel=frame.pixel,
        origin=frame.origin[1:],
        periodic=frame.periodic[1:],
        closed=frame.closed[1:],
        plane_z=height,
    )
    return LabelImage(labels=labels, frame=flat, births=births)


def _fills_most(labels: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """Return the commonest label of every column along the first axis.

    Examples
    --------
    >>> _fills_most(np.array([[[1, 2]], [[1, 3]], [[2, 3]]], dtype=np.uint32)).tolist()
    [[1, 3]]
    """
    ordered = np.sort(labels, axis=0)
    best: NDArray[np.uint32] = ordered[0].copy()
    run = np.ones(best.shape, dtype=np.int32)
    most = run.copy()
    for k in range(1, len(ordered)):
        run = np.where(ordered[k] == ordered[k - 1], run + 1, 1)
        better = run > most
        best[better] = ordered[k][better]
        most[better] = run[better]
    return best
