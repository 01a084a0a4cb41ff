"""Athermal sites: how many crystals an undercooling has started, whatever the time it took.

A law gives the cumulative number that depends on the deepest undercooling reached. No places, no
clock, no random number.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Protocol, runtime_checkable

import numpy as np

from spheru.errors import ValidityError
from spheru.material.checks import at_least, finite, positive, rising_table

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "ActivatedSites",
    "ExponentialSites",
    "FixedSites",
    "SiteLaw",
    "TableSites",
    "melt_memory_factor",
]


def melt_memory_factor(
    melt_temperature: float, hold: float, *, slope: float, erase_temperature: float, time: float
) -> float:
    r"""Return the factor by which sites survive in a melt that was not heated enough.

    .. math:: M = 1 + [e^{s(T_e - T)} - 1] e^{-t/\tau}

    below the temperature of erasing T_e, and 1 from there on. ln N linear in the melt temperature
    is the usual fit of self-nucleation; a hold lets the surplus decay.

    Parameters
    ----------
    melt_temperature : float
        Highest temperature of the melt [K], > 0.
    hold : float
        Time spent there [s], >= 0.
    slope : float
        Slope s of ln N against the melt temperature [K-1], >= 0.
    erase_temperature : float
        Temperature T_e from which on nothing is remembered [K], > 0.
    time : float
        Time constant of the decay [s], > 0.

    Returns
    -------
    factor : float
        Factor on the number of athermal sites [-], >= 1.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    Notes
    -----
    Not to be put on top of a site law that was fitted to melts with that memory: the surplus would
    be counted twice.

    Examples
    --------
    By hand 10 K short of erasing with 0.2/K, held for one time constant: (exp(2) - 1)/e = 2.35040,
    plus 1.

    >>> melt_memory_factor(470.0, 60.0, slope=0.2, erase_temperature=480.0, time=60.0)
    3.3504...
    >>> melt_memory_factor(480.0, 60.0, slope=0.2, erase_temperature=480.0, time=60.0)
    1.0
    """
    where = "melt memory"
    positive(
        where, melt_temperature=melt_temperature, erase_temperature=erase_temperature, time=time
    )
    at_least(where, 0.0, hold=hold, slope=slope)
    if melt_temperature >= erase_temperature:
        return 1.0
    exponent = slope * (erase_temperature - melt_temperature)
    if exponent > 100.0:
        raise ValidityError(
            f"{where}: expected a melt near the erase temperature {erase_temperature:g} K, got "
            f"{melt_temperature:g} K, where slope x distance is {exponent:g} (at most 100)"
        )
    return 1.0 + math.expm1(exponent) * math.exp(-hold / time)


@runtime_checkable
class SiteLaw(Protocol):
    """What every athermal site law offers."""

    @property
    def fitted_range(self) -> tuple[float, float] | None:
        """Undercoolings [K] between which the law was fitted, if known."""
        ...

    def density(self, undercooling: ArrayLike) -> NDArray[np.float64]:
        """Return the sites [m-3, or m-2 on a surface] active once an undercooling was reached."""
        ...

    def steps(self) -> tuple[float, ...]:
        """Return the undercoolings [K] at which the number jumps or has a kink."""
        ...

    def scaled(self, factor: float) -> SiteLaw:
        """Return the law with every number multiplied by a factor [-]."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class FixedSites:
    """A number of sites that are active from the start, at any temperature.

    Attributes
    ----------
    number : float
        Sites [m-3, or m-2 on a surface], >= 0.

    Raises
    ------
    ValidityError
        If the number is negative or not finite.

    Examples
    --------
    >>> FixedSites(number=1e12).density([-5.0, 60.0]).tolist()
    [1000000000000.0, 1000000000000.0]
    """

    number: float

    def __post_init__(self) -> None:
        at_least("fixed sites", 0.0, number=self.number)

    @property
    def fitted_range(self) -> None:
        """No range: a number holds everywhere."""
        return

    def density(self, undercooling: ArrayLike) -> NDArray[np.float64]:
        """Return the active sites.

        Parameters
        ----------
        undercooling : array_like of float, shape (...)
            Deepest undercooling reached [K].

        Returns
        -------
        density : ndarray of float64, shape (...)
            The number, whatever the undercooling.
        """
        return np.full(finite("fixed sites", "undercooling in K", undercooling).shape, self.number)

    def steps(self) -> tuple[float, ...]:
        """Return no undercooling: nothing changes.

        Returns
        -------
        undercoolings : tuple
            Empty.
        """
        return ()

    def scaled(self, factor: float) -> FixedSites:
        """Return the law with the number multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], >= 0.

        Returns
        -------
        law : FixedSites
            The law with more or fewer sites.
        """
        return replace(self, number=self.number * factor)


