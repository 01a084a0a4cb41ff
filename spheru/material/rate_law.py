"""Thermal nucleation: the rate at which crystals start at a temperature, and what delays it.

Per volume of melt, or per site of a substrate. No places, no clock, no random number.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Protocol, runtime_checkable

import numpy as np

from spheru.constants import BOLTZMANN, GAS_CONSTANT
from spheru.errors import UnknownNameError, ValidityError
from spheru.material.checks import absolute_temperature, at_least, positive
from spheru.material.nucleation_barrier import (
    block_barrier,
    flat_cap_factor,
    fletcher_factor,
    sphere_barrier,
    substrate_barrier,
)
from spheru.material.thermodynamics import critical_radius, driving_force

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "ClassicalNucleation",
    "RateLaw",
    "SubstrateNucleation",
    "induction_time",
    "nucleation_rate",
]

_SHAPES = ("block", "sphere")


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
