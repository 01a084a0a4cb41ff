"""Sizes of the spherulites of a label image, and their statistics.

A size is that of a label, whether its pixels hang together or not, or that of a connected patch: in
a plane section a curved spherulite may be cut twice. Where the image came from is not known here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, get_args

import numpy as np

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.boundary import boundary_statistic
from spheru.measure.edges import EdgeRule, weigh_edges
from spheru.measure.intervals import TILES, Statistic, Tiles, field_interval, tile_waves
from spheru.measure.labels import LabelSums, connected_patches, sum_labels

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import ArrayLike, NDArray

    from spheru.image.label_image import LabelImage

__all__ = [
    "EdgeRule",
    "Histogram",
    "Kind",
    "SizeStatistics",
    "Sizes",
    "Weighting",
    "measure_sizes",
    "pool_sizes",
    "sizes_of_sums",
]

Kind = Literal["label", "patch"]
Weighting = Literal["number", "size", "area", "volume"]


@dataclass(frozen=True, slots=True, kw_only=True)
class SizeStatistics:
    """Statistics of the sizes, each with its 95 % interval over tiles or fields.

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
    edge_rule : {"none", "exclude", "miles-lantuejoul", "counting-frame", "guard-frame"}
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
    kind : {"label", "patch"}
        Whether a size is that of a label or of a connected patch; `label` numbers the patches then.
    guard : float
        Width of the guard inside each cut edge [m]; 0 where the rule has none.
    lost : int
        Grains that belong to the inner window but reach the edge: the guard is too narrow.
    tiles : Tiles
        How those used are spread over the tiles of the picture, or over fields.
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
    tiles: Tiles
    kind: Kind = "label"
    guard: float = 0.0
    lost: int = 0

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
        weighting : {"number", "size", "area", "volume"}, optional
            What is shared out, see `weights`.

        Returns
        -------
        diameter : ndarray of float64, shape (...)
            Smallest diameter [m] up to which at least the share `q` lies; nan where none is used.

        Raises
        ------
        ValidityError
            If a share is not between 0 and 1.
        UnknownNameError
            If there is no such weighting.

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
        weight = self.weights(weighting)
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

        number, size = (shares(self.weights(w)[used]) for w in ("number", "size"))
        return Histogram(edges=edges, number=number, size=size)

    def weights(self, weighting: Weighting = "number") -> NDArray[np.float64]:
        """Return what each spherulite weighs in a distribution.

        Parameters
        ----------
        weighting : {"number", "size", "area", "volume"}, optional
            "number": each counts by its edge weight alone. "size": times its area (two axes) or
            volume (three axes). "area", "volume": times the square, the cube of its equivalent
            diameter; of circles in a plane the cube is a volume only by custom.

        Returns
        -------
        weight : ndarray of float64, shape (n,)
            Weights, 0 where a spherulite is not used; only their ratios matter.

        Raises
        ------
        UnknownNameError
            If there is no such weighting.
        """
        if weighting not in get_args(Weighting):
            raise UnknownNameError("weighting", weighting, get_args(Weighting))
        if weighting == "number":
            return self.weight
        power = {"size": self.dimension, "area": 2, "volume": 3}[weighting]
        if power == self.dimension:
            return self.weight * self.size
        return np.asarray(self.weight * self.diameter**power)

    def mean(self, values: NDArray[np.float64], *, weighting: Weighting = "number") -> Statistic:
        """Return the mean of a number that each spherulite has, with its interval.

        Parameters
        ----------
        values : ndarray of float64, shape (n,)
            The number, >= 0, row for row; those of spherulites that are not used do not matter.
        weighting : {"number", "size", "area", "volume"}, optional
            What a spherulite weighs, see `weights`.

        Returns
        -------
        statistic : Statistic
            The mean; nan where none is used.

        Raises
        ------
        UnknownNameError
            If there is no such weighting.
        """
        used = self.weight > 0
        weight = self.weights(weighting)[used]
        totals = self.tiles.totals(weight, weight * values[used])
        return self.tiles.interval(totals, lambda total: total[..., 2] / total[..., 1])


