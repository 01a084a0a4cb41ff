"""From the dose of a nucleating agent to sites per volume.

Counting, not kinetics: when a site starts is the business of the nucleation laws, where it lies
that of the placement. Agglomerates are either a share lost here or clusters of positions there.
"""

from __future__ import annotations

import math

from spheru.errors import ValidityError
from spheru.material.checks import at_least, positive

__all__ = ["active_sites", "dissolved_sites", "particle_density"]

# exponent of ln(spread)^2 in the mean volume of a particle over pi d50^3/6
_MEAN_VOLUME = {"volume": -4.5, "number": 4.5}


def particle_density(
    mass_fraction: float,
    *,
    d50: float,
    spread: float,
    basis: str,
    particle_density: float,
    polymer_density: float,
) -> float:
    r"""Return the particles per volume of polymer for a log-normal distribution of diameters.

    .. math:: n = \frac{w \rho}{\rho_p \bar v}, \quad
              \bar v = \tfrac{\pi}{6} d_{50}^3 e^{\pm 4.5 \ln^2 s}

    with the sign + for the number median and - for the volume median.

    Parameters
    ----------
    mass_fraction : float
        Mass of agent per mass of compound w [-], 0 to below 1; 1000 ppm are 1e-3.
    d50 : float
        Median diameter [m], > 0.
    spread : float
        Geometric standard deviation s [-], >= 1; 1 makes all particles equal.
    basis : {"volume", "number"}
        Whether half the volume (as laser diffraction gives it) or half the number of the particles
        is smaller than `d50`.
    particle_density, polymer_density : float
        Densities of the agent and of the polymer around it [kg m-3], > 0.

    Returns
    -------
    density : float
        Particles per volume of polymer [m-3].

    Raises
    ------
    ValidityError
        If a number is out of its bounds or the basis is unknown.

    Notes
    -----
    The volume of the agent itself is neglected. The two medians of one powder differ by the factor
    exp(3 ln^2 s); taking one for the other is wrong by exp(9 ln^2 s) in number: 7 at s = 1.6.

    References
    ----------
    .. [1] T. Hatch, S. P. Choate, J. Franklin Inst. 207 (1929) 369. (cited from memory)

    Examples
    --------
    By hand, equal spheres of 1 um: 1e-3*905/(2750*5.23599e-19) = 6.2852e14. With s = e^(1/3) the
    exponent is 4.5/9 = 0.5: times exp(0.5) = 1.64872 from the volume median.

    >>> n = particle_density(1e-3, d50=1e-6, spread=1.0, basis="volume", particle_density=2750.0,
    ...                      polymer_density=905.0)
    >>> f"{n:.4e}"
    '6.2852e+14'
    >>> n_wide = particle_density(1e-3, d50=1e-6, spread=math.exp(1 / 3), basis="volume",
    ...                           particle_density=2750.0, polymer_density=905.0)
    >>> round(n_wide / n, 5)
    1.64872
    """
    where = "particle density"
    at_least(where, 0.0, mass_fraction=mass_fraction)
    at_least(where, 1.0, spread=spread)
    positive(where, d50=d50, particle_density=particle_density, polymer_density=polymer_density)
    if mass_fraction >= 1.0:
        raise ValidityError(f"{where}: expected a mass fraction below 1, got {mass_fraction:g}")
    if basis not in _MEAN_VOLUME:
        raise ValidityError(f"{where}: expected a median by 'volume' or by 'number', got '{basis}'")
    widening = math.exp(_MEAN_VOLUME[basis] * math.log(spread) ** 2)
    mean_volume = math.pi / 6.0 * d50**3 * widening
    return mass_fraction * polymer_density / (particle_density * mean_volume)


def active_sites(particles: float, *, active: float, loss: float = 0.0) -> float:
    """Return the particles that can start a crystal.

    Parameters
    ----------
    particles : float
        Particles per volume [m-3], >= 0.
    active : float
        Share of single particles that can ever start a crystal [-], 0 to 1; 1e-4 to 1e-1 in use.
    loss : float
        Share of the sites lost inside agglomerates [-], 0 to 1. Not together with clustered
        positions, which describe the same agglomerates by their places.

    Returns
    -------
    sites : float
        Sites per volume [m-3].

    Raises
    ------
    ValidityError
        If a number is out of its bounds.

    Examples
    --------
    By hand: 1e14*0.01*(1 - 0.2) = 8e11.

    >>> f"{active_sites(1e14, active=0.01, loss=0.2):.3e}"
    '8.000e+11'
    """
    at_least("active sites", 0.0, particles=particles, active=active, loss=loss)
    for name, share in (("active", active), ("loss", loss)):
        if share > 1.0:
            raise ValidityError(f"active sites: expected {name} between 0 and 1, got {share:g}")
    return particles * active * (1.0 - loss)


def dissolved_sites(dose_ppm: float, *, sites_per_ppm: float, threshold_ppm: float) -> float:
    """Return the sites of an agent that dissolves in the melt and comes out again as fibrils.

    Parameters
    ----------
    dose_ppm : float
        Dose by mass [ppm], >= 0.
    sites_per_ppm : float
        Sites for each ppm above the threshold [m-3 ppm-1], >= 0.
    threshold_ppm : float
        Dose that stays dissolved and starts nothing [ppm], >= 0; about 800 to 1500 for sorbitols
        (from memory).

    Returns
    -------
    sites : float
        Sites per volume [m-3].

    Raises
    ------
    ValidityError
        If a number is negative or not finite.

    Examples
    --------
    By hand: (2000 - 1200)*1e12 = 8e14.

    >>> f"{dissolved_sites(2000.0, sites_per_ppm=1e12, threshold_ppm=1200.0):.3e}"
    '8.000e+14'
    """
    at_least(
        "dissolved sites",
        0.0,
        dose_ppm=dose_ppm,
        sites_per_ppm=sites_per_ppm,
        threshold_ppm=threshold_ppm,
    )
    return sites_per_ppm * max(0.0, dose_ppm - threshold_ppm)
