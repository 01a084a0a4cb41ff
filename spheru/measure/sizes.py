"""Sizes of the spherulites of a label image, and their statistics.

A size is that of a label, whether its pixels hang together or not: in a plane section a curved
spherulite may be cut twice. Where the image came from is not known here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, get_args

import numpy as np

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.boundary import boundary_statistic
from spheru.measure.intervals import TILES, Statistic, tile_interval, tile_waves
from spheru.measure.labels import LabelSums, cut_axes, sum_labels

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage

__all__ = ["EdgeRule", "Histogram", "SizeStatistics", "Sizes", "Weighting", "measure_sizes"]

EdgeRule = Literal["auto", "none", "exclude", "miles-lantuejoul"]
Weighting = Literal["number", "size"]


@dataclass(frozen=True, slots=True, kw_only=True)
class SizeStatistics:
    """Statistics of the sizes, each with its 95 % interval over tiles.

    Attributes
    ----------
    number_mean_diameter : Statistic
        Mean equivalent diameter, every spherulite counting once [m].
    size_weighted_mean_diameter : Statistic
        Mean equivalent diameter weighted by area (two axes) or volume (three axes) [m].
    diameter_sd : Statistic
        Standard deviation of the equivalent diameter, number-weighted [m].
    mean_size : Statistic
        Mean area [m2] or volume [m3].
    size_sd : Statistic
        Standard deviation of the area [m2] or volume [m3], number-weighted.
    number_density : Statistic
        Spherulites per area [m-2] or volume [m-3] of the frame.
    boundary_density : Statistic
        Boundary between spherulites per area or volume of the frame [m-1]; neither the edge rule
        nor the floor touches it.
    """

    number_mean_diameter: Statistic
    size_weighted_mean_diameter: Statistic
    diameter_sd: Statistic
    mean_size: Statistic
    size_sd: Statistic
    number_density: Statistic
    boundary_density: Statistic


@dataclass(frozen=True, slots=True, kw_only=True)
class Histogram:
    """Shares of the spherulites by equivalent diameter.

    Attributes
    ----------
    edges : ndarray of float64, shape (n + 1,)
        Class edges [m].
    number : ndarray of float64, shape (n,)
        Share of the number in each class [-].
    size : ndarray of float64, shape (n,)
        Share of the area or volume in each class [-].
    """

    edges: NDArray[np.float64]
    number: NDArray[np.float64]
    size: NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Sizes:
    """Sizes of the spherulites that own a pixel; all arrays are read-only, labels rising.

    Attributes
    ----------
    label : ndarray of uint32, shape (n,)
        Their labels.
    pixels : ndarray of int64, shape (n,)
        Number of pixels.
    size : ndarray of float64, shape (n,)
        Area [m2] (two axes) or volume [m3] (three axes).
    diameter : ndarray of float64, shape (n,)
        Diameter of the circle of the same area or the sphere of the same volume [m].
    centre : ndarray of float64, shape (n, D)
        Centre of mass [m], within the frame; put together across periodic edges, exactly so for
        spherulites shorter than half the period.
    touches_edge : ndarray of bool, shape (n,)
        Whether a pixel lies at an edge where the frame is cut out of something larger.
    weight : ndarray of float64, shape (n,)
        How many spherulites per area [m-2] or volume [m-3] it stands for; 0 where it is not used.
    edge_rule : {"none", "exclude", "miles-lantuejoul"}
        The rule in force.
    floor : float
        Equivalent diameter below which a spherulite is not used [m].
    spanning : int
        Spherulites that reach from one cut edge to the opposite one: larger than the window can
        show, so whatever the edge rule, the sizes read too small.
    dimension : int
        2 or 3.
    statistics : SizeStatistics
        Means, standard deviations, densities.
    kind : str
        "label": a size is that of a label, not of a connected patch.
    """

    label: NDArray[np.uint32]
    pixels: NDArray[np.int64]
    size: NDArray[np.float64]
    diameter: NDArray[np.float64]
    centre: NDArray[np.float64]
    touches_edge: NDArray[np.bool_]
    weight: NDArray[np.float64]
    edge_rule: str
    floor: float
    spanning: int
    dimension: int
    statistics: SizeStatistics
    kind: str = "label"

    def __post_init__(self) -> None:
        for name in ("label", "pixels", "size", "diameter", "centre", "touches_edge", "weight"):
            getattr(self, name).setflags(write=False)

    def __len__(self) -> int:
        return len(self.label)

    @property
    def count(self) -> int:
        """Number of spherulites that the statistics use."""
        return int(np.count_nonzero(self.weight))

    def quantiles(self, q: ArrayLike, *, weighting: Weighting = "number") -> NDArray[np.float64]:
        """Return quantiles of the equivalent diameter.

        Parameters
        ----------
        q : array_like of float, shape (...)
            Shares, 0 to 1.
        weighting : {"number", "size"}, optional
            What is shared out: the number of spherulites, or their area or volume.

        Returns
        -------
        diameter : ndarray of float64, shape (...)
            Smallest diameter [m] up to which at least the share `q` lies; nan where none is used.

        Raises
        ------
        ValidityError
            If a share is not between 0 and 1.
        UnknownNameError
            If the weighting is not one of the two.

        Examples
        --------
        Areas of 1 and 3 pixels: half the number lies at or below the small one, half the area
        only at or below the large one, of diameter sqrt(4 * 3/pi) = 1.95441.

        >>> from spheru.image.frame import Frame
        >>> from spheru.image.label_image import LabelImage
        >>> frame = Frame(shape=(1, 4), pixel=1.0, periodic=True)
        >>> sizes = measure_sizes(LabelImage(labels=np.array([[1, 2, 2, 2]]), frame=frame))
        >>> float(sizes.quantiles(0.5)), float(sizes.quantiles(0.5, weighting="size"))
        (1.12837..., 1.95441...)
        """
        share = np.asarray(q, dtype=np.float64)
        if not ((share >= 0) & (share <= 1)).all():
            raise ValidityError(f"quantiles: expected shares between 0 and 1, got {share.tolist()}")
        weight = self._weighting(weighting)
        if not weight.any():
            return np.full(share.shape, math.nan)
        used = weight > 0
        return np.asarray(
            np.quantile(self.diameter[used], share, weights=weight[used], method="inverted_cdf")
        )

    def histogram(self, bins: int | ArrayLike = 30) -> Histogram:
        """Return the distribution of the equivalent diameter, by number and by size.

        Parameters
        ----------
        bins : int or array_like of float, shape (n + 1,), optional
            Number of equal classes from 0 to the largest diameter, or their edges [m].

        Returns
        -------
        histogram : Histogram
            Class edges and shares; all shares are 0 where no spherulite is used.
        """
        used = self.weight > 0
        diameter = self.diameter[used]
        edges = np.asarray(bins, dtype=np.float64)
        if edges.ndim == 0:
            edges = np.linspace(0.0, diameter.max(initial=0.0) or 1.0, int(edges) + 1)

        def shares(weight: NDArray[np.float64]) -> NDArray[np.float64]:
            return np.histogram(diameter, edges, weights=weight / (weight.sum() or 1.0))[0]

        number, size = (shares(self._weighting(w)[used]) for w in get_args(Weighting))
        return Histogram(edges=edges, number=number, size=size)

    def _weighting(self, weighting: str) -> NDArray[np.float64]:
        if weighting not in get_args(Weighting):
            raise UnknownNameError("weighting", weighting, get_args(Weighting))
        return self.weight if weighting == "number" else self.weight * self.size


def measure_sizes(image: LabelImage, *, edges: EdgeRule = "auto", floor: float = 0.0) -> Sizes:
    r"""Measure every spherulite of a label image.

    Parameters
    ----------
    image : LabelImage
        The map; 0 is no spherulite.
    edges : {"auto", "none", "exclude", "miles-lantuejoul"}, optional
        What happens at edges where the frame is cut out of something larger. "none": every piece
        counts as it is. "exclude": only whole spherulites count, equally; small ones are then
        found too often. "miles-lantuejoul": whole ones count, each by the inverse of its chance to
        lie wholly inside. "auto": "none" where no axis is cut, else "miles-lantuejoul".
        Spherulites always end at a closed axis (a wall) and go on across a periodic one.
    floor : float, optional
        Equivalent diameter below which a spherulite is not used [m], >= 0.

    Returns
    -------
    sizes : Sizes
        Sizes and statistics.

    Raises
    ------
    UnknownNameError
        If the edge rule is not one of the four.
    ValidityError
        If the floor is negative or not finite.

    Notes
    -----
    The weight is 1/measure of the frame but for the last rule, where along each cut axis the length
    of the frame gives way to the range of places of the window at which a spherulite of w pixels
    keeps clear of both edges: of n pixels, n - w - 1. That is the rule of Miles and Lantuejoul,
    W - w, with the pixel rows at the edge counted as touching; the weights then sum up to the
    number per area or volume, and weighted means are unbiased.

    Tiles: each spherulite belongs to the tile of its centre, or, along an axis that the last rule
    corrects, to the tile of its place within its range of places, so that all tiles are alike.

    References
    ----------
    .. [1] R. E. Miles, "On the elimination of edge effects in planar sampling", in: Stochastic
       Geometry, Wiley, 1974, 228-247 (memory).
    .. [2] C. Lantuejoul, "Computation of the histograms of the number of edges and neighbours of
       cells in a tessellation", in: Geometrical Probability and Biological Structures, Springer,
       1978, 323-329 (memory).

    Examples
    --------
    A periodic strip of 4 pixels of 1 um, areas 1 and 3 um2: mean 2 um2, 2 per 4 um2.

    >>> from spheru.image.frame import Frame
    >>> from spheru.image.label_image import LabelImage
    >>> frame = Frame(shape=(1, 4), pixel=1e-6, periodic=True)
    >>> sizes = measure_sizes(LabelImage(labels=np.array([[1, 2, 2, 2]]), frame=frame))
    >>> round(sizes.statistics.mean_size.value * 1e12, 9), sizes.edge_rule
    (2.0, 'none')
    >>> round(sizes.statistics.number_density.value * 1e-12, 9)
    0.5
    """
    if edges not in get_args(EdgeRule):
        raise UnknownNameError("edge rule", edges, get_args(EdgeRule))
    if not (math.isfinite(floor) and floor >= 0):
        raise ValidityError(f"floor: expected a diameter of 0 m and up, got {floor}")
    frame = image.frame
    cut = cut_axes(frame)
    rule = edges
    if edges == "auto":
        rule = "miles-lantuejoul" if cut.any() else "none"
    sums = sum_labels(image)
    at_low, at_high = sums.low == 0, sums.high == np.array(frame.shape) - 1
    touches = ((at_low | at_high) & cut).any(axis=1)
    size = np.asarray(sums.pixels * frame.pixel_measure, dtype=np.float64)
    diameter = _equivalent_diameter(size, frame.dimension)
    places, place = _places(sums, frame, cut if rule == "miles-lantuejoul" else cut & False)
    unused = diameter < floor
    if rule != "none":
        unused |= touches
    weight = np.zeros(len(size))
    weight[~unused] = 1.0 / (places[~unused] * frame.pixel).prod(axis=1)
    return Sizes(
        label=sums.label,
        pixels=sums.pixels,
        size=size,
        diameter=diameter,
        centre=np.array(frame.origin) + sums.centre * frame.pixel,
        touches_edge=touches,
        weight=weight,
        edge_rule=rule,
        floor=float(floor),
        spanning=int((at_low & at_high & cut).any(axis=1).sum()),
        dimension=frame.dimension,
        statistics=_statistics(size, diameter, weight, place, sums, frame),
    )


def _equivalent_diameter(size: NDArray[np.float64], dimension: int) -> NDArray[np.float64]:
    return np.sqrt(4.0 * size / math.pi) if dimension == 2 else np.cbrt(6.0 * size / math.pi)


def _places(
    sums: LabelSums, frame: Frame, corrected: NDArray[np.bool_]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the number of places of each label along each axis, and which one it has, 0 to 1."""
    length = np.array(frame.shape, dtype=np.float64)
    places = np.where(corrected, length - (sums.high - sums.low + 1) - 1, length)
    place = np.where(corrected, sums.low - 0.5, sums.centre)
    return places, place / np.maximum(places, 1.0)  # those without a place touch an edge