def measure_sizes(
    image: LabelImage,
    *,
    edges: EdgeRule = "auto",
    floor: float = 0.0,
    guard: float | None = None,
    kind: Kind = "label",
) -> Sizes:
    r"""Measure every spherulite of a label image.

    Parameters
    ----------
    image : LabelImage
        The map; 0 is no spherulite.
    edges : str, optional
        What happens at edges where the frame is cut out of something larger: "none", "exclude",
        "miles-lantuejoul", "counting-frame" or "guard-frame", see `weigh_edges`; "auto" is "none"
        where no axis is cut, else "miles-lantuejoul". Spherulites always end at a closed axis (a
        wall) and go on across a periodic one.
    floor : float, optional
        Equivalent diameter below which a spherulite is not used [m], >= 0.
    guard : float, optional
        Width of the guard [m], > 0, for the rules of the last two names.
    kind : {"label", "patch"}, optional
        What has a size: a label, or a patch of it that hangs together, see
        `connected_patches`.

    Returns
    -------
    sizes : Sizes
        Sizes and statistics.

    Raises
    ------
    UnknownNameError
        If there is no such edge rule or kind.
    ValidityError
        If the floor is negative or not finite, or the guard does not fit.

    Notes
    -----
    The weights of an unbiased rule sum up to the number per area or volume, and weighted means are
    unbiased. Tiles: each spherulite belongs to the tile of its centre, or, along an axis that the
    rule corrects, to the tile of its place within its range of places, so that all tiles are alike.

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
    if kind not in get_args(Kind):
        raise UnknownNameError("kind of size", kind, get_args(Kind))
    if kind == "patch":
        image, _ = connected_patches(image)
    return sizes_of_sums(image, sum_labels(image), edges=edges, floor=floor, guard=guard, kind=kind)


def sizes_of_sums(
    image: LabelImage,
    sums: LabelSums,
    *,
    edges: EdgeRule = "auto",
    floor: float = 0.0,
    guard: float | None = None,
    kind: Kind = "label",
) -> Sizes:
    """Return the sizes from sums that are already there; see `measure_sizes`.

    Parameters
    ----------
    image : LabelImage
        The map, of patches where these are measured.
    sums : LabelSums
        What `sum_labels` gave for it.
    edges, floor, guard
        As in `measure_sizes`.
    kind : {"label", "patch"}, optional
        What the numbers of the image stand for; nothing is taken apart here.

    Returns
    -------
    sizes : Sizes
        Sizes and statistics.

    Raises
    ------
    UnknownNameError
        If there is no such edge rule.
    ValidityError
        If the floor is negative or not finite, or the guard does not fit.
    """
    if not (math.isfinite(floor) and floor >= 0):
        raise ValidityError(f"floor: expected a diameter of 0 m and up, got {floor}")
    frame = image.frame
    edged = weigh_edges(image, sums, rule=edges, guard=guard)
    size = np.asarray(sums.pixels * frame.pixel_measure, dtype=np.float64)
    diameter = _equivalent_diameter(size, frame.dimension)
    weight = np.where(diameter < floor, 0.0, edged.weight)
    used = weight > 0
    cell = np.minimum((edged.place[used] * TILES).astype(np.int64), TILES - 1)
    tiles = Tiles(
        index=np.ravel_multi_index(tuple(cell.T), (TILES,) * frame.dimension),
        share=np.full(TILES**frame.dimension, 1.0 / TILES**frame.dimension),
        waves=tile_waves(int(used.sum()), edged.window, frame.periodic),
    )
    return Sizes(
        label=sums.label,
        pixels=sums.pixels,
        size=size,
        diameter=diameter,
        centre=np.array(frame.origin) + sums.centre * frame.pixel,
        touches_edge=edged.touches_edge,
        weight=weight,
        edge_rule=edged.rule,
        floor=float(floor),
        spanning=edged.spanning,
        dimension=frame.dimension,
        statistics=_statistics(
            size[used], diameter[used], weight[used], tiles, boundary_statistic(sums, frame)
        ),
        tiles=tiles,
        kind=kind,
        guard=edged.guard,
        lost=edged.lost,
    )


def pool_sizes(sizes: Sequence[Sizes], measures: Sequence[float]) -> Sizes:
    """Put the spherulites of several fields together; intervals then come from the fields.

    Parameters
    ----------
    sizes : sequence of Sizes, length n
        Sizes of each field, measured alike.
    measures : sequence of float, length n
        Area [m2] or volume [m3] of each field.

    Returns
    -------
    pooled : Sizes
        Row after row as in the fields, whose labels may come twice. A field counts by its area or
        volume. Of a single field its own sizes.

    Raises
    ------
    ValidityError
        If planes and bodies, or labels and patches, come together.
    """
    first = sizes[0]
    if len({(field.dimension, field.kind) for field in sizes}) != 1:
        raise ValidityError(
            "fields: expected all of them with two axes or all with three, as labels or as patches"
        )
    if len(sizes) == 1:
        return first
    share = np.array(measures) / math.fsum(measures)
    arrays = {
        name: np.concatenate([getattr(field, name) for field in sizes])
        for name in ("label", "pixels", "size", "diameter", "centre", "touches_edge")
    }
    weight = np.concatenate([field.weight * s for field, s in zip(sizes, share, strict=True)])
    index = np.repeat(np.arange(len(sizes)), [len(field) for field in sizes])
    used = weight > 0
    tiles = Tiles(index=index[used], share=share, waves=None)
    boundary = np.array([field.statistics.boundary_density.value for field in sizes])
    density = field_interval(np.column_stack([boundary * share, share]), _ratio)
    rules = sorted({field.edge_rule for field in sizes})
    return Sizes(
        **arrays,
        weight=weight,
        edge_rule=", ".join(rules),
        floor=first.floor,
        spanning=sum(field.spanning for field in sizes),
        dimension=first.dimension,
        statistics=_statistics(
            arrays["size"][used], arrays["diameter"][used], weight[used], tiles, density
        ),
        tiles=tiles,
        kind=first.kind,
        guard=max(field.guard for field in sizes),
        lost=sum(field.lost for field in sizes),
    )


def _ratio(total: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(total[..., 0] / total[..., 1])


def _equivalent_diameter(size: NDArray[np.float64], dimension: int) -> NDArray[np.float64]:
    return np.sqrt(4.0 * size / math.pi) if dimension == 2 else np.cbrt(6.0 * size / math.pi)


def _statistics(
    size: NDArray[np.float64],
    diameter: NDArray[np.float64],
    weight: NDArray[np.float64],
    tiles: Tiles,
    boundary: Statistic,
) -> SizeStatistics:
    """Return the statistics of the spherulites that are used."""
    # squares about the mean, in units of the mean: no digits are lost
    mean_d, mean_a = (v.mean() if v.size else 1.0 for v in (diameter, size))
    d, a = diameter / mean_d - 1.0, size / mean_a - 1.0
    columns = (np.ones_like(d), d, d**2, a, a**2, size / mean_a, (size / mean_a) * d)
    totals = tiles.totals(*(weight * column for column in columns))

    def mean(column: int, scale: float, by: int = 1) -> Statistic:
        return tiles.interval(totals, lambda t: scale * (1.0 + t[..., column] / t[..., by]))

    def spread(column: int, scale: float) -> Statistic:
        def deviation(t: NDArray[np.float64]) -> NDArray[np.float64]:
            first, second = t[..., column] / t[..., 1], t[..., column + 1] / t[..., 1]
            return np.asarray(scale * np.sqrt(np.maximum(second - first**2, 0.0)))

        return tiles.interval(totals, deviation)

    return SizeStatistics(
        number_mean_diameter=mean(2, mean_d),
        size_weighted_mean_diameter=mean(7, mean_d, by=6),
        diameter_sd=spread(2, mean_d),
        mean_size=mean(4, mean_a),
        size_sd=spread(4, mean_a),
        number_density=tiles.interval(totals, lambda t: t[..., 1] / t[..., 0]),
        boundary_density=boundary,
    )
