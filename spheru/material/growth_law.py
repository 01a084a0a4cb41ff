"""Linear growth rate of a spherulite against temperature.

The growth laws and nothing else: no grid, no clock, no file. Kelvins in, metres per second out.
A law is a frozen record of parameters around a pure function of temperature.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Protocol, runtime_checkable

import numpy as np

from spheru.constants import BOLTZMANN, GAS_CONSTANT
from spheru.errors import ValidityError
from spheru.material.checks import absolute_temperature, at_least, positive, rising_table

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "BellGrowth",
    "Branch",
    "GrowthLaw",
    "LauritzenHoffmanGrowth",
    "TableGrowth",
    "bell_growth_rate",
    "growth_rate",
    "interpolated_growth_rate",
    "molar_mass_factor",
    "nucleation_constant",
]

_ANNOUNCED_JUMP = 0.01  # relative; a smaller step between two branches is not worth a line


def growth_rate(
    temperature: ArrayLike,
    *,
    g0: float,
    kg: float,
    u_star: float,
    t_inf: float,
    t_m0: float,
    driving_force_factor: bool = True,
) -> NDArray[np.float64]:
    r"""Return the radial growth rate of a spherulite by the law of Lauritzen and Hoffman.

    .. math:: G = G_0 \exp[-U^*/(R(T-T_\infty))] \exp[-K_g/(T \Delta T f)]

    with :math:`\Delta T = T_m^0 - T` and :math:`f = 2T/(T_m^0+T)`, or f = 1.

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    g0 : float
        Pre-exponential factor [m s-1], > 0.
    kg : float
        Nucleation constant [K2], > 0.
    u_star : float
        Activation energy of the transport of segments [J mol-1], >= 0.
    t_inf : float
        Temperature at which that transport stops [K], > 0.
    t_m0 : float
        Equilibrium melting temperature [K], above `t_inf`.
    driving_force_factor : bool
        Whether f stands in the law; a set of parameters is fitted with or without it, and read
        the wrong way it is out by a factor of 5.

    Returns
    -------
    rate : ndarray of float64, shape (...)
        Growth rate [m s-1]; exactly 0 at or above `t_m0` and at or below `t_inf`.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number, a parameter is out of its bounds, or
        `t_m0` <= `t_inf`.

    Notes
    -----
    Quiescent melt, one crystal form, `g0` constant (its weak dependence on temperature is left in
    the fit). Valid where the set was fitted; the low-temperature side of the bell is often an
    extrapolation.

    References
    ----------
    .. [1] J. D. Hoffman, G. T. Davis, J. I. Lauritzen, "Treatise on Solid State Chemistry" 3,
       ch. 7, 1976. (cited from memory)
    .. [2] J. D. Hoffman, R. L. Miller, Polymer 38 (1997) 3151. (cited from memory)

    Examples
    --------
    By hand at 400 K (dT = 50 K, f = 800/850 = 16/17): -6000/(8.314463*200) = -3.60817 and
    -1.5e5/(400*50*16/17) = -7.96875, sum -11.57692; exp gives 9.380e-6.

    >>> float(growth_rate(400.0, g0=1.0, kg=1.5e5, u_star=6000.0, t_inf=200.0, t_m0=450.0))
    9.380...e-06
    >>> growth_rate([200.0, 450.0], g0=1.0, kg=1.5e5, u_star=6e3, t_inf=200.0, t_m0=450.0).tolist()
    [0.0, 0.0]
    """
    positive("growth rate", g0=g0, kg=kg)
    at_least("growth rate", 0.0, u_star=u_star)
    _check_window("growth rate", t_inf, t_m0)
    kelvin = absolute_temperature("growth rate", temperature)
    rate = np.zeros(kelvin.shape)
    grows = (kelvin > t_inf) & (kelvin < t_m0)
    t = kelvin[grows]
    barrier = t * (t_m0 - t)
    if driving_force_factor:
        barrier *= 2.0 * t / (t_m0 + t)
    with np.errstate(under="ignore"):  # the last 1e-3 K below t_m0 may round to 0
        rate[grows] = g0 * np.exp(-u_star / (GAS_CONSTANT * (t - t_inf)) - kg / barrier)
    return rate


def bell_growth_rate(
    temperature: ArrayLike, *, g_max: float, t_max: float, curvature: float
) -> NDArray[np.float64]:
    r"""Return the growth rate of the bell-shaped short form.

    .. math:: G = G_{max} \exp[-c (T - T_{max})^2]

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    g_max : float
        Largest growth rate [m s-1], > 0.
    t_max : float
        Temperature of the maximum [K], > 0.
    curvature : float
        Constant c [K-2], > 0.

    Returns
    -------
    rate : ndarray of float64, shape (...)
        Growth rate [m s-1], never 0 but by rounding: cut it at the ends of the window.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number or a parameter is out of its bounds.

    References
    ----------
    .. [1] H. Zuidema, G. W. M. Peters, H. E. H. Meijer, Macromol. Theory Simul. 10 (2001) 447.
       (cited from memory)

    Examples
    --------
    By hand 10 K from the maximum: exp(-0.01*100) = 0.367879, times 2e-6.

    >>> float(bell_growth_rate(353.0, g_max=2e-6, t_max=363.0, curvature=0.01))
    7.3575...e-07
    """
    positive("bell growth rate", g_max=g_max, t_max=t_max, curvature=curvature)
    kelvin = absolute_temperature("bell growth rate", temperature)
    with np.errstate(under="ignore"):
        return np.asarray(g_max * np.exp(-curvature * (kelvin - t_max) ** 2))


def interpolated_growth_rate(
    temperature: ArrayLike, *, table_temperature: Sequence[float], table_rate: Sequence[float]
) -> NDArray[np.float64]:
    """Return the growth rate interpolated in a measured table.

    Monotone cubic interpolation of the logarithm of the rate: it adds no maximum that the table
    does not show.

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    table_temperature : sequence of float, shape (n,)
        Temperatures of the table [K], rising, at least 2.
    table_rate : sequence of float, shape (n,)
        Growth rates of the table [m s-1], > 0.

    Returns
    -------
    rate : ndarray of float64, shape (...)
        Growth rate [m s-1]; 0 outside the table, where nothing is known.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number or the table is at fault.

    References
    ----------
    .. [1] F. N. Fritsch, R. E. Carlson, SIAM J. Numer. Anal. 17 (1980) 238. (cited from memory)

    Examples
    --------
    With two rows the logarithm is a straight line: half-way between 1e-6 and 1e-8 lies 1e-7.

    >>> table = {"table_temperature": [390.0, 410.0], "table_rate": [1e-6, 1e-8]}
    >>> interpolated_growth_rate([380.0, 400.0, 420.0], **table).round(12).tolist()
    [0.0, 1e-07, 0.0]
    """
    # scipy costs 0.2 s at import, and only a table needs it
    from scipy.interpolate import PchipInterpolator  # noqa: PLC0415

    x, y = rising_table(
        "growth table", "temperature in K", table_temperature, "rate in m/s", table_rate
    )
    kelvin = absolute_temperature("growth table", temperature)
    inside = (kelvin >= x[0]) & (kelvin <= x[-1])
    rate = np.zeros(kelvin.shape)
    rate[inside] = np.exp(PchipInterpolator(x, np.log(y))(kelvin[inside]))
    return rate


def molar_mass_factor(molar_mass: float, *, reference: float, exponent: float) -> float:
    r"""Return the factor by which the growth rate of another molar mass differs.

    .. math:: G(M)/G(M_{ref}) = (M/M_{ref})^{-n}

    Parameters
    ----------
    molar_mass : float
        Molar mass of the grade [kg mol-1], > 0.
    reference : float
        Molar mass for which the law was fitted [kg mol-1], > 0.
    exponent : float
        Exponent n [-], >= 0: about 1 to 1.8 for polyethylene, 0.5 to 1 for poly(L-lactide), 0 to
        0.5 for isotactic polypropylene (from memory).

    Returns
    -------
    factor : float
        Factor on the growth rate [-]; give it to the `scaled` of a law.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    Notes
    -----
    Below 10 to 20 kg/mol the melting temperature falls too, which this factor leaves out.

    Examples
    --------
    Four times the molar mass with n = 1/2: 4**-0.5 = 0.5.

    >>> molar_mass_factor(400.0, reference=100.0, exponent=0.5)
    0.5
    """
    positive("molar mass factor", molar_mass=molar_mass, reference=reference)
    at_least("molar mass factor", 0.0, exponent=exponent)
    return float((molar_mass / reference) ** -exponent)


def nucleation_constant(
    *,
    n: float,
    b0: float,
    sigma: float,
    sigma_e: float,
    t_m0: float,
    heat_of_fusion_volume: float,
) -> float:
    r"""Return the nucleation constant of a growth regime.

    .. math:: K_g = n b_0 \sigma \sigma_e T_m^0 / (k \Delta H_f)

    Parameters
    ----------
    n : float
        4 in regimes I and III, 2 in regime II [-], > 0.
    b0 : float
        Thickness of a layer of stems [m], > 0.
    sigma, sigma_e : float
        Energies of the lateral and of the fold surface [J m-2], > 0.
    t_m0 : float
        Equilibrium melting temperature [K], > 0.
    heat_of_fusion_volume : float
        Heat of fusion of the crystal [J m-3], > 0.

    Returns
    -------
    kg : float
        Nucleation constant [K2].

    Raises
    ------
    ValidityError
        If a number is not above 0.

    References
    ----------
    .. [1] J. D. Hoffman, R. L. Miller, Polymer 38 (1997) 3151. (cited from memory)

    Examples
    --------
    By hand: 2 * 5e-10 * 1e-2 * 5e-2 * 500 / (1.380649e-23 * 2e8) = 2.5e-10/2.761298e-15 = 9.0537e4.

    >>> nucleation_constant(n=2, b0=5e-10, sigma=0.01, sigma_e=0.05, t_m0=500.0,
    ...                     heat_of_fusion_volume=2e8)
    90537.1...
    """
    positive(
        "nucleation constant",
        n=n,
        b0=b0,
        sigma=sigma,
        sigma_e=sigma_e,
        t_m0=t_m0,
        heat_of_fusion_volume=heat_of_fusion_volume,
    )
    return n * b0 * sigma * sigma_e * t_m0 / (BOLTZMANN * heat_of_fusion_volume)


@runtime_checkable
class GrowthLaw(Protocol):
    """What every growth law offers."""

    @property
    def t_inf(self) -> float:
        """Temperature [K] at and below which nothing grows."""
        ...

    @property
    def t_m0(self) -> float:
        """Equilibrium melting temperature [K], at and above which nothing grows."""
        ...

    @property
    def fitted_range(self) -> tuple[float, float] | None:
        """Temperatures [K] between which the law was fitted, if known."""
        ...

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the growth rate [m s-1] at absolute temperatures [K]."""
        ...

    def breakpoints(self) -> tuple[float, ...]:
        """Return the temperatures [K] at which the rate jumps, has a kink or becomes 0."""
        ...

    def jumps(self) -> tuple[tuple[float, float], ...]:
        """Return temperature [K] and ratio (above to below) of every jump of more than 1 %."""
        ...

    def window(self) -> tuple[float, float]:
        """Return the temperatures [K] outside which the rate is 0."""
        ...

    def scaled(self, factor: float) -> GrowthLaw:
        """Return the law with every rate multiplied by a factor [-]."""
        ...

    def shifted(self, tm0_shift: float, tg_shift: float) -> GrowthLaw:
        """Return the law with the melting temperature and the glass transition moved [K]."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Branch:
    """One regime, or one crystal form, of a growth law: G0, Kg and where they hold.

    Attributes
    ----------
    g0 : float
        Pre-exponential factor [m s-1], > 0.
    kg : float
        Nucleation constant [K2], > 0.
    low, high : float
        Temperatures [K] between which the branch holds, `low` included and `high` not.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.
    """

    g0: float
    kg: float
    low: float = 0.0
    high: float = math.inf

    def __post_init__(self) -> None:
        positive("growth branch", g0=self.g0, kg=self.kg)
        if not self.low < self.high:
            raise ValidityError(
                "growth branch: expected its lower end below its upper end, "
                f"got {self.low:g} K to {self.high:g} K"
            )


@dataclass(frozen=True, slots=True, kw_only=True)
class LauritzenHoffmanGrowth:
    """The law of Lauritzen and Hoffman in any number of branches that adjoin each other.

    Attributes
    ----------
    branches : tuple of Branch
        At least one; sorted by temperature. A jump of the rate between two is allowed.
    u_star : float
        Activation energy of the transport of segments [J mol-1], >= 0.
    t_inf, t_m0 : float
        Temperatures at which transport stops and at which the crystal melts [K].
    driving_force_factor : bool
        Whether f = 2T/(Tm0 + T) stands in the law.
    fitted_range : tuple of float, or None
        Temperatures [K] between which the law was fitted.
    factor : float
        Factor on every rate [-], > 0.

    Raises
    ------
    ValidityError
        If a number is out of its bounds, or branches overlap or leave a gap.

    Examples
    --------
    One branch, with the numbers worked in `growth_rate`; then twice as fast.

    >>> law = LauritzenHoffmanGrowth(branches=(Branch(g0=1.0, kg=1.5e5),), u_star=6000.0,
    ...                              t_inf=200.0, t_m0=450.0, driving_force_factor=True)
    >>> float(law.rate(400.0)), float(law.scaled(2.0).rate(400.0))
    (9.380...e-06, 1.876...e-05)
    >>> law.window()
    (200.0, 450.0)
    """

    branches: tuple[Branch, ...]
    u_star: float
    t_inf: float
    t_m0: float
    driving_force_factor: bool
    fitted_range: tuple[float, float] | None = None
    factor: float = 1.0

    def __post_init__(self) -> None:
        where = "Lauritzen-Hoffman growth"
        if not self.branches:
            raise ValidityError(f"{where}: expected at least one branch with G0 and Kg, got none")
        _check_window(where, self.t_inf, self.t_m0)
        _check_fitted_range(where, self.fitted_range)
        at_least(where, 0.0, u_star=self.u_star)
        positive(where, factor=self.factor)
        branches = tuple(sorted(self.branches, key=lambda branch: branch.low))
        for below, above in pairwise(branches):
            if below.high != above.low:
                raise ValidityError(
                    f"{where}: expected branches that adjoin, got one up to {below.high:g} K "
                    f"and the next from {above.low:g} K; let both meet at one temperature"
                )
        object.__setattr__(self, "branches", branches)
        if not self.window()[0] < self.window()[1]:
            raise ValidityError(
                f"{where}: expected a branch between T_inf {self.t_inf:g} K and "
                f"Tm0 {self.t_m0:g} K, got none there"
            )

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the growth rate.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        rate : ndarray of float64, shape (...)
            Growth rate [m s-1]; exactly 0 outside `window`.

        Raises
        ------
        ValidityError
            If a temperature is not a positive finite number.
        """
        kelvin = absolute_temperature("growth rate", temperature)
        if len(self.branches) == 1 and self._covers(self.branches[0]):
            return self._branch_rate(self.branches[0], kelvin)
        rate = np.zeros(kelvin.shape)
        for branch in self.branches:
            inside = (kelvin >= branch.low) & (kelvin < branch.high)
            rate[inside] = self._branch_rate(branch, kelvin[inside])
        return rate

    def breakpoints(self) -> tuple[float, ...]:
        """Return where the rate becomes 0 and where one branch follows another.

        Returns
        -------
        temperatures : tuple of float
            Rising temperatures [K].
        """
        low, high = self.window()
        return (low, *(b.low for b in self.branches if low < b.low < high), high)

    def jumps(self) -> tuple[tuple[float, float], ...]:
        """Return the jumps between branches that are worth an announcement.

        Returns
        -------
        jumps : tuple of (float, float)
            Temperature [K] and the ratio of the rate above to the rate below [-], where they
            differ by more than 1 %.
        """
        found = []
        for below, above in pairwise(self.branches):
            slow, fast = (
                float(self._branch_rate(b, np.float64(above.low))) for b in (below, above)
            )
            if slow > 0.0 and abs(fast / slow - 1.0) > _ANNOUNCED_JUMP:
                found.append((above.low, fast / slow))
        return tuple(found)

    def window(self) -> tuple[float, float]:
        """Return the temperatures outside which the rate is 0.

        Returns
        -------
        low, high : float
            Temperatures [K].
        """
        return max(self.t_inf, self.branches[0].low), min(self.t_m0, self.branches[-1].high)

    def scaled(self, factor: float) -> LauritzenHoffmanGrowth:
        """Return the law with every rate multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], > 0.

        Returns
        -------
        law : LauritzenHoffmanGrowth
            The faster or slower law.
        """
        return replace(self, factor=self.factor * factor)

    def shifted(self, tm0_shift: float, tg_shift: float) -> LauritzenHoffmanGrowth:
        """Return the law under a pressure that moves melting and glass transition.

        T_inf moves with Tg. The limits of the branches and of the fitted range move with Tm0,
        since regimes change at an undercooling.

        Parameters
        ----------
        tm0_shift, tg_shift : float
            Shifts of the melting temperature and of the glass transition [K].

        Returns
        -------
        law : LauritzenHoffmanGrowth
            The moved law.
        """
        return replace(
            self,
            branches=tuple(
                replace(b, low=b.low + tm0_shift, high=b.high + tm0_shift) for b in self.branches
            ),
            t_inf=self.t_inf + tg_shift,
            t_m0=self.t_m0 + tm0_shift,
            fitted_range=_moved(self.fitted_range, lambda t: t + tm0_shift),
        )

    def _covers(self, branch: Branch) -> bool:
        return branch.low <= self.t_inf and branch.high >= self.t_m0

    def _branch_rate(self, branch: Branch, kelvin: ArrayLike) -> NDArray[np.float64]:
        return growth_rate(
            kelvin,
            g0=self.factor * branch.g0,
            kg=branch.kg,
            u_star=self.u_star,
            t_inf=self.t_inf,
            t_m0=self.t_m0,
            driving_force_factor=self.driving_force_factor,
        )


