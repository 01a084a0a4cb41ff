r"""From a plane section to the body: spheres, Voronoi and Johnson-Mehl structures.

Unfolding of section diameters, boundary per volume, numbers per volume; the section itself is
measured elsewhere.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal, get_args

import numpy as np

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.intervals import Statistic

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "SpaceEstimate",
    "Structure",
    "Unfolding",
    "linear_edges",
    "logarithmic_edges",
    "section_matrix",
    "space_from_count",
    "space_from_intercept",
    "sphere_mean_diameter",
    "sphere_number_density",
    "surface_from_intercept",
    "unfold_spheres",
]

Structure = Literal["voronoi", "johnson-mehl"]

_LOGARITHMIC_RATIO: Final = 10.0**-0.1  # of diameters from class to class (Saltykov)

# With N_V = 1: S_V = 2/3 int (L')^2 e^-L dr and N_A = L_V/4 = pi/60 int (L')^3 e^-L dr, closed
# forms; L = 4 pi r^3/3, and pi r^4/3 with N_V = Gamma(5/4) (3/pi)^(1/4). The mean equivalent
# diameters are counted: 1.21557 (1e-4) from exact Voronoi cells, 1.043 (0.002) from 14
# Johnson-Mehl maps of 192^3 voxels and 1500 spherulites.
_BALL: Final = 4.0 * math.pi / 3.0
_CONE: Final = math.pi / 3.0
_SPORADIC: Final = math.gamma(1.25) * _CONE**-0.25
_SURFACE: Final = {
    "voronoi": 8.0 * math.pi / 3.0 * _BALL ** (-2 / 3) * math.gamma(5 / 3),
    "johnson-mehl": 8.0 / 3.0 * _CONE**0.25 * math.gamma(1.75) / _SPORADIC ** (1 / 3),
}
_COUNT: Final = {
    "voronoi": math.pi / 60 * (4 * math.pi) ** 2 * _BALL ** (-4 / 3) * math.gamma(7 / 3),
    "johnson-mehl": 4.0 * math.pi / 15 * _CONE**0.5 * math.gamma(2.5) / _SPORADIC ** (2 / 3),
}
_DIAMETER: Final = {"voronoi": 1.21557, "johnson-mehl": 1.043}


@dataclass(frozen=True, slots=True, kw_only=True)
class Unfolding:
    """Spheres per volume by diameter, unfolded from the circles of a section.

    Attributes
    ----------
    edges : ndarray of float64, shape (n + 1,)
        Class edges, rising [m]; each sphere is taken to be as large as its class allows.
    per_area : ndarray of float64, shape (n,)
        Circles per area of the section by class [m-2].
    per_volume : ndarray of float64, shape (n,)
        Spheres per volume by class [m-3]; what came out negative is left so.
    error : ndarray of float64, shape (n,)
        Standard error of those from the counts alone [m-3].
    condition : float
        Condition number of the unfolding matrix [-]: how many times larger the relative error of
        the result can be than that of the counts.
    """

    edges: NDArray[np.float64]
    per_area: NDArray[np.float64]
    per_volume: NDArray[np.float64]
    error: NDArray[np.float64]
    condition: float

    def __post_init__(self) -> None:
        for name in ("edges", "per_area", "per_volume", "error"):
            getattr(self, name).setflags(write=False)

    @property
    def negative(self) -> int:
        """Number of classes that came out negative."""
        return int(np.count_nonzero(self.per_volume < 0))

    @property
    def number_density(self) -> float:
        """Spheres per volume in all [m-3]."""
        return float(self.per_volume.sum())

    @property
    def warning(self) -> str:
        """What is to be kept in mind, in one line."""
        noisy = int(
            np.count_nonzero((self.error > 0.5 * np.abs(self.per_volume)) & (self.error > 0))
        )
        return (
            f"unfolding is ill-conditioned (condition number {self.condition:.3g}): {noisy} of "
            f"{len(self.per_volume)} classes are uncertain by over 50 %, {self.negative} came out "
            "negative; use fewer classes or more circles"
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class SpaceEstimate:
    """What a section tells of the body, if it has the structure that is named.

    Attributes
    ----------
    structure : {"voronoi", "johnson-mehl"}
        All nuclei at once, or at a constant rate.
    number_density : Statistic
        Spherulites per volume [m-3].
    mean_volume : Statistic
        Its inverse [m3].
    mean_diameter : Statistic
        Number mean of the diameter of the sphere of the same volume [m].
    surface_density : Statistic
        Area of boundary per volume [m-1].
    """

    structure: Structure
    number_density: Statistic
    mean_volume: Statistic
    mean_diameter: Statistic
    surface_density: Statistic


def linear_edges(largest: float, classes: int = 10) -> NDArray[np.float64]:
    """Return the edges of equal classes of diameters, 0 to the largest.

    Parameters
    ----------
    largest : float
        Largest diameter [m], > 0.
    classes : int, optional
        Number of classes, >= 1.

    Returns
    -------
    edges : ndarray of float64, shape (classes + 1,)
        Edges [m].

    Raises
    ------
    ValidityError
        If the diameter is not above 0, or there is no class.

    Examples
    --------
    >>> linear_edges(4.0, 2).tolist()
    [0.0, 2.0, 4.0]
    """
    _require_classes(largest, classes)
    return np.linspace(0.0, largest, classes + 1)


def logarithmic_edges(
    largest: float, classes: int = 12, *, ratio: float = _LOGARITHMIC_RATIO
) -> NDArray[np.float64]:
    """Return the edges of classes of diameters that shrink by one ratio.

    Parameters
    ----------
    largest : float
        Largest diameter [m], > 0.
    classes : int, optional
        Number of classes, >= 1. Smaller circles than the smallest class are left out.
    ratio : float, optional
        Diameter of an edge by that of the next larger one, between 0 and 1; Saltykov's is
        10^-0.1.

    Returns
    -------
    edges : ndarray of float64, shape (classes + 1,)
        Edges, rising [m].

    Raises
    ------
    ValidityError
        If the diameter is not above 0, the ratio not between 0 and 1, or there is no class.

    Examples
    --------
    >>> logarithmic_edges(4.0, 2, ratio=0.5).tolist()
    [1.0, 2.0, 4.0]
    """
    _require_classes(largest, classes)
    if not 0 < ratio < 1:
        raise ValidityError(f"classes: expected a ratio between 0 and 1, got {ratio}")
    return np.asarray(largest * ratio ** np.arange(classes, -1, -1.0))


def section_matrix(edges: ArrayLike) -> NDArray[np.float64]:
    r"""Return the circles per area of each class that spheres of each class give.

    .. math:: N_A(i) = \sum_j M_{ij} N_V(j), \quad
        M_{ij} = \sqrt{D_j^2 - D_{i-1}^2} - \sqrt{D_j^2 - D_i^2}, \quad i \le j

    with the class edges D_0 < D_1 < ..., each sphere as large as the upper edge of its class.

    Parameters
    ----------
    edges : array_like of float, shape (n + 1,)
        Edges of classes of diameters, rising, >= 0 [m].

    Returns
    -------
    matrix : ndarray of float64, shape (n, n)
        M [m], upper triangular.

    Raises
    ------
    ValidityError
        If the edges do not rise from 0 or above.

    References
    ----------
    .. [1] S. D. Wicksell, Biometrika 17 (1925) 84; H. A. Schwartz, Metals and Alloys 5 (1934) 139;
       S. A. Saltykov, "Stereometric metallography", 1958. (memory)

    Examples
    --------
    Two classes of width 1: spheres of diameter 2 are cut in circles of up to 1 over a height of
    2 - sqrt(3) = 0.26795, in larger ones over sqrt(3).

    >>> section_matrix([0.0, 1.0, 2.0]).round(5).tolist()
    [[1.0, 0.26795], [0.0, 1.73205]]
    """
    edge = np.asarray(edges, dtype=np.float64)
    if edge.ndim != 1 or len(edge) < 2 or not (edge[0] >= 0 and (np.diff(edge) > 0).all()):
        raise ValidityError("classes: expected edges that rise from 0 m or above")
    heights = np.sqrt(np.maximum(edge[None, 1:] ** 2 - edge[:, None] ** 2, 0.0))
    return np.asarray(heights[:-1] - heights[1:])


def unfold_spheres(
    diameters: ArrayLike,
    *,
    edges: ArrayLike,
    area: float | None = None,
    weights: ArrayLike | None = None,
) -> Unfolding:
    """Return the spheres per volume behind the circles of a section, after Schwartz and Saltykov.

    Parameters
    ----------
    diameters : array_like of float, shape (n,)
        Diameters of the circles [m].
    edges : array_like of float, shape (m + 1,)
        Class edges, `linear_edges` or `logarithmic_edges` [m]; the last one is the diameter of the
        largest sphere.
    area : float, optional
        Area of the section on which they were counted [m2], > 0.
    weights : array_like of float, shape (n,), optional
        Instead of the area: how many circles per area each one stands for [m-2], as an edge rule
        has it; all equal to 1/area where all count alike.

    Returns
    -------
    unfolding : Unfolding
        Numbers per volume with their errors.

    Raises
    ------
    ValidityError
        If the edges do not rise, a circle is larger than the largest class, the area is not above
        0, or not just one of area and weights is given.

    Notes
    -----
    Only for spheres. The unfolding is ill-conditioned: the small classes are differences of large
    numbers, and their errors grow with the number of classes. Its condition number and the errors
    from the counts (Poisson) stand with the result, and nothing is smoothed or cut off at 0.
    As each class stands for its upper edge, spheres within it give fewer circles than reckoned
    with: their number comes out low by up to the ratio of the edges.

    Examples
    --------
    Spheres of diameter 2 at 1 per volume give 2 circles per area, 2 - sqrt(3) of them up to 1.
    On an area of 1000 those are 268 and 1732; back again: 1732/1.73205 = 999.97 per 1000.

    >>> found = unfold_spheres([0.5] * 268 + [1.5] * 1732, area=1000.0, edges=[0.0, 1.0, 2.0])
    >>> found.per_volume.round(3).tolist()
    [0.0, 1.0]
    """
    if (area is None) == (weights is None):
        raise ValidityError("unfolding: expected either the area of the section or weights")
    matrix = section_matrix(edges)
    edge = np.asarray(edges, dtype=np.float64)
    circle = np.asarray(diameters, dtype=np.float64)
    if area is not None:
        _require_area(area)
        weights = np.full(circle.shape, 1.0 / area)
    weight = np.asarray(weights, dtype=np.float64)
    if circle.size and not circle.max() <= edge[-1] * (1.0 + 1e-12):
        raise ValidityError(
            f"unfolding: a circle of {circle.max():.6g} m is larger than the largest class, "
            f"{edge[-1]:.6g} m"
        )
    inside = np.minimum(circle, edge[-1])
    per_area = np.histogram(inside, edge, weights=weight)[0]
    variance = np.histogram(inside, edge, weights=weight**2)[0]
    inverse = np.linalg.inv(matrix)
    return Unfolding(
        edges=edge,
        per_area=per_area,
        per_volume=inverse @ per_area,
        error=np.sqrt(inverse**2 @ variance),
        condition=float(np.linalg.cond(matrix)),
    )


def sphere_mean_diameter(diameters: ArrayLike) -> float:
    r"""Return the mean diameter of spheres from the circles of a section.

    .. math:: \bar D = \frac{\pi}{2} \left(\overline{1/d}\right)^{-1}

    Parameters
    ----------
    diameters : array_like of float, shape (n,)
        Diameters d of the circles, > 0 [m].

    Returns
    -------
    mean : float
        Number mean of the diameters of the spheres [m], whatever their distribution.

    Raises
    ------
    ValidityError
        If there is no circle, or a diameter is not above 0.

    Notes
    -----
    Small circles weigh most: each one that is lost makes the mean too large, and the scatter of
    1/d has no finite variance.

    Examples
    --------
    1/d of 1 and 1/2, mean 3/4: pi/2 * 4/3 = 2.0944.

    >>> round(sphere_mean_diameter([1.0, 2.0]), 4)
    2.0944
    """
    circle = np.asarray(diameters, dtype=np.float64)
    if not circle.size or not (np.isfinite(circle) & (circle > 0)).all():
        raise ValidityError("spheres: expected at least one circle, all of diameters above 0 m")
    return math.pi / 2.0 / float(np.mean(1.0 / circle))


def sphere_number_density(diameters: ArrayLike, *, area: float) -> float:
    r"""Return the number of spheres per volume, N_V = N_A / (mean diameter).

    Parameters
    ----------
    diameters : array_like of float, shape (n,)
        Diameters of the circles, > 0 [m].
    area : float
        Area of the section [m2], > 0.

    Returns
    -------
    number_density : float
        Spheres per volume [m-3].

    Raises
    ------
    ValidityError
        If there is no circle, a diameter or the area is not above 0.

    Examples
    --------
    2 circles on 1 m2, mean diameter 2.0944 m as above: 0.9549 per m3.

    >>> round(sphere_number_density([1.0, 2.0], area=1.0), 4)
    0.9549
    """
    _require_area(area)
    return np.size(diameters) / area / sphere_mean_diameter(diameters)


def surface_from_intercept(mean_intercept: Statistic) -> Statistic:
    """Return the area of boundary per volume, S_V = 2/l, of a body filled with grains.

    Parameters
    ----------
    mean_intercept : Statistic
        Mean intercept l along lines in a section [m].

    Returns
    -------
    surface_density : Statistic
        S_V [m-1]; for any shape of grains, if the section and the lines are without preference.

    Examples
    --------
    >>> surface_from_intercept(Statistic(value=2.0, low=1.0, high=4.0))
    Statistic(value=1.0, low=0.5, high=2.0)
    """
    return _through(mean_intercept, lambda length: 2.0 / length)


def space_from_count(per_area: Statistic, structure: Structure) -> SpaceEstimate:
    r"""Return what the number of pieces per area of a section tells of the body.

    .. math:: N_V = (N_A/c)^{3/2}, \quad c = L_V/4 \text{ at } N_V = 1

    c is 1.457965 for Voronoi and 1.226196 for Johnson-Mehl structures, where a spherulite that the
    plane cuts twice counts twice.

    Parameters
    ----------
    per_area : Statistic
        Pieces per area N_A [m-2].
    structure : {"voronoi", "johnson-mehl"}
        All nuclei at once, or at a constant rate, both without preference for places.

    Returns
    -------
    estimate : SpaceEstimate
        Numbers and sizes in the body.

    Raises
    ------
    UnknownNameError
        If the structure is not one of the two.
    ValidityError
        If the count is not above 0.

    Notes
    -----
    Sections show many slivers; those that a detection floor hides make the body look coarser by
    3/2 of their share. `space_from_intercept` hardly sees them.

    References
    ----------
    .. [1] J. L. Meijering, Philips Res. Rep. 8 (1953) 270: c and S_V of both. (memory; checked by
       quadrature and with exact cells)

    Examples
    --------
    1.457965 per area is 1 per volume in a Voronoi structure:

    >>> estimate = space_from_count(Statistic(value=1.457965), "voronoi")
    >>> round(estimate.number_density.value, 5), round(estimate.mean_diameter.value, 4)
    (1.0, 1.2156)
    """
    _require_structure(structure)
    _require_value("a count per area", "m-2", per_area.value)
    return _estimate(_through(per_area, lambda n: (n / _COUNT[structure]) ** 1.5), structure)


def space_from_intercept(mean_intercept: Statistic, structure: Structure) -> SpaceEstimate:
    r"""Return what the mean intercept along lines in a section tells of the body.

    .. math:: N_V = \left(\frac{2}{s\,l}\right)^3, \quad s = S_V \text{ at } N_V = 1

    s is 2.910436 for Voronoi and 2.571676 for Johnson-Mehl structures.

    Parameters
    ----------
    mean_intercept : Statistic
        Mean intercept l [m].
    structure : {"voronoi", "johnson-mehl"}
        All nuclei at once, or at a constant rate, both without preference for places.

    Returns
    -------
    estimate : SpaceEstimate
        Numbers and sizes in the body.

    Raises
    ------
    UnknownNameError
        If the structure is not one of the two.
    ValidityError
        If the intercept is not above 0.

    Examples
    --------
    The mean intercept of a Voronoi structure of 1 per volume is 2/2.910436 = 0.687182:

    >>> estimate = space_from_intercept(Statistic(value=0.687182), "voronoi")
    >>> round(estimate.number_density.value, 5), round(estimate.surface_density.value, 4)
    (1.0, 2.9104)
    """
    _require_structure(structure)
    _require_value("a mean intercept", "m", mean_intercept.value)
    surface = _SURFACE[structure]
    return _estimate(_through(mean_intercept, lambda x: (2.0 / (surface * x)) ** 3), structure)


def _estimate(number_density: Statistic, structure: Structure) -> SpaceEstimate:
    return SpaceEstimate(
        structure=structure,
        number_density=number_density,
        mean_volume=_through(number_density, lambda n: 1.0 / n),
        mean_diameter=_through(number_density, lambda n: _DIAMETER[structure] * n ** (-1 / 3)),
        surface_density=_through(number_density, lambda n: _SURFACE[structure] * n ** (1 / 3)),
    )


def _through(statistic: Statistic, function: Callable[[float], float]) -> Statistic:
    """Return a monotonous function of a statistic above 0; nan where that is not."""
    value, *ends = (
        function(x) if x > 0 else math.nan for x in (statistic.value, statistic.low, statistic.high)
    )
    low, high = sorted(ends) if not any(map(math.isnan, ends)) else ends
    return Statistic(value=value, low=low, high=high)


def _require_structure(structure: str) -> None:
    if structure not in get_args(Structure):
        raise UnknownNameError("structure", structure, get_args(Structure))


def _require_value(what: str, unit: str, value: float) -> None:
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"section: expected {what} above 0 {unit}, got {value}")


def _require_area(area: float) -> None:
    if not (math.isfinite(area) and area > 0):
        raise ValidityError(f"section: expected an area above 0 m2, got {area}")


def _require_classes(largest: float, classes: int) -> None:
    if not (math.isfinite(largest) and largest > 0):
        raise ValidityError(f"classes: expected a largest diameter above 0 m, got {largest}")
    if classes < 1:
        raise ValidityError(f"classes: expected at least one class, got {classes}")
