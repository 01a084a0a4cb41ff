"""Laws of nucleation: how many crystals start, and at what undercooling or rate.

Pure functions first, then two families of records: athermal site laws (a cumulative number that
depends on the deepest undercooling reached, not on time) and thermal rate laws (a rate at a
temperature). No places, no clock, no random number.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Literal, Protocol, runtime_checkable

import numpy as np

from spheru.constants import BOLTZMANN, GAS_CONSTANT
from spheru.errors import UnknownNameError, ValidityError
from spheru.material.checks import absolute_temperature, at_least, finite, positive, rising_table
from spheru.material.thermodynamics import critical_radius, driving_force

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "ActivatedSites",
    "ClassicalNucleation",
    "ExponentialSites",
    "FixedSites",
    "RateLaw",
    "SiteLaw",
    "SubstrateNucleation",
    "TableSites",
    "block_barrier",
    "flat_cap_factor",
    "fletcher_factor",
    "induction_time",
    "melt_memory_factor",
    "nucleation_rate",
    "sphere_barrier",
    "substrate_barrier",
]

_SHAPES = ("block", "sphere")


def block_barrier(driving_force: ArrayLike, *, sigma: float, sigma_e: float) -> NDArray[np.float64]:
    r"""Return the free-energy barrier of a chain-folded block in the bulk of the melt.

    .. math:: \Delta G^* = 32 \sigma^2 \sigma_e/\Delta g^2

    Parameters
    ----------
    driving_force : array_like of float, shape (...)
        Driving force [J m-3].
    sigma, sigma_e : float
        Energies of the lateral and of the fold surface [J m-2], > 0.

    Returns
    -------
    barrier : ndarray of float64, shape (...)
        Barrier [J]; inf where nothing drives.

    Raises
    ------
    ValidityError
        If a number is not finite or a surface energy is not above 0.

    References
    ----------
    .. [1] J. D. Hoffman, J. I. Lauritzen, J. Res. Natl. Bur. Stand. A 65 (1961) 297. (cited from
       memory)

    Examples
    --------
    By hand: 32*(0.01)^2*0.06/(2e7)^2 = 1.92e-4/4e14 = 4.8e-19 J.

    >>> float(block_barrier(2e7, sigma=0.01, sigma_e=0.06))
    4.8...e-19
    """
    positive("block barrier", sigma=sigma, sigma_e=sigma_e)
    return _over_square("block barrier", 32.0 * sigma**2 * sigma_e, driving_force)


def sphere_barrier(driving_force: ArrayLike, *, sigma: float) -> NDArray[np.float64]:
    r"""Return the free-energy barrier of a spherical nucleus in the bulk of the melt.

    .. math:: \Delta G^* = 16\pi\sigma^3/(3 \Delta g^2)

    Parameters
    ----------
    driving_force : array_like of float, shape (...)
        Driving force [J m-3].
    sigma : float
        Energy of the surface [J m-2], > 0.

    Returns
    -------
    barrier : ndarray of float64, shape (...)
        Barrier [J]; inf where nothing drives.

    Raises
    ------
    ValidityError
        If a number is not finite or `sigma` is not above 0.

    Examples
    --------
    By hand: 16*3.14159*1e-6/(3*4e14) = 5.0265e-5/1.2e15 = 4.18879e-20 J.

    >>> float(sphere_barrier(2e7, sigma=0.01))
    4.1887...e-20
    """
    positive("sphere barrier", sigma=sigma)
    return _over_square("sphere barrier", 16.0 * math.pi * sigma**3 / 3.0, driving_force)


def substrate_barrier(
    driving_force: ArrayLike, *, sigma: float, sigma_e: float, sigma_difference: float
) -> NDArray[np.float64]:
    r"""Return the free-energy barrier of a chain-folded block on a flat substrate.

    .. math:: \Delta G^* = 16 \sigma \sigma_e \Delta\sigma/\Delta g^2

    with :math:`\Delta\sigma = \sigma + \sigma_{crystal/substrate} - \sigma_{melt/substrate}`.

    Parameters
    ----------
    driving_force : array_like of float, shape (...)
        Driving force [J m-3].
    sigma, sigma_e : float
        Energies of the lateral and of the fold surface [J m-2], > 0.
    sigma_difference : float
        Interfacial-energy difference [J m-2], >= 0: below 2e-3 for an active substrate, 5e-3 to
        1e-2 for a weak one; at 2 `sigma` the substrate does nothing.

    Returns
    -------
    barrier : ndarray of float64, shape (...)
        Barrier [J]; inf where nothing drives.

    Raises
    ------
    ValidityError
        If a number is not finite or out of its bounds.

    Examples
    --------
    By hand: 16*0.01*0.06*0.001/(2e7)^2 = 9.6e-6/4e14 = 2.4e-20 J.

    >>> float(substrate_barrier(2e7, sigma=0.01, sigma_e=0.06, sigma_difference=0.001))
    2.4...e-20
    """
    positive("substrate barrier", sigma=sigma, sigma_e=sigma_e)
    at_least("substrate barrier", 0.0, sigma_difference=sigma_difference)
    return _over_square(
        "substrate barrier", 16.0 * sigma * sigma_e * sigma_difference, driving_force
    )


def flat_cap_factor(m: ArrayLike) -> NDArray[np.float64]:
    r"""Return the share of the spherical barrier that a cap on a flat substrate has to climb.

    .. math:: (2+m)(1-m)^2/4, \quad m = \cos\theta

    Parameters
    ----------
    m : array_like of float, shape (...)
        Cosine of the contact angle [-], -1 to 1.

    Returns
    -------
    factor : ndarray of float64, shape (...)
        Share of the barrier [-], 1 (no contact) to 0 (full wetting).

    Raises
    ------
    ValidityError
        If `m` is outside -1 to 1.

    References
    ----------
    .. [1] D. Turnbull, J. Chem. Phys. 18 (1950) 198. (cited from memory)

    Examples
    --------
    By hand at 60 degrees: 2.5*0.25/4 = 0.15625.

    >>> float(flat_cap_factor(0.5))
    0.15625
    """
    cosine = _cosine("flat cap factor", m)
    return np.asarray((2.0 + cosine) * (1.0 - cosine) ** 2 / 4.0)


def fletcher_factor(m: ArrayLike, x: ArrayLike) -> NDArray[np.float64]:
    r"""Return the share of the spherical barrier for a cap on a spherical particle.

    .. math:: f = \tfrac12\{1 + [(1-mx)/g]^3 + x^3[2 - 3y + y^3] + 3mx^2[y - 1]\}

    with :math:`y = (x-m)/g` and :math:`g = \sqrt{1 + x^2 - 2mx}`.

    Parameters
    ----------
    m : array_like of float, shape (...)
        Cosine of the contact angle [-], -1 to 1.
    x : array_like of float, shape (...)
        Radius of the particle over the critical radius [-], >= 0; the two shapes broadcast.

    Returns
    -------
    factor : ndarray of float64, shape (...)
        Share of the barrier [-]: 1 at x = 0, `flat_cap_factor` for large x.

    Raises
    ------
    ValidityError
        If `m` is outside -1 to 1, or `x` is negative or not finite.

    Notes
    -----
    Convex particles only. Evaluated with 1 - y = (1 - m^2)/(g(g + x - m)), since the printed form
    loses every digit for large particles. Size matters below about 20 critical radii.

    References
    ----------
    .. [1] N. H. Fletcher, J. Chem. Phys. 29 (1958) 572. (formula from memory, its limits verified)

    Examples
    --------
    By hand for m = 0, x = 1: g = 1.41421, y = 0.70711, so (1 + 0.35355 + 2 - 2.12132 + 0.35355)/2
    = 1.58579/2 = 0.79289.

    >>> float(fletcher_factor(0.0, 1.0))
    0.79289...
    """
    cosine, ratio = np.broadcast_arrays(
        _cosine("Fletcher factor", m), finite("Fletcher factor", "x", x)
    )
    if (ratio < 0.0).any():
        raise ValidityError(f"Fletcher factor: expected x of at least 0, got {ratio.min():g}")
    sine_squared = (1.0 - cosine) * (1.0 + cosine)
    away = ratio - cosine
    g = np.sqrt(away**2 + sine_squared)
    touching = g == 0.0  # m = x = 1: full wetting
    g = np.where(touching, 1.0, g)
    missing = np.where(away > 0.0, sine_squared / (g + np.abs(away)), g - away) / g  # 1 - y
    factor = 0.5 * (
        1.0
        + ((1.0 - cosine * ratio) / g) ** 3
        + ratio**3 * missing**2 * (3.0 - missing)
        - 3.0 * cosine * ratio**2 * missing
    )
    return np.where(touching, 0.0, np.clip(factor, 0.0, 1.0))


def nucleation_rate(
    temperature: ArrayLike, *, prefactor: float, barrier: ArrayLike, u_star: float, t_inf: float
) -> NDArray[np.float64]:
    r"""Return the rate of thermal nucleation.

    .. math:: I = I_0 \exp[-U^*/(R(T-T_\infty))] \exp[-\Delta G^*/(kT)]

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    prefactor : float
        Attempts I0, [m-3 s-1] in the bulk or [s-1] for a site; > 0. Theory gives about 1e41 and
        kT/h = 8e12; fitted values lie many decades lower.
    barrier : array_like of float, shape (...)
        Free-energy barrier [J], >= 0; inf forbids.
    u_star : float
        Activation energy of the transport of segments [J mol-1], >= 0.
    t_inf : float
        Temperature at which that transport stops [K], > 0.

    Returns
    -------
    rate : ndarray of float64, shape (...)
        Rate, in the unit of `prefactor`; 0 at or below `t_inf` and where the barrier is infinite.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number or another number is out of its bounds.

    References
    ----------
    .. [1] D. Turnbull, J. C. Fisher, J. Chem. Phys. 17 (1949) 71. (cited from memory)

    Examples
    --------
    By hand at 400 K: -6000/(8.314463*200) = -3.60817 and -1e-19/(1.380649e-23*400) = -18.10742;
    exp(-21.71559) = 3.7071e-10, times 1e20.

    >>> float(nucleation_rate(400.0, prefactor=1e20, barrier=1e-19, u_star=6000.0, t_inf=200.0))
    37071...
    """
    positive("nucleation rate", prefactor=prefactor, t_inf=t_inf)
    at_least("nucleation rate", 0.0, u_star=u_star)
    kelvin, height = np.broadcast_arrays(
        absolute_temperature("nucleation rate", temperature), np.asarray(barrier, dtype=np.float64)
    )
    if not (height >= 0.0).all():
        raise ValidityError("nucleation rate: expected barriers of at least 0 J")
    rate = np.zeros(kelvin.shape)
    starts = (kelvin > t_inf) & np.isfinite(height)
    t = kelvin[starts]
    with np.errstate(under="ignore"):
        rate[starts] = prefactor * np.exp(
            -u_star / (GAS_CONSTANT * (t - t_inf)) - height[starts] / (BOLTZMANN * t)
        )
    return rate


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


def induction_time(
    temperature: ArrayLike, *, time: float, exponent: float, t_m0: float
) -> NDArray[np.float64]:
    r"""Return the time before the first crystals of a hold start.

    .. math:: t_i = t_1 (\Delta T/1\,\mathrm{K})^{-a}

    On cooling the crystals start when :math:`\int dt/t_i(T) = 1`.

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    time : float
        Induction time t_1 at an undercooling of 1 K [s], > 0.
    exponent : float
        Exponent a [-], > 0; 3 to 7 in use.
    t_m0 : float
        Equilibrium melting temperature [K], > 0.

    Returns
    -------
    time : ndarray of float64, shape (...)
        Induction time [s]; inf at or above `t_m0`.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number or a parameter is not above 0.

    Notes
    -----
    Not to be put on top of a site law that was fitted to times that include it.

    References
    ----------
    .. [1] W. L. Sifleet, N. Dinos, J. R. Collier, Polym. Eng. Sci. 13 (1973) 10. (cited from
       memory)

    Examples
    --------
    By hand at 10 K: 1e6*10**-3 = 1000 s.

    >>> induction_time([440.0, 450.0], time=1e6, exponent=3.0, t_m0=450.0).tolist()
    [1000.0, inf]
    """
    positive("induction time", time=time, exponent=exponent, t_m0=t_m0)
    undercooling = t_m0 - absolute_temperature("induction time", temperature)
    waits = np.full(undercooling.shape, np.inf)
    cold = undercooling > 0.0
    with np.errstate(over="ignore"):
        waits[cold] = time * undercooling[cold] ** -exponent
    return waits


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


@runtime_checkable
class RateLaw(Protocol):
    """What every thermal rate law offers."""

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the rate [m-3 s-1, or s-1 for a site] at absolute temperatures [K]."""
        ...

    def breakpoints(self) -> tuple[float, ...]:
        """Return the temperatures [K] at which the rate becomes 0."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class ClassicalNucleation:
    """Homogeneous nucleation in the bulk of the melt, by the classical theory.

    Attributes
    ----------
    shape : {"block", "sphere"}
        Chain-folded block (needs `sigma_e`) or sphere (takes none).
    prefactor : float
        Attempts [m-3 s-1], > 0; constant, a parameter of the fit.
    u_star : float
        Activation energy of the transport of segments [J mol-1], >= 0.
    t_inf, t_m0 : float
        Temperatures at which transport stops and at which the crystal melts [K].
    heat_of_fusion_volume : float
        Heat of fusion of the crystal [J m-3], > 0.
    sigma : float
        Energy of the lateral surface, or of the sphere [J m-2], > 0.
    sigma_e : float or None
        Energy of the fold surface [J m-2], > 0.
    driving_force_factor : bool
        Whether f = 2T/(Tm0 + T) stands in the driving force.

    Raises
    ------
    UnknownNameError
        If the shape is neither of the two.
    ValidityError
        If a number is out of its bounds, or does not belong to the shape.

    Examples
    --------
    >>> law = ClassicalNucleation(shape="sphere", prefactor=1e30, u_star=6270.0, t_inf=240.0,
    ...                           t_m0=480.0, heat_of_fusion_volume=2e8, sigma=0.01)
    >>> law.rate([240.0, 480.0]).tolist(), law.breakpoints()
    ([0.0, 0.0], (240.0, 480.0))
    """

    shape: Literal["block", "sphere"]
    prefactor: float
    u_star: float
    t_inf: float
    t_m0: float
    heat_of_fusion_volume: float
    sigma: float
    sigma_e: float | None = None
    driving_force_factor: bool = True

    def __post_init__(self) -> None:
        where = "homogeneous nucleation"
        _check_rate_law(self, where)
        if self.shape == "block":
            _need(where, "a block", sigma_e=self.sigma_e)
        else:
            _refuse(where, "a sphere", sigma_e=self.sigma_e)

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the rate of nucleation.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        rate : ndarray of float64, shape (...)
            Nuclei per volume of melt and time [m-3 s-1].

        Raises
        ------
        ValidityError
            If a temperature is not a positive finite number.
        """
        force = _force(self, temperature)
        if self.sigma_e is None:
            barrier = sphere_barrier(force, sigma=self.sigma)
        else:
            barrier = block_barrier(force, sigma=self.sigma, sigma_e=self.sigma_e)
        return _rate(self, temperature, barrier)

    def breakpoints(self) -> tuple[float, ...]:
        """Return where the rate becomes 0.

        Returns
        -------
        temperatures : tuple of float
            T_inf and Tm0 [K].
        """
        return self.t_inf, self.t_m0