class _Smooth(ABC):
    """A growth law without jumps: its rate is smooth up to the ends of its window."""

    __slots__ = ()

    @abstractmethod
    def window(self) -> tuple[float, float]:
        """Return the temperatures outside which the rate is 0 [K]."""

    def breakpoints(self) -> tuple[float, ...]:
        """Return the ends of the window [K], where the rate becomes 0."""
        return self.window()

    def jumps(self) -> tuple[tuple[float, float], ...]:
        """Return no jump."""
        return ()


@dataclass(frozen=True, slots=True, kw_only=True)
class BellGrowth(_Smooth):
    """The bell-shaped short form, cut off at T_inf and at Tm0.

    Attributes
    ----------
    g_max : float
        Largest growth rate [m s-1], > 0.
    t_max : float
        Temperature of the maximum [K], between `t_inf` and `t_m0`.
    curvature : float
        Constant c of exp(-c (T - t_max)^2) [K-2], > 0.
    t_inf, t_m0 : float
        Temperatures at and beyond which the rate is 0 [K].
    fitted_range : tuple of float, or None
        Temperatures [K] between which the law was fitted.

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    Examples
    --------
    >>> law = BellGrowth(g_max=2e-6, t_max=363.0, curvature=0.01, t_inf=240.0, t_m0=480.0)
    >>> law.rate([240.0, 363.0, 480.0]).tolist()
    [0.0, 2e-06, 0.0]
    """

    g_max: float
    t_max: float
    curvature: float
    t_inf: float
    t_m0: float
    fitted_range: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        where = "bell growth"
        positive(where, g_max=self.g_max, curvature=self.curvature)
        _check_window(where, self.t_inf, self.t_m0)
        _check_fitted_range(where, self.fitted_range)
        if not self.t_inf < self.t_max < self.t_m0:
            raise ValidityError(
                f"{where}: expected the maximum between T_inf {self.t_inf:g} K and "
                f"Tm0 {self.t_m0:g} K, got {self.t_max:g} K"
            )

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the growth rate.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        rate : ndarray of float64, shape (...)
            Growth rate [m s-1]; exactly 0 outside `window`.

        Raises
        ------
        ValidityError
            If a temperature is not a positive finite number.
        """
        kelvin = absolute_temperature("bell growth", temperature)
        rate = bell_growth_rate(
            kelvin, g_max=self.g_max, t_max=self.t_max, curvature=self.curvature
        )
        return np.where((kelvin > self.t_inf) & (kelvin < self.t_m0), rate, 0.0)

    def window(self) -> tuple[float, float]:
        """Return the temperatures outside which the rate is 0.

        Returns
        -------
        low, high : float
            Temperatures [K].
        """
        return self.t_inf, self.t_m0

    def scaled(self, factor: float) -> BellGrowth:
        """Return the law with every rate multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], > 0.

        Returns
        -------
        law : BellGrowth
            The faster or slower law.
        """
        return replace(self, g_max=self.g_max * factor)

    def shifted(self, tm0_shift: float, tg_shift: float) -> BellGrowth:
        """Return the law under a pressure that moves melting and glass transition.

        T_inf moves with Tg; the bell is stretched so that its maximum keeps its place between
        T_inf and Tm0.

        Parameters
        ----------
        tm0_shift, tg_shift : float
            Shifts of the melting temperature and of the glass transition [K].

        Returns
        -------
        law : BellGrowth
            The moved law.
        """
        moved = _Stretch(self.t_inf, self.t_m0, tm0_shift, tg_shift)
        return replace(
            self,
            t_max=moved(self.t_max),
            curvature=self.curvature / moved.scale**2,
            t_inf=self.t_inf + tg_shift,
            t_m0=self.t_m0 + tm0_shift,
            fitted_range=_moved(self.fitted_range, moved),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class TableGrowth(_Smooth):
    """Measured growth rates against temperature, interpolated; 0 outside the table.

    Attributes
    ----------
    temperature : tuple of float
        Temperatures [K], rising, at least 2, between `t_inf` and `t_m0`.
    growth_rate : tuple of float
        Growth rates [m s-1], > 0.
    t_inf, t_m0 : float
        Temperatures at and beyond which nothing grows [K]; they say how pressure moves the table.

    Raises
    ------
    ValidityError
        If the table is at fault or a number is out of its bounds.

    Examples
    --------
    >>> law = TableGrowth(temperature=(390.0, 410.0), growth_rate=(1e-6, 1e-8), t_inf=240.0,
    ...                   t_m0=480.0)
    >>> round(float(law.rate(390.0)), 12), law.fitted_range
    (1e-06, (390.0, 410.0))
    """

    temperature: tuple[float, ...]
    growth_rate: tuple[float, ...]
    t_inf: float
    t_m0: float

    def __post_init__(self) -> None:
        where = "growth table"
        columns = rising_table(
            where, "temperature in K", self.temperature, "rate in m/s", self.growth_rate
        )
        for name, column in zip(("temperature", "growth_rate"), columns, strict=True):
            object.__setattr__(self, name, column)
        _check_window(where, self.t_inf, self.t_m0)
        if self.temperature[0] <= self.t_inf or self.temperature[-1] >= self.t_m0:
            raise ValidityError(
                f"{where}: expected temperatures between T_inf {self.t_inf:g} K and "
                f"Tm0 {self.t_m0:g} K, got {self.temperature[0]:g} K to {self.temperature[-1]:g} K"
            )

    @property
    def fitted_range(self) -> tuple[float, float]:
        """Ends of the table [K]."""
        return self.window()

    def rate(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return the growth rate.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        rate : ndarray of float64, shape (...)
            Growth rate [m s-1]; exactly 0 outside `window`.

        Raises
        ------
        ValidityError
            If a temperature is not a positive finite number.
        """
        return interpolated_growth_rate(
            temperature, table_temperature=self.temperature, table_rate=self.growth_rate
        )

    def window(self) -> tuple[float, float]:
        """Return the temperatures outside which the rate is 0.

        Returns
        -------
        low, high : float
            Ends of the table [K].
        """
        return self.temperature[0], self.temperature[-1]

    def scaled(self, factor: float) -> TableGrowth:
        """Return the law with every rate multiplied by a factor.

        Parameters
        ----------
        factor : float
            Factor [-], > 0.

        Returns
        -------
        law : TableGrowth
            The faster or slower law.
        """
        return replace(self, growth_rate=tuple(factor * rate for rate in self.growth_rate))

    def shifted(self, tm0_shift: float, tg_shift: float) -> TableGrowth:
        """Return the law under a pressure that moves melting and glass transition.

        T_inf moves with Tg; every row keeps its place between T_inf and Tm0.

        Parameters
        ----------
        tm0_shift, tg_shift : float
            Shifts of the melting temperature and of the glass transition [K].

        Returns
        -------
        law : TableGrowth
            The moved law.
        """
        moved = _Stretch(self.t_inf, self.t_m0, tm0_shift, tg_shift)
        return replace(
            self,
            temperature=tuple(map(moved, self.temperature)),
            t_inf=self.t_inf + tg_shift,
            t_m0=self.t_m0 + tm0_shift,
        )


