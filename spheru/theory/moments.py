"""Moments of the radii that nuclei would have, were nothing in their way.

Exact polynomials between nodes; no probability, no time.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["Moments"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Moments:
    r"""Moments of the radii of all nuclei born so far.

    .. math:: M_k(\tau) = \int_{s \le \tau} (\tau - s)^k \, dN(s)

    N is the number of nuclei per volume (or area) born by the grown length s, taken as linear
    between nodes. Every M_k is then a polynomial between nodes and summed without error of
    integration; all terms are positive, so none cancel.

    Attributes
    ----------
    grown_length : ndarray of float64, shape (n,)
        Nodes [m], n >= 2; they never fall, and equal neighbours make a jump of N.
    density : ndarray of float64, shape (n,)
        Cumulative number N [m^-D], >= 0; it never falls. Its first value is there from the start.
    order : int
        Highest moment wanted, >= 1.
    nodes : tuple of ndarray of float64, shape (n,)
        M_0 (the density), M_1 ... at the nodes [m^(k - D)].

    Raises
    ------
    ValidityError
        If shapes differ, a value is not finite, or one falls.

    Examples
    --------
    3 nuclei from the start, 2 more evenly over 2 um: at the end
    M_2 = 3 * 2^2 + (2/2) * 2^3 / 3 = 12 + 8/3:

    >>> moments = Moments(grown_length=[0.0, 2.0], density=[3.0, 5.0], order=2)
    >>> round(float(moments.nodes[2][-1]), 6)
    14.666667

    Halfway: M_2 = 3 * 1 + (2/2) * 1 / 3:

    >>> interval, length = moments.locate(np.array([1.0]))
    >>> moments.within(interval, length, 2).round(6).tolist()
    [3.333333]
    """

    grown_length: NDArray[np.float64]
    density: NDArray[np.float64]
    order: int
    nodes: tuple[NDArray[np.float64], ...] = field(init=False, repr=False)
    _births: NDArray[np.float64] = field(init=False, repr=False)  # dN/dtau in the intervals

    def __post_init__(self) -> None:
        length = np.array(self.grown_length, dtype=np.float64)
        density = np.array(self.density, dtype=np.float64)
        if length.ndim != 1 or length.shape != density.shape or length.size < 2:
            raise ValidityError(
                "mean field: expected as many densities as grown lengths, at least 2, got shapes "
                f"{length.shape} and {density.shape}"
            )
        for name, values in (("grown lengths [m]", length), ("densities", density)):
            if not (np.isfinite(values).all() and values[0] >= 0 and (np.diff(values) >= 0).all()):
                raise ValidityError(
                    f"mean field: expected {name} that are finite, >= 0 and never fall"
                )
        steps = np.diff(length)
        births = np.divide(np.diff(density), steps, out=np.zeros_like(steps), where=steps > 0)
        nodes = [density]
        for k in range(1, self.order + 1):
            growth = _polynomial(k, steps, [m[:-1] for m in nodes], births)
            nodes.append(np.concatenate(([0.0], np.cumsum(growth))))
        for array in (length, births, *nodes):
            array.setflags(write=False)
        object.__setattr__(self, "grown_length", length)
        object.__setattr__(self, "density", density)
        object.__setattr__(self, "nodes", tuple(nodes))
        object.__setattr__(self, "_births", births)

    def within(
        self, interval: NDArray[np.intp], length: NDArray[np.float64], k: int
    ) -> NDArray[np.float64]:
        """Return a moment inside known intervals.

        Parameters
        ----------
        interval : ndarray of int, shape (...)
            Index of the node at which the interval begins.
        length : ndarray of float64, shape (...)
            Grown length since that node [m].
        k : int
            Which moment, from 1 to the order.

        Returns
        -------
        moment : ndarray of float64, shape (...)
            M_k [m^(k - D)].
        """
        at_node = [m[interval] for m in self.nodes[: k + 1]]
        growth = _polynomial(k, length, at_node[:k], self._births[interval])
        return np.asarray(at_node[k] + growth, dtype=np.float64)

    def locate(
        self, grown_length: NDArray[np.float64]
    ) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
        """Return the intervals of some grown lengths, and how far they reach into them.

        Parameters
        ----------
        grown_length : ndarray of float64, shape (...)
            Grown lengths [m]; before the first node there are no nuclei.

        Returns
        -------
        interval : ndarray of int, shape (...)
            Index of the node at which the interval begins.
        length : ndarray of float64, shape (...)
            Grown length since that node [m], for `within`.
        """
        found = np.searchsorted(self.grown_length, grown_length, side="right") - 1
        interval = np.clip(found, 0, self.grown_length.size - 2)
        return interval, np.maximum(grown_length - self.grown_length[interval], 0.0)


def _polynomial(
    k: int,
    length: NDArray[np.float64],
    lower: list[NDArray[np.float64]],
    births: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Return the growth of M_k over a length, from the lower moments at its beginning.

    (u + r)^k - r^k of the nuclei that are there, and the integral of (u - v)^k births dv.
    """
    growth = lower[0] + births * length / (k + 1)
    for j in range(k - 1, 0, -1):
        growth = growth * length + math.comb(k, j) * lower[k - j]
    return growth * length
