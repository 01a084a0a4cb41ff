r"""WHEN nuclei start: numbers of nuclei over a thermal history.

Each activation gives the cumulative number of nuclei that have started by each node of the clock
if nothing had grown yet (the *extended* number). The mean field and the sampler both read this
one description. No random number and no place stand here.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError

if TYPE_CHECKING:
    from typing import Self

    from numpy.typing import NDArray

    from spheru.material.rate_law import RateLaw
    from spheru.material.site_law import SiteLaw
    from spheru.thermal.clock import Clock

__all__ = ["Activation", "Athermal", "Homogeneous", "Thermal"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Activation(ABC):
    """When the nuclei of a source start.

    Attributes
    ----------
    active_after : float
        Time before which nothing starts [s], >= 0.
    """

    active_after: float = 0.0

    @abstractmethod
    def density(self, clock: Clock) -> NDArray[np.float64]:
        """Return the number of nuclei that have started by each node of the clock.

        Parameters
        ----------
        clock : Clock
            Time and temperature at n nodes.

        Returns
        -------
        density : ndarray of float64, shape (n,)
            Cumulative number per volume [m-3], on faces per area [m-2]; never falling. What the
            first node holds is there from the start.
        """

    @abstractmethod
    def temperatures(self) -> tuple[float, ...]:
        """Return the temperatures [K] at which the law jumps or bends, for nodes of the clock."""

    def delayed(self, time: float) -> Self:
        """Return the same activation, held back until a time.

        Parameters
        ----------
        time : float
            Time before which nothing starts [s]; an earlier one changes nothing.

        Returns
        -------
        activation : Activation
            The delayed one. The clock should have a pair of nodes around `time`.
        """
        return replace(self, active_after=max(self.active_after, time))


@dataclass(frozen=True, slots=True, kw_only=True)
class Athermal(Activation):
    r"""Sites that start as soon as the melt is undercooled enough for them.

    Each site has an undercooling of its own, so sites start only while the temperature falls below
    its lowest value so far:

    .. math:: N(t) = f N_s(T_m^0 - \min_{t' \le t} T(t'))

    Sites that an `active_after` holds back all start at that time.

    Attributes
    ----------
    law : SiteLaw
        Number of sites [m-3, or m-2 on faces] that an undercooling [K] has started.
    t_m0 : float
        Equilibrium melting temperature [K], > 0.
    factor : float
        Multiplies the number of sites [-], >= 0.

    Raises
    ------
    ValidityError
        If the temperature or the factor makes no sense.

    Examples
    --------
    Sites of an agent that start at 450 - 20 = 430 K, half of them lost to agglomeration:

    >>> from types import SimpleNamespace
    >>> from spheru.material.site_law import ActivatedSites
    >>> agent = Athermal(law=ActivatedSites(number=1e12, activation=20.0), t_m0=450.0, factor=0.5)
    >>> clock = SimpleNamespace(
    ...     time=np.array([0.0, 1.0, 2.0]), lowest_temperature=np.array([440.0, 429.0, 429.0])
    ... )
    >>> agent.density(clock).tolist()
    [0.0, 500000000000.0, 500000000000.0]
    >>> agent.delayed(1.5).density(clock).tolist()
    [0.0, 0.0, 500000000000.0]
    """

    law: SiteLaw
    t_m0: float
    factor: float = 1.0

    def __post_init__(self) -> None:
        if not self.t_m0 > 0:
            raise ValidityError(
                f"athermal nuclei: expected a melting temperature above 0 K, got {self.t_m0}"
            )
        if not self.factor >= 0:
            raise ValidityError(
                f"athermal nuclei: expected a factor of 0 or above, got {self.factor}"
            )

    def density(self, clock: Clock) -> NDArray[np.float64]:  # noqa: D102 (as in Activation)
        started = self.factor * self.law.density(self.t_m0 - clock.lowest_temperature)
        return np.where(clock.time >= self.active_after, started, 0.0)

    def temperatures(self) -> tuple[float, ...]:  # noqa: D102 (as in Activation)
        return (self.t_m0, *(self.t_m0 - step for step in self.law.steps()))


@dataclass(frozen=True, slots=True, kw_only=True)
class Homogeneous(Activation):
    r"""Nuclei that form anywhere in the melt at a rate per volume.

    .. math:: N(t) = \int_0^t I(T(t')) \, dt'

    Attributes
    ----------
    law : RateLaw
        Rate per volume [m-3 s-1] against temperature [K].

    Examples
    --------
    5e9 per m3 and s for 2 s from the start, and for the second half of that time only:

    >>> from types import SimpleNamespace
    >>> clock = SimpleNamespace(
    ...     time=np.array([0.0, 1.0, 2.0]), integral=lambda rate: np.array([0.0, 5e9, 1e10])
    ... )
    >>> law = SimpleNamespace(rate=None)
    >>> Homogeneous(law=law).density(clock).tolist()
    [0.0, 5000000000.0, 10000000000.0]
    >>> Homogeneous(law=law, active_after=1.0).density(clock).tolist()
    [0.0, 0.0, 5000000000.0]
    """

    law: RateLaw

    def density(self, clock: Clock) -> NDArray[np.float64]:  # noqa: D102 (as in Activation)
        return _integral_after(self.law, clock, self.active_after)

    def temperatures(self) -> tuple[float, ...]:  # noqa: D102 (as in Activation)
        return self.law.breakpoints()


@dataclass(frozen=True, slots=True, kw_only=True)
class Thermal(Activation):
    r"""Equal sites, each of which starts at random at a rate.

    .. math:: N(t) = n \left[1 - \exp\left(-\int_0^t k(T(t')) \, dt'\right)\right]

    Attributes
    ----------
    law : RateLaw
        Rate per site [s-1] against temperature [K].
    number : float
        Number of sites [m-3, or m-2 on faces], >= 0.

    Raises
    ------
    ValidityError
        If the number of sites is below 0.

    Examples
    --------
    After ln 2 expected starts per site half of them have started: 1 - exp(-ln 2) = 0.5.

    >>> from types import SimpleNamespace
    >>> clock = SimpleNamespace(
    ...     time=np.array([0.0, 1.0]), integral=lambda rate: np.array([0.0, np.log(2.0)])
    ... )
    >>> sites = Thermal(law=SimpleNamespace(rate=None), number=4e12)
    >>> [f"{n:.3g}" for n in sites.density(clock)]
    ['0', '2e+12']
    """

    law: RateLaw
    number: float

    def __post_init__(self) -> None:
        if not self.number >= 0:
            raise ValidityError(
                f"thermal nuclei: expected a number of sites [m-3 or m-2] of 0 or above, "
                f"got {self.number}"
            )

    def density(self, clock: Clock) -> NDArray[np.float64]:  # noqa: D102 (as in Activation)
        return -self.number * np.expm1(-_integral_after(self.law, clock, self.active_after))

    def temperatures(self) -> tuple[float, ...]:  # noqa: D102 (as in Activation)
        return self.law.breakpoints()


def _integral_after(law: RateLaw, clock: Clock, time: float) -> NDArray[np.float64]:
    """Return the integral of a rate from a time on, at the nodes of the clock."""
    total = clock.integral(law.rate)
    return np.maximum(total - np.interp(time, clock.time, total), 0.0)