class _Stretch:
    """Moves temperatures with T_inf and Tm0, in proportion between the two."""

    def __init__(self, t_inf: float, t_m0: float, tm0_shift: float, tg_shift: float) -> None:
        self.t_inf = t_inf
        self.tg_shift = tg_shift
        self.scale = 1.0 + (tm0_shift - tg_shift) / (t_m0 - t_inf)

    def __call__(self, temperature: float) -> float:
        return self.t_inf + self.tg_shift + (temperature - self.t_inf) * self.scale


def _moved(
    ends: tuple[float, float] | None, move: Callable[[float], float]
) -> tuple[float, float] | None:
    return None if ends is None else (move(ends[0]), move(ends[1]))


def _check_window(where: str, t_inf: float, t_m0: float) -> None:
    positive(where, t_inf=t_inf, t_m0=t_m0)
    if t_m0 <= t_inf:
        raise ValidityError(
            f"{where}: expected the melting temperature above T_inf, "
            f"got Tm0 {t_m0:g} K and T_inf {t_inf:g} K"
        )


def _check_fitted_range(where: str, ends: tuple[float, float] | None) -> None:
    if ends is not None and not 0.0 < ends[0] < ends[1] < math.inf:
        raise ValidityError(
            f"{where}: expected a fitted range from low to high, got {ends[0]:g} K to {ends[1]:g} K"
        )