@dataclass(frozen=True, slots=True, kw_only=True)
class SubstrateNucleation:
    """Heterogeneous nucleation on a site of a substrate, by the classical theory.

    A block takes an interfacial-energy difference, a sphere a contact angle; a mix of the two is
    refused, since they are two descriptions of one thing.

    Attributes
    ----------
    shape : {"block", "sphere"}
        Chain-folded block on a flat face, or cap of a sphere on a flat face or a particle.
    prefactor : float
        Attempts of one site [s-1], > 0; kT/h = 8e12 times a factor of the fit.
    u_star : float
        Activation energy of the transport of segments [J mol-1], >= 0.
    t_inf, t_m0 : float
        Temperatures at which transport stops and at which the crystal melts [K].
    heat_of_fusion_volume : float
        Heat of fusion of the crystal [J m-3], > 0.
    sigma : float
        Energy of the lateral surface, or of the sphere [J m-2], > 0.
    sigma_e : float or None
        Energy of the fold surface [J m-2], > 0; block.
    sigma_difference : float or None
        Interfacial-energy difference [J m-2], >= 0; block.
    contact_angle : float or None
        Contact angle [rad], 0 to pi; sphere.
    particle_radius : float or None
        Radius of the particle [m], > 0; sphere. Without it the substrate is flat.
    driving_force_factor : bool
        Whether f = 2T/(Tm0 + T) stands in the driving force.

    Raises
    ------
    UnknownNameError
        If the shape is neither of the two.
    ValidityError
        If a number is out of its bounds, or does not belong to the shape.

    Examples
    --------
    >>> law = SubstrateNucleation(shape="sphere", prefactor=1e6, u_star=6270.0, t_inf=240.0,
    ...                           t_m0=480.0, heat_of_fusion_volume=2e8, sigma=0.01,
    ...                           contact_angle=1.0, sigma_difference=0.001)
    Traceback (most recent call last):
    spheru.errors.ValidityError: substrate nucleation: a sphere takes no sigma_difference; ...
    """

    shape: Literal["block", "sphere"]
    prefactor: float
    u_star: float
    t_inf: float
    t_m0: float
    heat_of_fusion_volume: float
    sigma: float
    sigma_e: float | None = None
    sigma_difference: float | None = None
    contact_angle: float | None = None
    particle_radius: float | None = None
    driving_force_factor: bool = True

    def __post_init__(self) -> None:
        where = "substrate nucleation"
        _check_rate_law(self, where)
        block = {"sigma_e": self.sigma_e, "sigma_difference": self.sigma_difference}
        if self.shape == "block":
            _refuse(
                where,
                "a block",
                contact_angle=self.contact_angle,
                particle_radius=self.particle_radius,
            )
            _need(where, "a block", **block)
            return
        _refuse(where, "a sphere", **block)
        _need(where, "a sphere", contact_angle=self.contact_angle)
        if self.contact_angle is not None and self.contact_angle > math.pi:
            raise ValidityError(
                f"{where}: expected a contact angle of 0 to pi rad, got {self.contact_angle:g}"
            )
        if self.particle_radius is not None:
            positive(where, particle_radius=self.particle_radius)

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the rate at which a waiting site starts a crystal.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        rate : ndarray of float64, shape (...)
            Starts per site and time [s-1].

        Raises
        ------
        ValidityError
            If a temperature is not a positive finite number.
        """
        force = _force(self, temperature)
        return _rate(self, temperature, self._barrier(force))

    def breakpoints(self) -> tuple[float, ...]:
        """Return where the rate becomes 0.

        Returns
        -------
        temperatures : tuple of float
            T_inf and Tm0 [K].
        """
        return self.t_inf, self.t_m0

    def _barrier(self, force: NDArray[np.float64]) -> NDArray[np.float64]:
        if self.sigma_e is not None and self.sigma_difference is not None:
            return substrate_barrier(
                force,
                sigma=self.sigma,
                sigma_e=self.sigma_e,
                sigma_difference=self.sigma_difference,
            )
        m = math.cos(self.contact_angle or 0.0)
        if self.particle_radius is None:
            share = flat_cap_factor(m)
        else:
            share = fletcher_factor(
                m, self.particle_radius / critical_radius(force, sigma=self.sigma)
            )
        whole = sphere_barrier(force, sigma=self.sigma)
        # without a driving force the barrier stays infinite, even where full wetting makes it 0
        np.multiply(whole, share, out=whole, where=np.isfinite(whole))
        return whole


def _over_square(where: str, energy: float, driving_force: ArrayLike) -> NDArray[np.float64]:
    force = finite(where, "driving force in J/m3", driving_force)
    barrier = np.full(force.shape, np.inf)
    with np.errstate(over="ignore", under="ignore", divide="ignore"):
        np.divide(energy, force**2, out=barrier, where=force > 0.0)
    return barrier


def _cosine(where: str, m: ArrayLike) -> NDArray[np.float64]:
    cosine = finite(where, "m", m)
    if (np.abs(cosine) > 1.0).any():
        raise ValidityError(f"{where}: expected m = cos(contact angle) between -1 and 1")
    return cosine


def _normal_distribution(z: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the standard normal distribution function, without the import of scipy."""
    values = map(math.erfc, (-z / math.sqrt(2.0)).ravel().tolist())
    return 0.5 * np.fromiter(values, np.float64, z.size).reshape(z.shape)


