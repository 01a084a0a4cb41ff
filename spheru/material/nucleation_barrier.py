"""Barriers of nucleation: what a crystal must overcome to start, and how a substrate lowers it.

Pure functions of energies; the rates that follow stand in `spheru.material.rate_law`.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError
from spheru.material.checks import at_least, finite, positive

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

__all__ = [
    "block_barrier",
    "flat_cap_factor",
    "fletcher_factor",
    "sphere_barrier",
    "substrate_barrier",
]


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