@dataclass(frozen=True, slots=True, kw_only=True)
class ExponentialSites:
    r"""Sites that grow exponentially with the undercooling, up to a ceiling.

    .. math:: N = \min(\exp(a \Delta T + b), N_{max}) \quad (\Delta T > 0)

    Attributes
    ----------
    a : float
        Slope of ln N [K-1], > 0.
    b : float
        ln N at no undercooling, N in m-3 (or m-2 on a surface).
    ceiling : float
        Largest number [m-3, or m-2], > 0; a law without one gives nonsense under a quench.
    fitted_range : tuple of float, or None
        Undercoolings [K] between which the law was fitted.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    References
    ----------
    .. [1] E. Koscher, R. Fulchiron, Polymer 43 (2002) 6931. (cited from memory)

    Examples
    --------
    By hand: exp(0.1*100 + 15) = exp(25) = 7.2005e10; at 200 K exp(35) = 1.6e15 meets the ceiling.

    >>> law = ExponentialSites(a=0.1, b=15.0, ceiling=1e14)
    >>> [f"{n:.4e}" for n in law.density([0.0, 100.0, 200.0])]
    ['0.0000e+00', '7.2005e+10', '1.0000e+14']
    """

    a: float
    b: float
    ceiling: float
    fitted_range: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        where = "exponential sites"
        positive(where, a=self.a, ceiling=self.ceiling)
        finite(where, "b", self.b)
        ends = self.fitted_range
        if ends is not None and not 0.0 <= ends[0] < ends[1] < math.inf:
            raise ValidityError(
                f"{where}: expected a fitted range of undercoolings from low to high, "
                f"got {ends[0]:g} K to {ends[1]:g} K"
            )

    def density(self, undercooling: ArrayLike) -> NDArray[np.float64]:
        """Return the active sites.

        Parameters
        ----------
        undercooling : array_like of float, shape (...)
            Deepest undercooling reached [K].

        Returns
        -------
        density : ndarray of float64, shape (...)
            Sites [m-3, or m-2]; 0 without undercooling.
        """
        reached = finite("exponential sites", "undercooling in K", undercooling)
        exponent = self.a * reached + self.b
        with np.errstate(under="ignore"):
            sites = np.exp(np.minimum(exponent, full := math.log(self.ceiling)))
        return np.where(reached > 0.0, np.where(exponent < full, sites, self.ceiling), 0.0)

    def steps(self) -> tuple[float, ...]:
        """Return where the first sites appear and where the ceiling is met.

        Returns
        -------
        undercoolings : tuple of float
            Rising undercoolings [K].
        """
        full = (math.log(self.ceiling) - self.b) / self.a
        return (0.0, full) if full > 0.0 else (0.0,)

    def scaled(self, factor: float) -> ExponentialSites:
        """Return the law with every number, and the ceiling, multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], > 0.

        Returns
        -------
        law : ExponentialSites
            The law with more or fewer sites.
        """
        positive("exponential sites", factor=factor)
        return replace(self, b=self.b + math.log(factor), ceiling=self.ceiling * factor)


