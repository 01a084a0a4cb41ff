"""Driving force of crystallisation and the sizes that follow from it.

Equilibrium thermodynamics of a crystal in its melt; no rate.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError
from spheru.material.checks import absolute_temperature, finite, positive

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "critical_radius",
    "driving_force",
    "gibbs_thomson_temperature",
    "lamellar_thickness",
]


def driving_force(
    temperature: ArrayLike,
    *,
    t_m0: float,
    heat_of_fusion_volume: float,
    driving_force_factor: bool = True,
) -> NDArray[np.float64]:
    r"""Return the free energy that a unit of volume loses when it crystallises.

    .. math:: \Delta g = \Delta H_f \Delta T f/T_m^0, \quad f = 2T/(T_m^0+T)

    Parameters
    ----------
    temperature : array_like of float, shape (...)
        Absolute temperature of the melt [K].
    t_m0 : float
        Equilibrium melting temperature [K], > 0.
    heat_of_fusion_volume : float
        Heat of fusion of the crystal [J m-3], > 0.
    driving_force_factor : bool
        Whether the factor f is applied; without it the heat of fusion is taken as constant.

    Returns
    -------
    driving_force : ndarray of float64, shape (...)
        Driving force [J m-3]; negative above `t_m0`.

    Raises
    ------
    ValidityError
        If a temperature is not a positive finite number or a parameter is not above 0.

    References
    ----------
    .. [1] J. D. Hoffman, J. J. Weeks, J. Chem. Phys. 37 (1962) 1723. (cited from memory)

    Examples
    --------
    By hand: 2e8*50/450 = 2.2222e7 J/m3; times f = 800/850: 2.0915e7 J/m3.

    >>> float(driving_force(400.0, t_m0=450.0, heat_of_fusion_volume=2e8))
    20915032.6...
    """
    positive("driving force", t_m0=t_m0, heat_of_fusion_volume=heat_of_fusion_volume)
    kelvin = absolute_temperature("driving force", temperature)
    force = heat_of_fusion_volume / t_m0 * (t_m0 - kelvin)
    return np.asarray(force * (2.0 * kelvin / (t_m0 + kelvin)) if driving_force_factor else force)


def critical_radius(driving_force: ArrayLike, *, sigma: float) -> NDArray[np.float64]:
    r"""Return the radius of the critical spherical nucleus.

    .. math:: r^* = 2\sigma/\Delta g

    Parameters
    ----------
    driving_force : array_like of float, shape (...)
        Driving force [J m-3].
    sigma : float
        Energy of the surface [J m-2], > 0.

    Returns
    -------
    radius : ndarray of float64, shape (...)
        Critical radius [m]; inf where nothing drives.

    Raises
    ------
    ValidityError
        If a number is not finite or `sigma` is not above 0.

    Examples
    --------
    By hand: 2*0.01/2e7 = 1e-9 m.

    >>> critical_radius([2e7, 0.0], sigma=0.01).tolist()
    [1e-09, inf]
    """
    positive("critical radius", sigma=sigma)
    return _over_driving_force("critical radius", 2.0 * sigma, driving_force)


def lamellar_thickness(driving_force: ArrayLike, *, sigma_e: float) -> NDArray[np.float64]:
    r"""Return the smallest thickness at which a lamella is stable.

    .. math:: l^* = 2\sigma_e/\Delta g

    Parameters
    ----------
    driving_force : array_like of float, shape (...)
        Driving force [J m-3].
    sigma_e : float
        Energy of the fold surface [J m-2], > 0.

    Returns
    -------
    thickness : ndarray of float64, shape (...)
        Critical thickness [m], without the excess that lets the lamella grow; inf where nothing
        drives.

    Raises
    ------
    ValidityError
        If a number is not finite or `sigma_e` is not above 0.

    Examples
    --------
    By hand: 2*0.06/2e7 = 6e-9 m.

    >>> float(lamellar_thickness(2e7, sigma_e=0.06))
    6e-09
    """
    positive("lamellar thickness", sigma_e=sigma_e)
    return _over_driving_force("lamellar thickness", 2.0 * sigma_e, driving_force)


def gibbs_thomson_temperature(
    thickness: ArrayLike, *, t_m0: float, sigma_e: float, heat_of_fusion_volume: float
) -> NDArray[np.float64]:
    r"""Return the melting temperature of a lamella.

    .. math:: T_m = T_m^0 [1 - 2\sigma_e/(\Delta H_f l)]

    Parameters
    ----------
    thickness : array_like of float, shape (...)
        Thickness of the lamella [m], above 2 `sigma_e`/`heat_of_fusion_volume`.
    t_m0 : float
        Equilibrium melting temperature [K], > 0.
    sigma_e : float
        Energy of the fold surface [J m-2], > 0.
    heat_of_fusion_volume : float
        Heat of fusion of the crystal [J m-3], > 0.

    Returns
    -------
    temperature : ndarray of float64, shape (...)
        Melting temperature [K].

    Raises
    ------
    ValidityError
        If a parameter is not above 0, or a lamella is so thin that it would melt below 0 K.

    Examples
    --------
    By hand: 500*(1 - 2*0.05/(2e8*1e-8)) = 500*(1 - 0.05) = 475 K.

    >>> float(gibbs_thomson_temperature(1e-8, t_m0=500.0, sigma_e=0.05, heat_of_fusion_volume=2e8))
    475.0
    """
    where = "Gibbs-Thomson temperature"
    positive(where, t_m0=t_m0, sigma_e=sigma_e, heat_of_fusion_volume=heat_of_fusion_volume)
    length = finite(where, "thickness in m", thickness)
    thinnest = 2.0 * sigma_e / heat_of_fusion_volume
    if (length <= thinnest).any():
        raise ValidityError(
            f"{where}: expected a thickness above {thinnest:g} m, got {length.min():g} m"
        )
    return np.asarray(t_m0 * (1.0 - thinnest / length))


def _over_driving_force(where: str, energy: float, driving_force: ArrayLike) -> NDArray[np.float64]:
    force = finite(where, "driving force in J/m3", driving_force)
    size = np.full(force.shape, np.inf)
    with np.errstate(over="ignore"):
        np.divide(energy, force, out=size, where=force > 0.0)
    return size
