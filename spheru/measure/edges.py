"""What to do with the pieces at the edges of a window that is cut out of something larger.

Each rule says which grains count, and how many per area or volume each of them stands for; what is
averaged with these weights is decided in `spheru.measure.sizes`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, get_args

import numpy as np

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.kernels import box_kernel
from spheru.measure.labels import cut_axes, dense_labels, in_space

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage
    from spheru.measure.labels import LabelSums

__all__ = ["EdgeRule", "EdgeWeights", "weigh_edges"]

EdgeRule = Literal["auto", "none", "exclude", "miles-lantuejoul", "counting-frame", "guard-frame"]


@dataclass(frozen=True, slots=True, kw_only=True)
class EdgeWeights:
    """Which grains count, and what each of them stands for.

    Attributes
    ----------
    rule : str
        The rule in force, never "auto".
    weight : ndarray of float64, shape (n,)
        Grains per area [m-2] or volume [m-3] that each one stands for; 0 where it does not count.
    touches_edge : ndarray of bool, shape (n,)
        Whether a pixel lies at a cut edge.
    place : ndarray of float64, shape (n, D)
        Where it stands among the places that the rule leaves to it, 0 to 1.
    window : tuple of float, length D
        Edges of the window by which intervals are judged [m].
    guard : float
        Width left free inside each cut edge [m]; 0 where the rule has none.
    spanning : int
        Grains that reach from one cut edge to the opposite one.
    lost : int
        Grains that belong to the inner window but reach the edge, so that they cannot be measured:
        the guard was too narrow.
    """

    rule: str
    weight: NDArray[np.float64]
    touches_edge: NDArray[np.bool_]
    place: NDArray[np.float64]
    window: tuple[float, ...]
    guard: float
    spanning: int
    lost: int


def weigh_edges(
    image: LabelImage, sums: LabelSums, *, rule: EdgeRule = "auto", guard: float | None = None
) -> EdgeWeights:
    """Apply an edge rule to the grains of an image.

    Parameters
    ----------
    image : LabelImage
        The map.
    sums : LabelSums
        What `sum_labels` gave for it.
    rule : str, optional
        "auto", "none", "exclude", "miles-lantuejoul", "counting-frame" or "guard-frame": see the
        notes. "auto" is "none" where no axis is cut, else "miles-lantuejoul".
    guard : float, optional
        Width of the guard [m], > 0, for the last two rules; from the grains themselves without it.

    Returns
    -------
    weights : EdgeWeights
        Weights and what goes with them.

    Raises
    ------
    UnknownNameError
        If there is no such rule.
    ValidityError
        If a guard is given to a rule that has none, is not above 0, or leaves no window.

    Notes
    -----
    Only axes that are cut out of something larger are corrected.

    none
        Every piece counts as it is: sizes read low, numbers high.
    exclude
        Whole grains count, equally: large ones are missed, so sizes and numbers read low.
    miles-lantuejoul [1]_ [2]_
        Whole grains count, each by the inverse of the range of places at which it is whole: of n
        pixels along an axis, n - w - 1 for a grain of w pixels (the rule of the two authors, W - w,
        with the rows of pixels at the edge counted as touching). Unbiased.
    counting-frame [3]_
        A grain counts that meets the inner frame and neither touches its two lower edges nor the
        lines that prolong them: no pixel at lower x, and none at lower y within the columns of the
        frame (three axes alike). Each grain of the plane then belongs to one frame of a tiling,
        whatever its form. The guard is by default the largest extent of any piece.
    guard-frame
        A grain counts whose centre of mass lies in the inner window. The guard is by default the
        farthest that any piece reaches from its centre.

    The last two are unbiased as long as no grain is wider than the guard allows; those that are
    found to be so are counted as lost. A guard taken from the same picture depends on its grains a
    little: on 300 plane Voronoi windows of 6 and 10 mean spacings numbers and mean areas came out
    within 2 % of the truth, within their scatter.

    References
    ----------
    .. [1] R. E. Miles, "On the elimination of edge effects in planar sampling", in: Stochastic
       Geometry, Wiley, 1974, 228-247 (memory).
    .. [2] C. Lantuejoul, "Computation of the histograms of the number of edges and neighbours of
       cells in a tessellation", in: Geometrical Probability and Biological Structures, Springer,
       1978, 323-329 (memory).
    .. [3] H. J. G. Gundersen, "Notes on the estimation of the numerical density of arbitrary
       profiles: the edge effect", J. Microscopy 111 (1977) 219-223 (memory).

    Examples
    --------
    In a row of 10 pixels of 1 m, label 2 spans 3 pixels: 10 - 3 - 1 = 6 places, weight 1/6.

    >>> from spheru.image.frame import Frame
    >>> from spheru.image.label_image import LabelImage
    >>> from spheru.measure.labels import sum_labels
    >>> row = np.array([[1, 1, 2, 2, 2, 3, 3, 3, 3, 3]])
    >>> image = LabelImage(
    ...     labels=row, frame=Frame(shape=(1, 10), pixel=1.0, closed=(True, False))
    ... )
    >>> weigh_edges(image, sum_labels(image)).weight.round(4).tolist()
    [0.0, 0.1667, 0.0]
    """
    if rule not in get_args(EdgeRule):
        raise UnknownNameError("edge rule", rule, get_args(EdgeRule))
    guarded = rule in ("counting-frame", "guard-frame")
    if guard is not None and not guarded:
        raise ValidityError(
            f"guard: the edge rule '{rule}' has none; leave it out, or choose counting-frame or "
            "guard-frame"
        )
    if guard is not None and not (math.isfinite(guard) and guard > 0):
        raise ValidityError(f"guard: expected a width above 0 m, got {guard}")
    frame = image.frame
    cut = cut_axes(frame)
    if rule == "auto":
        rule = "miles-lantuejoul" if cut.any() else "none"
    length = np.array(frame.shape)
    at_low, at_high = sums.low == 0, sums.high == length - 1
    touches = ((at_low | at_high) & cut).any(axis=1)
    margin = np.zeros(frame.dimension, dtype=np.int64)
    if guarded:
        margin = cut * _guard(sums, frame, rule, guard)
        chosen = (
            _centre_inside(sums, length, margin)
            if rule == "guard-frame"
            else _in_counting_frame(image, sums, margin)
        )
        places = np.broadcast_to((length - 2 * margin).astype(np.float64), sums.centre.shape)
        corner = sums.centre if rule == "guard-frame" else sums.low + 0.5
        place = (corner - margin) / places
    else:
        chosen = np.ones(len(sums.label), dtype=np.bool_)
        corrected = cut if rule == "miles-lantuejoul" else cut & False
        places, place = _places(sums, frame, corrected)
    unused = ~chosen
    if rule != "none":
        unused |= touches
    weight = np.zeros(len(sums.label))
    weight[~unused] = 1.0 / (places[~unused] * frame.pixel).prod(axis=1)
    return EdgeWeights(
        rule=rule,
        weight=weight,
        touches_edge=touches,
        place=np.clip(place, 0.0, 1.0),
        window=tuple(int(n) * frame.pixel for n in length - 2 * margin),
        guard=float(margin.max()) * frame.pixel,
        spanning=int((at_low & at_high & cut).any(axis=1).sum()),
        lost=int((chosen & touches).sum()) if guarded else 0,
    )


def _places(
    sums: LabelSums, frame: Frame, corrected: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the number of places of each label along each axis, and which one it has, 0 to 1."""
    length = np.array(frame.shape, dtype=np.float64)
    places = np.where(corrected, length - (sums.high - sums.low + 1) - 1, length)
    place = np.where(corrected, sums.low - 0.5, sums.centre)
    return places, place / np.maximum(places, 1.0)  # those without a place touch an edge