@dataclass(frozen=True, slots=True, kw_only=True)
class TableSites:
    """Measured numbers of sites against undercooling; ln N is linear between two rows.

    Attributes
    ----------
    undercooling : tuple of float
        Undercoolings [K], rising, > 0, at least 2. Before the first there is no site, after the
        last no new one.
    number : tuple of float
        Sites active by then [m-3, or m-2 on a surface], > 0, never falling.

    Raises
    ------
    ValidityError
        If the table is at fault.

    Examples
    --------
    Half-way between 1e10 and 1e12 on the logarithm lies 1e11.

    >>> law = TableSites(undercooling=(60.0, 80.0), number=(1e10, 1e12))
    >>> [f"{n:.3e}" for n in law.density([50.0, 60.0, 70.0, 90.0])]
    ['0.000e+00', '1.000e+10', '1.000e+11', '1.000e+12']
    """

    undercooling: tuple[float, ...]
    number: tuple[float, ...]

    def __post_init__(self) -> None:
        where = "site table"
        columns = rising_table(where, "undercooling in K", self.undercooling, "number", self.number)
        for name, column in zip(("undercooling", "number"), columns, strict=True):
            object.__setattr__(self, name, column)
        if any(more < less for less, more in pairwise(self.number)):
            raise ValidityError(
                f"{where}: expected cumulative numbers that never fall with undercooling"
            )

    @property
    def fitted_range(self) -> tuple[float, float]:
        """Ends of the table [K]."""
        return self.undercooling[0], self.undercooling[-1]

    def density(self, undercooling: ArrayLike) -> NDArray[np.float64]:
        """Return the active sites.

        Parameters
        ----------
        undercooling : array_like of float, shape (...)
            Deepest undercooling reached [K].

        Returns
        -------
        density : ndarray of float64, shape (...)
            Sites [m-3, or m-2]; 0 before the first row.
        """
        reached = finite("site table", "undercooling in K", undercooling)
        sites = np.exp(np.interp(reached, self.undercooling, np.log(self.number)))
        return np.where(reached >= self.undercooling[0], sites, 0.0)

    def steps(self) -> tuple[float, ...]:
        """Return the rows, where the slope changes.

        Returns
        -------
        undercoolings : tuple of float
            Rising undercoolings [K].
        """
        return self.undercooling

    def scaled(self, factor: float) -> TableSites:
        """Return the law with every number multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], > 0.

        Returns
        -------
        law : TableSites
            The law with more or fewer sites.
        """
        return replace(self, number=tuple(factor * number for number in self.number))


@dataclass(frozen=True, slots=True, kw_only=True)
class ActivatedSites:
    r"""Sites of an agent, each starting at its own undercooling around a mean one.

    .. math:: N(\Delta T) = N \Phi((\Delta T - \Delta T_a)/s) \quad (\Delta T > 0)

    Attributes
    ----------
    number : float
        Sites that can start [m-3, or m-2 on a surface], >= 0.
    activation : float
        Mean undercooling at which they start [K], >= 0.
    spread : float
        Standard deviation of that undercooling [K], >= 0; 0 makes it a step.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    Examples
    --------
    One standard deviation below, at and above the mean: 15.866 %, 50 % and 84.134 %.

    >>> ActivatedSites(number=1e12, activation=20.0, spread=2.0).density([18.0, 20.0, 22.0]) / 1e10
    array([15.8655..., 50. ..., 84.1344...])
    >>> ActivatedSites(number=1e12, activation=20.0).density([19.9, 20.0]).tolist()
    [0.0, 1000000000000.0]
    """

    number: float
    activation: float
    spread: float = 0.0

    def __post_init__(self) -> None:
        at_least(
            "activated sites",
            0.0,
            number=self.number,
            activation=self.activation,
            spread=self.spread,
        )

    @property
    def fitted_range(self) -> None:
        """No range: the agent is described, not fitted."""
        return

    def density(self, undercooling: ArrayLike) -> NDArray[np.float64]:
        """Return the active sites.

        Parameters
        ----------
        undercooling : array_like of float, shape (...)
            Deepest undercooling reached [K].

        Returns
        -------
        density : ndarray of float64, shape (...)
            Sites [m-3, or m-2]; 0 without undercooling.
        """
        reached = finite("activated sites", "undercooling in K", undercooling)
        if self.spread == 0.0:
            share = (reached >= self.activation).astype(np.float64)
        else:
            share = _normal_distribution((reached - self.activation) / self.spread)
        return np.where(reached > 0.0, self.number * share, 0.0)

    def steps(self) -> tuple[float, ...]:
        """Return the activation of a step, or the start of a spread one.

        Returns
        -------
        undercoolings : tuple of float
            Undercooling [K] at which the number jumps.
        """
        return (self.activation,) if self.spread == 0.0 else (0.0,)

    def scaled(self, factor: float) -> ActivatedSites:
        """Return the law with the number multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], >= 0.

        Returns
        -------
        law : ActivatedSites
            The law with more or fewer sites.
        """
        return replace(self, number=self.number * factor)


def _normal_distribution(z: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the standard normal distribution function, without the import of scipy."""
    values = map(math.erfc, (-z / math.sqrt(2.0)).ravel().tolist())
    return 0.5 * np.fromiter(values, np.float64, z.size).reshape(z.shape)
