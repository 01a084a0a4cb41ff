"""Statistics of random tessellations: Poisson-Voronoi and Johnson-Mehl.

What the structure looks like when all nuclei start at once, or at a constant rate and growth
rate. Exact values where there are any; no random number, no pixel.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from spheru.errors import ValidityError

__all__ = ["Tessellation", "johnson_mehl", "poisson_voronoi", "poisson_voronoi_section"]


# (2/3) int (4 pi r^2)^2 exp(-4 pi r^3/3) dr and (pi/15) int (4 pi r^2)^3 exp(-4 pi r^3/3) dr
_VORONOI_SURFACE = 2 / 3 * 4 * math.pi * (3 / (4 * math.pi)) ** (2 / 3) * math.gamma(5 / 3)
_VORONOI_LINES = (
    math.pi / 15 * (4 * math.pi) ** 2 * (3 / (4 * math.pi)) ** (4 / 3) * math.gamma(7 / 3)
)
# the same integrals for constant rates: Lambda = pi r^3/3 (D = 2) and pi r^4/3 (D = 3)
_SPORADIC = math.pi / 3
_SPORADIC_LENGTH = 2 * math.pi / 3 * _SPORADIC ** (-5 / 3) * math.gamma(5 / 3)
_SPORADIC_SURFACE = 2 / 3 * 16 * math.pi**2 / 9 / 4 * _SPORADIC ** (-7 / 4) * math.gamma(7 / 4)
_SPORADIC_LINES = (
    math.pi / 15 * (4 * math.pi / 3) ** 3 / 4 * _SPORADIC ** (-5 / 2) * math.gamma(5 / 2)
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Tessellation:
    """Mean values of a random tessellation of a plane or of space.

    Attributes
    ----------
    dimension : {2, 3}
        Number of directions in which the cells extend, D.
    number_density : float
        Cells per measure [m^-D].
    boundary_density : float
        Length of boundary per area [1/m] (D = 2), area per volume [1/m] (D = 3).
    size_variation : float or None
        Square of the coefficient of variation of the cell size [-].
    triple_line_density : float or None
        Length per volume of the lines where three cells meet [m^-2]; D = 3 only.
    mean_neighbours : float or None
        Mean number of neighbours (faces) of a cell [-].
    mean_diameter : float or None
        Number mean of the diameter of the circle or sphere as large as the cell [m].
    diameter_sd : float or None
        Standard deviation of that diameter [m].
    """

    dimension: Literal[2, 3]
    number_density: float
    boundary_density: float
    size_variation: float | None = None
    triple_line_density: float | None = None
    mean_neighbours: float | None = None
    mean_diameter: float | None = None
    diameter_sd: float | None = None

    @property
    def mean_size(self) -> float:
        """Mean area [m2] or volume [m3] of a cell."""
        return 1 / self.number_density

    @property
    def size_weighted_mean_size(self) -> float | None:
        """Mean size of the cell to which a random point belongs [m^D]."""
        return None if self.size_variation is None else (1 + self.size_variation) * self.mean_size

    @property
    def mean_boundary(self) -> float:
        """Mean perimeter [m] or surface [m2] of a cell; every boundary belongs to two."""
        return 2 * self.boundary_density / self.number_density

    @property
    def mean_chord(self) -> float:
        """Mean length that a random line cuts out of a cell [m]: pi/(2 L_A) or 2/S_V."""
        return (math.pi / 2 if self.dimension == 2 else 2.0) / self.boundary_density

    @property
    def section_count(self) -> float | None:
        """Pieces per area of a plane section [m^-2], a quarter of the triple-line density."""
        return None if self.triple_line_density is None else self.triple_line_density / 4


def _require_positive(what: str, unit: str, value: float) -> None:
    if not (math.isfinite(value) and value > 0):
        raise ValidityError(f"tessellation: expected {what} above 0 {unit}, got {value:g} {unit}")


def poisson_voronoi(density: float, *, dimension: Literal[2, 3]) -> Tessellation:
    r"""Return the cells of nuclei that all start at once at random places.

    .. math::
        L_A = 2 \lambda^{1/2}, \quad
        S_V = \tfrac{2}{3} (36\pi)^{1/3} \Gamma(\tfrac{5}{3}) \lambda^{1/3}, \quad
        L_V = \frac{\pi}{15} (4\pi)^2 \left(\frac{3}{4\pi}\right)^{4/3}
        \Gamma(\tfrac{7}{3}) \lambda^{2/3}

    Parameters
    ----------
    density : float
        Nuclei per area or volume [m^-D], > 0.
    dimension : {2, 3}
        D.

    Returns
    -------
    cells : Tessellation
        The mean values.

    Raises
    ------
    ValidityError
        If the density is not above 0, or the dimension neither 2 nor 3.

    References
    ----------
    .. [1] J. L. Meijering, Philips Res. Rep. 8 (1953) 270: boundaries, neighbours. (memory)
    .. [2] E. N. Gilbert, Ann. Math. Stat. 33 (1962) 958: variances. (memory; checked by
       quadrature: 0.280176 and 0.179032)
    .. [3] Diameters: own count of Voronoi cells, 1.0893 and 1.21557 to 1e-4. (computed)

    Examples
    --------
    4 nuclei per unit area: L_A = 2 sqrt(4) = 4, mean perimeter 2 * 4 / 4 = 2:

    >>> cells = poisson_voronoi(4.0, dimension=2)
    >>> cells.boundary_density, cells.mean_boundary
    (4.0, 2.0)
    """
    _require_positive("a density", f"m^-{dimension}", density)
    scale = density ** (-1 / dimension) if dimension in (2, 3) else math.nan
    if dimension == 2:
        return Tessellation(
            dimension=2,
            number_density=density,
            boundary_density=2 / scale,
            size_variation=0.280176,
            mean_neighbours=6.0,
            mean_diameter=1.0893 * scale,
            diameter_sd=0.2944 * scale,
        )
    if dimension == 3:
        return Tessellation(
            dimension=3,
            number_density=density,
            boundary_density=_VORONOI_SURFACE / scale,
            size_variation=0.179032,
            triple_line_density=_VORONOI_LINES / scale**2,
            mean_neighbours=48 * math.pi**2 / 35 + 2,
            mean_diameter=1.21557 * scale,
            diameter_sd=0.1768 * scale,
        )
    raise ValidityError(f"tessellation: expected dimension 2 or 3, got {dimension}")


def poisson_voronoi_section(density: float) -> Tessellation:
    """Return the pieces that a plane section shows of three-dimensional Voronoi cells.

    Parameters
    ----------
    density : float
        Nuclei per volume [m^-3], > 0.

    Returns
    -------
    pieces : Tessellation
        The mean values in the plane.

    Raises
    ------
    ValidityError
        If the density is not above 0.

    Notes
    -----
    Slivers make the areas far more unequal than those of plane Voronoi cells. The mean
    diameter, 0.8569 +- 0.0007, was counted on sections of Voronoi cells (computed).

    Examples
    --------
    1.458 pieces per unit area, each of 1/1.458 = 0.6859:

    >>> pieces = poisson_voronoi_section(1.0)
    >>> round(pieces.number_density, 6), round(pieces.mean_size, 4)
    (1.457965, 0.6859)
    """
    cells = poisson_voronoi(density, dimension=3)
    return Tessellation(
        dimension=2,
        number_density=_VORONOI_LINES / 4 * density ** (2 / 3),
        boundary_density=math.pi / 4 * cells.boundary_density,
        mean_neighbours=6.0,
        mean_diameter=0.8569 * density ** (-1 / 3),
    )


def johnson_mehl(rate: float, growth_rate: float, *, dimension: Literal[2, 3]) -> Tessellation:
    r"""Return the cells of nuclei born at a constant rate and growing at a constant rate.

    .. math::
        N = \Gamma(\tfrac{4}{3}) (3/\pi)^{1/3} (I/G)^{2/3}, \quad
        L_A = \tfrac{2\pi}{3} (\pi/3)^{-5/3} \Gamma(\tfrac{5}{3}) (I/G)^{1/3} \quad (D = 2)

        N = \Gamma(\tfrac{5}{4}) (3/\pi)^{1/4} (I/G)^{3/4}, \quad
        S_V = \tfrac{8\pi^2}{27} (\pi/3)^{-7/4} \Gamma(\tfrac{7}{4}) (I/G)^{1/4} \quad (D = 3)

    Parameters
    ----------
    rate : float
        Nucleation rate in untransformed material, I [m^-D s^-1], > 0.
    growth_rate : float
        Growth rate, G [m/s], > 0.
    dimension : {2, 3}
        D.

    Returns
    -------
    cells : Tessellation
        The mean values.

    Raises
    ------
    ValidityError
        If a rate is not above 0, or the dimension neither 2 nor 3.

    References
    ----------
    .. [1] W. A. Johnson, R. F. Mehl, Trans. AIME 135 (1939) 416. (memory)
    .. [2] J. L. Meijering, Philips Res. Rep. 8 (1953) 270. (memory; integrals done anew, the
       variation of volume 1.136265 by quadrature)

    Examples
    --------
    D = 3, I = G = 1: Gamma(5/4) (3/pi)^(1/4) = 0.906403 * 0.988537 = 0.896012:

    >>> round(johnson_mehl(1.0, 1.0, dimension=3).number_density, 6)
    0.896012
    """
    _require_positive("a nucleation rate", f"m^-{dimension} s^-1", rate)
    _require_positive("a growth rate", "m/s", growth_rate)
    scale = (growth_rate / rate) ** (1 / (dimension + 1))
    if dimension == 2:
        return Tessellation(
            dimension=2,
            number_density=math.gamma(4 / 3) * _SPORADIC ** (-1 / 3) / scale**2,
            boundary_density=_SPORADIC_LENGTH / scale,
            mean_neighbours=6.0,
        )
    if dimension == 3:
        return Tessellation(
            dimension=3,
            number_density=math.gamma(5 / 4) * _SPORADIC ** (-1 / 4) / scale**3,
            boundary_density=_SPORADIC_SURFACE / scale,
            size_variation=1.136265,
            triple_line_density=_SPORADIC_LINES / scale**2,
        )
    raise ValidityError(f"tessellation: expected dimension 2 or 3, got {dimension}")