def _guard(sums: LabelSums, frame: Frame, rule: str, guard: float | None) -> NDArray[np.int64]:
    """Return the width of the guard along each axis in whole pixels."""
    if guard is not None:
        width = np.full(frame.dimension, math.ceil(guard / frame.pixel - 1e-9))
    else:
        extent = sums.high + 1 - sums.low
        reach = np.maximum(sums.centre - sums.low, sums.high + 1 - sums.centre)
        farthest = (reach if rule == "guard-frame" else extent).max(axis=0, initial=0)
        width = np.ceil(farthest).astype(np.int64) + 1
    room = np.array(frame.shape)[cut_axes(frame)] - 2 * width[cut_axes(frame)]
    if (room < 1).any():
        raise ValidityError(
            f"{rule}: a guard of {width.max() * frame.pixel * 1e6:.4g} um at each edge leaves "
            f"nothing of a window of {min(frame.extent) * 1e6:.4g} um; take a larger picture, a "
            "narrower guard, or the edge rule miles-lantuejoul"
        )
    return np.asarray(width, dtype=np.int64)


def _centre_inside(
    sums: LabelSums, length: NDArray[np.int64], margin: NDArray[np.int64]
) -> NDArray[np.bool_]:
    inside: NDArray[np.bool_] = (
        (sums.centre >= margin) & ((sums.centre < length - margin) | (margin == 0))
    ).all(axis=1)
    return inside


def _in_counting_frame(
    image: LabelImage, sums: LabelSums, margin: NDArray[np.int64]
) -> NDArray[np.bool_]:
    """Tell which grains meet the frame and stay clear of its lower edges and what prolongs them."""
    dense, names = dense_labels(image.labels)
    shape, _ = in_space(image.frame)
    labels = dense.reshape(shape)
    row = sums.label if names is None else np.searchsorted(names, sums.label)
    end = np.array(shape)
    low = np.zeros(3, dtype=np.int64)
    low[3 - image.frame.dimension :] = margin
    high = end - low

    def meets(start: NDArray[np.int64], stop: NDArray[np.int64]) -> NDArray[np.bool_]:
        pixels = np.zeros(int(dense.max()) + 1, dtype=np.int64)
        box_kernel(labels, start, stop, pixels)
        found: NDArray[np.bool_] = pixels[row] > 0
        return found

    chosen = meets(low, high)
    start, stop = np.zeros(3, dtype=np.int64), end.copy()
    for axis in (2, 1, 0):  # below the frame in x anywhere, in y within its columns, and so on
        stop[axis] = low[axis]
        chosen &= ~meets(start, stop)
        start[axis], stop[axis] = low[axis], high[axis]
    return chosen