def _statistics(
    size: NDArray[np.float64],
    diameter: NDArray[np.float64],
    weight: NDArray[np.float64],
    place: NDArray[np.float64],
    sums: LabelSums,
    frame: Frame,
) -> SizeStatistics:
    used = weight > 0
    size, diameter, weight, place = size[used], diameter[used], weight[used], place[used]
    waves = tile_waves(len(size), frame.extent, frame.periodic)
    grid = (TILES,) * frame.dimension
    cell = np.minimum((place * TILES).astype(np.int64), TILES - 1)
    tile = np.ravel_multi_index(tuple(cell.T), grid)
    # squares about the mean, in units of the mean: no digits are lost
    mean_d, mean_a = (v.mean() if v.size else 1.0 for v in (diameter, size))
    d, a = diameter / mean_d - 1.0, size / mean_a - 1.0
    columns = (np.ones_like(d), d, d**2, a, a**2, size / mean_a, (size / mean_a) * d)
    totals = np.empty((math.prod(grid), len(columns) + 1))
    totals[:, 0] = 1.0 / len(totals)  # share of the window
    for k, column in enumerate(columns, start=1):
        totals[:, k] = np.bincount(tile, weights=weight * column, minlength=len(totals))

    def mean(column: int, scale: float, by: int = 1) -> Statistic:
        return tile_interval(totals, lambda t: scale * (1.0 + t[..., column] / t[..., by]), waves)

    def spread(column: int, scale: float) -> Statistic:
        def deviation(t: NDArray[np.float64]) -> NDArray[np.float64]:
            first, second = t[..., column] / t[..., 1], t[..., column + 1] / t[..., 1]
            return np.asarray(scale * np.sqrt(np.maximum(second - first**2, 0.0)))

        return tile_interval(totals, deviation, waves)

    return SizeStatistics(
        number_mean_diameter=mean(2, mean_d),
        size_weighted_mean_diameter=mean(7, mean_d, by=6),
        diameter_sd=spread(2, mean_d),
        mean_size=mean(4, mean_a),
        size_sd=spread(4, mean_a),
        number_density=tile_interval(totals, lambda t: t[..., 1] / t[..., 0], waves),
        boundary_density=boundary_statistic(sums, frame),
    )
