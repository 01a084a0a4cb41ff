"""Conversion, counts and boundaries of any crystallisation, by mean field.

Kolmogorov's model: nuclei at random places, one growth rate at a time everywhere, no edge. Where
the rate changes in time only, everything follows from how many nuclei are born by each grown
length. No random number, no time, no temperature: `spheru.thermal.clock` leads to both.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

import numpy as np

from spheru.errors import ValidityError
from spheru.quadrature import GAUSS_POINTS, GAUSS_WEIGHTS, distinct, weighted_sum
from spheru.theory.moments import Moments

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = ["MeanField", "mean_field"]

_SHAPE = {2: math.pi, 3: 4 * math.pi / 3}  # measure of the disc and the ball of radius 1
_STEP = 0.1  # longest step of the extended fraction that one quadrature interval spans
_OVER = 40.0  # extended fraction beyond which nothing is left (exp(-40) = 4e-18)
_RESOLUTION = 1e-6  # of the mean grown length at arrival: finer births change nothing
_SPLIT = 100  # most pieces into which one pass cuts an interval for its births


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class MeanField:
    """What the mean field says of a crystallisation; densities are per volume (D = 3) or area.

    A history that ends early leaves `fraction_final` below 1; counts and boundaries are then
    those that exist by its end.

    Attributes
    ----------
    dimension : {2, 3}
        Number of directions in which crystals grow, D.
    grown_length : ndarray of float64, shape (n,)
        Nodes [m].
    density : ndarray of float64, shape (n,)
        Nuclei born by each node, also those inside grown crystals [m^-D].
    extended : ndarray of float64, shape (n,)
        Extended fraction: what the crystals would fill if they could overlap [-].
    extended_slope : ndarray of float64, shape (n,)
        Its derivative by grown length [1/m].
    fraction : ndarray of float64, shape (n,)
        Transformed fraction [-].
    survivors : ndarray of float64, shape (n,)
        Nuclei born outside grown crystals by each node [m^-D].
    survivors_to_come : ndarray of float64, shape (n,)
        Those still to be born after each node [m^-D].
    boundary_density : float
        Boundary between crystals: length per area [1/m] (D = 2), area per volume [1/m] (D = 3).
    triple_line_density : float or None
        Length per volume of the lines at which three crystals meet [m^-2]; D = 3 only.
    survival : ndarray of float64, shape (n - 1,)
        Mean untransformed fraction over each interval of grown length [-].
    """

    dimension: Literal[2, 3]
    grown_length: NDArray[np.float64]
    density: NDArray[np.float64]
    extended: NDArray[np.float64]
    extended_slope: NDArray[np.float64]
    fraction: NDArray[np.float64]
    survivors: NDArray[np.float64]
    survivors_to_come: NDArray[np.float64]
    boundary_density: float
    triple_line_density: float | None
    survival: NDArray[np.float64]
    _moments: Moments = field(repr=False)

    @property
    def number_density(self) -> float:
        """Crystals that grew in the end [m^-D]."""
        return float(self.survivors[-1])

    @property
    def section_count(self) -> float | None:
        """Pieces that a plane section shows per area [m^-2]; D = 3 only.

        A quarter of the triple-line density: a section has half that many triple points per
        area, and by Euler's formula twice as many triple points as pieces.
        """
        return None if self.triple_line_density is None else self.triple_line_density / 4

    @property
    def fraction_final(self) -> float:
        """Transformed fraction at the end [-]."""
        return float(self.fraction[-1])

    @property
    def mean_arrival(self) -> float:
        """Mean grown length at which what is transformed in the end was reached [m]."""
        return self.average(self.grown_length)

    def average(self, values: ArrayLike) -> float:
        """Return the mean of a quantity over the material transformed in the end.

        Parameters
        ----------
        values : array_like of float, shape (n,)
            The quantity at the nodes, such as time or temperature; linear in between.

        Returns
        -------
        mean : float
            Its mean at the moments of transformation, in its own unit; nan where nothing was
            transformed. Of the time it is the mean crystallisation time.
        """
        given = np.asarray(values, dtype=np.float64)
        if given.shape != self.grown_length.shape:
            raise ValidityError(
                f"mean field: expected {self.grown_length.size} values, got shape {given.shape}"
            )
        if self.fraction_final == 0:
            return math.nan
        # integral of values d(fraction), by parts
        left = given[-1] * math.exp(-self.extended[-1])
        whole = given[0] + float(weighted_sum(np.diff(given), self.survival)) - left
        return float(whole / self.fraction_final)

    def shares(self, density: ArrayLike) -> float:
        """Return how many crystals of one population grew in the end.

        Parameters
        ----------
        density : array_like of float, shape (n,)
            Nuclei of this population born by each node [m^-D]; populations add up to `density`.

        Returns
        -------
        number : float
            Crystals of this population [m^-D].
        """
        own = np.asarray(density, dtype=np.float64)
        if own.shape != self.density.shape:
            raise ValidityError(
                f"mean field: expected {self.density.size} densities, got shape {own.shape}"
            )
        return float(own[0] + weighted_sum(np.diff(own), self.survival))

    def grown_length_at(self, fraction: ArrayLike) -> NDArray[np.float64]:
        """Return the grown length at which a fraction is transformed.

        Parameters
        ----------
        fraction : array_like of float, shape (...)
            Fractions [-], >= 0 and < 1.

        Returns
        -------
        grown_length : ndarray of float64, shape (...)
            Grown lengths [m]; inf for a fraction that is never reached.

        Raises
        ------
        ValidityError
            If a fraction is out of range.
        """
        goal = np.asarray(fraction, dtype=np.float64)
        if goal.size and not (goal.min() >= 0 and goal.max() < 1):
            raise ValidityError("mean field: expected fractions >= 0 and < 1")
        level = -np.log1p(-goal.ravel())
        lengths = np.full(level.shape, np.inf)
        lengths[level <= 0] = self.grown_length[0]
        inside = (level > 0) & (level <= self.extended[-1])
        k = np.searchsorted(self.extended, level[inside], side="left") - 1
        lengths[inside] = self.grown_length[k] + _reach(self._moments, k, level[inside])
        return lengths.reshape(goal.shape)

    def refinement(self, tolerance: float = 1e-3) -> NDArray[np.float64]:
        """Return grown lengths at which more nodes are wanted.

        Nodes are wanted where the fraction changes by more than the tolerance between two
        neighbours, or more than that share of all crystals is born between them (unless they
        stand so close that it makes no difference). Between nodes the fraction is known, so that
        its steps are found at once; births known at the nodes only are closed in on in passes.

        Parameters
        ----------
        tolerance : float
            Longest step wanted [-], > 0.

        Returns
        -------
        grown_length : ndarray of float64, shape (m,)
            Where to put nodes [m], rising; empty when the nodes suffice.

        Raises
        ------
        ValidityError
            If the tolerance is not above 0.

        Examples
        --------
        A long hold given by its two ends; ten steps of 0.1 bring nodes where they matter:

        >>> field = mean_field([0.0, 1e3], [1.0, 1.0], dimension=3)
        >>> field.refinement(0.1).round(3).tolist()
        [0.293, 0.376, 0.44, 0.496, 0.549, 0.603, 0.66, 0.727, 0.819]
        """
        if not (math.isfinite(tolerance) and tolerance > 0):
            raise ValidityError(f"mean field: expected a tolerance above 0, got {tolerance:g}")
        if self.fraction_final == 0:
            return np.empty(0)
        steps = np.diff(self.grown_length)
        wide = steps > _RESOLUTION * self.mean_arrival
        gain = np.diff(self.fraction)
        born = np.diff(self.survivors) / self.number_density
        slack = 1.5 * tolerance
        k, part = _pieces(np.where(wide & (gain > slack), np.ceil(gain / tolerance), 1))
        level = -np.log1p(-(self.fraction[k] + part * gain[k]))
        by_fraction = self.grown_length[k] + _reach(self._moments, k, level)
        count = np.where(wide & (born > slack), np.ceil(born / tolerance), 1)
        k, part = _pieces(np.minimum(count, _SPLIT))
        by_births = self.grown_length[k] + part * steps[k]
        return distinct(by_fraction, by_births)


def mean_field(
    grown_length: ArrayLike, density: ArrayLike, *, dimension: Literal[2, 3]
) -> MeanField:
    r"""Return conversion, counts and boundaries for nuclei born over grown length.

    With N the nuclei born by the grown length s, Lambda the extended fraction and
    Lambda' its derivative,

    .. math::
        \Lambda = \frac{4\pi}{3}\int(\tau-s)^3 dN \;(3D), \quad \pi\int(\tau-s)^2 dN \;(2D),
        \quad \alpha = 1 - e^{-\Lambda}

        n = N(0) + \int e^{-\Lambda} dN, \quad
        L_A = \frac{2}{\pi}\int\Lambda'^2 e^{-\Lambda} d\tau, \quad
        S_V = \frac{2}{3}\int\Lambda'^2 e^{-\Lambda} d\tau, \quad
        L_V = \frac{\pi}{15}\int\Lambda'^3 e^{-\Lambda} d\tau

    Parameters
    ----------
    grown_length : array_like of float, shape (n,)
        Nodes [m], n >= 2; never falling. Equal neighbours with different densities are a jump.
    density : array_like of float, shape (n,)
        Nuclei born by each node [m^-D], whether or not inside grown crystals; never falling and
        linear in grown length between nodes. The first value is there from the start.
    dimension : {2, 3}
        Number of directions in which crystals grow, D.

    Returns
    -------
    field : MeanField
        The mean field.

    Raises
    ------
    ValidityError
        If shapes differ, a value is not finite or falls, or the dimension is neither 2 nor 3.

    Notes
    -----
    Exact for the density as it is given between nodes: moments of the radii are polynomials, and
    intervals are cut for the quadrature until the extended fraction rises by less than 0.1 in
    each. What is left is the error of taking the density as linear: of second order in the
    distance of the nodes.

    References
    ----------
    .. [1] A. N. Kolmogorov, Izv. Akad. Nauk SSSR Ser. Mat. 3 (1937) 355. (memory)
    .. [2] W. Schneider, A. Koeppl, J. Berger, Int. Polym. Process. 2 (1988) 151: the same as rate
       equations. (memory)
    .. [3] E. Piorkowska, A. Galeski, Polymer 35 (1994): boundaries of spherulites. (abstract seen;
       the factors 2/pi, 2/3 and pi/15 were derived from capture rates)

    Examples
    --------
    One nucleus per unit area from the start makes Poisson-Voronoi cells, of boundary density 2;
    half is transformed at sqrt(ln 2 / pi) = sqrt(0.693147 / 3.141593) = 0.469719:

    >>> field = mean_field([0.0, 10.0], [1.0, 1.0], dimension=2)
    >>> round(field.boundary_density, 6), round(float(field.grown_length_at(0.5)), 6)
    (2.0, 0.469719)
    """
    if dimension not in _SHAPE:
        raise ValidityError(f"mean field: expected dimension 2 or 3, got {dimension}")
    moments = Moments(
        grown_length=np.asarray(grown_length, dtype=np.float64),
        density=np.asarray(density, dtype=np.float64),
        order=dimension,
    )
    length, born = moments.grown_length, moments.density
    shape = _SHAPE[dimension]
    extended = shape * moments.nodes[dimension]

    k, begin, step = _quadrature(moments, extended)
    at = begin[:, None] + step[:, None] * GAUSS_POINTS
    inside = np.exp(-shape * moments.within(k[:, None], at, dimension))
    slope = shape * dimension * moments.within(k[:, None], at, dimension - 1)
    steps = np.diff(length)
    share = np.divide(step, steps[k], out=np.ones_like(step), where=steps[k] > 0)
    survival = np.zeros(steps.size)
    np.add.at(survival, k, share * weighted_sum(inside, GAUSS_WEIGHTS))

    fresh = np.diff(born) * survival
    pairs = float(weighted_sum(step, weighted_sum(slope**2 * inside, GAUSS_WEIGHTS)))
    triples = float(weighted_sum(step, weighted_sum(slope**3 * inside, GAUSS_WEIGHTS)))
    return MeanField(
        dimension=dimension,
        grown_length=length,
        density=born,
        extended=extended,
        extended_slope=shape * dimension * moments.nodes[dimension - 1],
        fraction=-np.expm1(-extended),
        survivors=born[0] + np.concatenate(([0.0], np.cumsum(fresh))),
        survivors_to_come=np.concatenate((np.cumsum(fresh[::-1])[::-1], [0.0])),
        boundary_density=pairs * (2 / 3 if dimension == 3 else 2 / math.pi),
        triple_line_density=triples * math.pi / 15 if dimension == 3 else None,
        survival=survival,
        _moments=moments,
    )


def _quadrature(
    moments: Moments, extended: NDArray[np.float64]
) -> tuple[NDArray[np.intp], NDArray[np.float64], NDArray[np.float64]]:
    """Cut the intervals where the extended fraction rises too much.

    Return the interval of every piece, its beginning from the node, and its length [m].
    """
    rise = np.minimum(extended[1:], _OVER) - np.minimum(extended[:-1], _OVER)
    finished = (extended[1:] > _OVER) & (rise > 0)
    count = np.maximum(np.ceil(rise / _STEP), 1)
    k, part = _pieces(count + finished)
    # the last cut of an interval that leads beyond the end stands at the end
    part *= ((count + finished) / count)[k]
    level = np.minimum(extended[k] + part * rise[k], _OVER)
    cut = _reach(moments, k, level)
    whole = np.arange(rise.size)
    interval = np.concatenate((whole, k))
    begin = np.concatenate((np.zeros(rise.size), cut))
    order = np.lexsort((begin, interval))
    interval, begin = interval[order], begin[order]
    end = np.append(begin[1:], 0.0)
    last = np.append(interval[1:] != interval[:-1], [True])
    end[last] = np.diff(moments.grown_length)
    return interval, begin, end - begin


def _pieces(count: NDArray[np.float64]) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
    """Return the inner cuts of intervals into equal pieces: interval and share of it."""
    cuts = count.astype(np.intp) - 1
    k = np.repeat(np.arange(cuts.size), cuts)
    number = np.arange(k.size) - np.repeat(np.cumsum(cuts) - cuts, cuts) + 1
    return k, number / count[k]


def _reach(
    moments: Moments, interval: NDArray[np.intp], level: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return where, from the node, the extended fraction reaches a level: bisection [m]."""
    shape = _SHAPE[moments.order]
    low = np.zeros(level.shape)
    high = np.diff(moments.grown_length)[interval]
    for _ in range(64):
        middle = (low + high) / 2
        short = shape * moments.within(interval, middle, moments.order) < level
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return (low + high) / 2