def _check_rate_law(law: ClassicalNucleation | SubstrateNucleation, where: str) -> None:
    if law.shape not in _SHAPES:
        raise UnknownNameError("shape of a nucleus", law.shape, _SHAPES)
    positive(
        where,
        prefactor=law.prefactor,
        t_inf=law.t_inf,
        t_m0=law.t_m0,
        heat_of_fusion_volume=law.heat_of_fusion_volume,
        sigma=law.sigma,
    )
    at_least(where, 0.0, u_star=law.u_star)
    if law.t_m0 <= law.t_inf:
        raise ValidityError(
            f"{where}: expected the melting temperature above T_inf, "
            f"got Tm0 {law.t_m0:g} K and T_inf {law.t_inf:g} K"
        )


def _need(where: str, shape: str, **values: float | None) -> None:
    for name, value in values.items():
        if value is None:
            raise ValidityError(f"{where}: {shape} needs {name}")
        if name == "sigma_e":
            positive(where, **{name: value})
        else:
            at_least(where, 0.0, **{name: value})


def _refuse(where: str, shape: str, **values: float | None) -> None:
    for name, value in values.items():
        if value is not None:
            raise ValidityError(
                f"{where}: {shape} takes no {name}; give the numbers of a block or those of a "
                "sphere, not both"
            )


def _force(
    law: ClassicalNucleation | SubstrateNucleation, temperature: ArrayLike
) -> NDArray[np.float64]:
    return driving_force(
        temperature,
        t_m0=law.t_m0,
        heat_of_fusion_volume=law.heat_of_fusion_volume,
        driving_force_factor=law.driving_force_factor,
    )


def _rate(
    law: ClassicalNucleation | SubstrateNucleation,
    temperature: ArrayLike,
    barrier: NDArray[np.float64],
) -> NDArray[np.float64]:
    return nucleation_rate(
        temperature,
        prefactor=law.prefactor,
        barrier=barrier,
        u_star=law.u_star,
        t_inf=law.t_inf,
    )
