"""The record of a material: its laws, its numbers, and where each of them comes from.

No file is read here, and nothing is computed but the shift by pressure.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Final, Literal, get_args

import numpy as np

from spheru.errors import UnknownNameError, ValidityError
from spheru.material.checks import at_least, positive

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import ArrayLike, NDArray

    from spheru.material.growth_law import GrowthLaw
    from spheru.material.site_law import SiteLaw

__all__ = ["REFERENCE_PRESSURE", "SITE_OPTIONS", "Mark", "MaterialRecord", "Provenance"]

REFERENCE_PRESSURE: Final = 1e5  # Pa; the pressure of every record (atmospheric)
SITE_OPTIONS: Final = ("induction", "melt memory")
_HIGHEST_PRESSURE = 1e8  # Pa; linear shifts of Tm0 and Tg are used in practice up to here

Mark = Literal["seen", "memory", "calibrated", "assumed", "user", "computed", "constructed"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Provenance:
    """Where one value of a record comes from.

    Attributes
    ----------
    value : str
        The value as it stands in the file, with its unit.
    mark : str
        "seen" (read in its source), "memory" (recalled, not read again), "calibrated" (set so that
        the law meets a rate), "computed" (from other values), "assumed", "constructed" (not a
        published set) or "user".
    source : str
        The source, or the reason.

    Raises
    ------
    UnknownNameError
        If the mark is none of those.

    Examples
    --------
    >>> Provenance(value="283 m/s", mark="heard", source="-")
    Traceback (most recent call last):
    spheru.errors.UnknownNameError: unknown mark 'heard'. Known: assumed, calibrated, computed, ...
    """

    value: str
    mark: Mark
    source: str

    def __post_init__(self) -> None:
        if self.mark not in get_args(Mark):
            raise UnknownNameError("mark", self.mark, get_args(Mark))


@dataclass(frozen=True, slots=True, kw_only=True)
class MaterialRecord:
    """What crystallises: one material in one crystal form, at atmospheric pressure.

    Attributes
    ----------
    name, title : str
        Name to ask for, and name to print.
    t_m0, t_g : float
        Equilibrium melting temperature and glass transition [K].
    t_m_observed : float
        Temperature at which real crystals are seen to melt [K], below `t_m0`.
    growth : GrowthLaw
        Growth rate against temperature.
    sites : SiteLaw or None
        Athermal sites of the material itself [m-3]; None where no law is known.
    site_decades : tuple of float, or None
        Usual range of log10 of the sites per m3: advice where `sites` is None.
    site_includes : frozenset of {"melt memory", "induction"}
        Effects that the data behind `sites` already contain, so that they must not be added.
    density_crystal, density_amorphous, density_melt : float
        Densities of crystal and amorphous solid at 25 degC, and of the melt [kg m-3].
    heat_of_fusion : float
        Heat of fusion of the perfect crystal [J kg-1].
    crystallinity : float
        Mass share of crystal inside a spherulite [-], above 0 to 1.
    birefringence : float or None
        Radial less tangential refractive index of a spherulite [-].
    growth_factor, site_factor : float
        Factors by which growth rate and number of sites are uncertain [-], >= 1.
    lateral_surface_energy, fold_surface_energy : float or None
        Surface energies [J m-2], >= 0.
    tm0_per_pressure, tg_per_pressure : float or None
        Shifts of `t_m0` and of `t_g` with pressure [K Pa-1], >= 0.
    note : str
        What the user of the record should know.
    provenance : mapping of str to Provenance
        Source of each value, by its dotted key in the file.

    Raises
    ------
    ValidityError
        If a number is out of its bounds or two of them contradict each other.
    """

    name: str
    title: str
    t_m0: float
    t_g: float
    t_m_observed: float
    growth: GrowthLaw
    sites: SiteLaw | None = None
    site_decades: tuple[float, float] | None = None
    site_includes: frozenset[str] = frozenset()
    density_crystal: float
    density_amorphous: float
    density_melt: float
    heat_of_fusion: float
    crystallinity: float
    birefringence: float | None = None
    growth_factor: float
    site_factor: float
    lateral_surface_energy: float | None = None
    fold_surface_energy: float | None = None
    tm0_per_pressure: float | None = None
    tg_per_pressure: float | None = None
    note: str = ""
    provenance: Mapping[str, Provenance] = field(default_factory=dict, hash=False)

    def __post_init__(self) -> None:
        where = f"record {self.name}"
        positive(
            where,
            t_m0=self.t_m0,
            t_g=self.t_g,
            t_m_observed=self.t_m_observed,
            density_crystal=self.density_crystal,
            density_amorphous=self.density_amorphous,
            density_melt=self.density_melt,
            heat_of_fusion=self.heat_of_fusion,
            crystallinity=self.crystallinity,
        )
        at_least(where, 1.0, growth_factor=self.growth_factor, site_factor=self.site_factor)
        known = {
            name: value
            for name in (
                "lateral_surface_energy",
                "fold_surface_energy",
                "tm0_per_pressure",
                "tg_per_pressure",
            )
            if (value := getattr(self, name)) is not None
        }
        at_least(where, 0.0, **known)
        if not self.t_g < self.t_m_observed <= self.t_m0:
            raise ValidityError(
                f"{where}: expected glass transition < observed melting <= equilibrium melting, "
                f"got {self.t_g:g} K, {self.t_m_observed:g} K, {self.t_m0:g} K"
            )
        if self.growth.t_m0 != self.t_m0:
            raise ValidityError(
                f"{where}: expected a growth law with the record's equilibrium melting "
                f"temperature {self.t_m0:g} K, got one with {self.growth.t_m0:g} K"
            )
        self._check_shares(where)

    def _check_shares(self, where: str) -> None:
        if self.crystallinity > 1.0:
            raise ValidityError(
                f"{where}: expected a crystallinity of at most 1, got {self.crystallinity:g}"
            )
        if self.birefringence is not None and not abs(self.birefringence) < 1.0:
            raise ValidityError(
                f"{where}: expected a birefringence between -1 and 1, got {self.birefringence:g}"
            )
        decades = self.site_decades
        if decades is not None and not 0.0 <= decades[0] <= decades[1] < math.inf:
            raise ValidityError(
                f"{where}: expected decades of sites from low to high, got {decades}"
            )
        for name in self.site_includes:
            if name not in SITE_OPTIONS:
                raise UnknownNameError("effect on sites", name, SITE_OPTIONS)

    @property
    def heat_of_fusion_volume(self) -> float:
        """Heat of fusion per volume of crystal [J m-3]."""
        return self.heat_of_fusion * self.density_crystal

    def undercooling(self, temperature: ArrayLike) -> NDArray[np.float64]:
        """Return how far a temperature lies below the equilibrium melting temperature.

        Parameters
        ----------
        temperature : array_like of float, shape (...)
            Absolute temperature [K].

        Returns
        -------
        undercooling : ndarray of float64, shape (...)
            Undercooling [K], negative above `t_m0`.
        """
        return np.asarray(self.t_m0 - np.asarray(temperature, dtype=np.float64))

    def at_pressure(self, pressure: float) -> MaterialRecord:
        """Return the record under a pressure, which moves melting and glass transition.

        Melting (equilibrium and observed) moves by `tm0_per_pressure`, the glass transition, and
        with it T_inf, by `tg_per_pressure`. Site laws are laws of the undercooling and so move
        along; all other values are kept.

        Parameters
        ----------
        pressure : float
            Absolute pressure [Pa], above 0 and up to 1e8; the record itself stands at 1e5 Pa.

        Returns
        -------
        record : MaterialRecord
            The moved record.

        Raises
        ------
        ValidityError
            If the pressure is out of its bounds, or differs from atmospheric pressure while the
            record does not say how temperatures move.

        References
        ----------
        .. [1] R. Fulchiron, E. Koscher, G. Poutot, D. Delaunay, G. Regnier, J. Macromol. Sci. Phys.
           40 (2001) 297. (seen as a citation)
        """
        where = f"record {self.name}"
        positive(where, pressure=pressure)
        if pressure > _HIGHEST_PRESSURE:
            raise ValidityError(
                f"{where}: expected a pressure up to 100 MPa, where melting and glass transition "
                f"move linearly, got {pressure / 1e6:g} MPa"
            )
        if math.isclose(pressure, REFERENCE_PRESSURE, rel_tol=0.05):  # the weather moves nothing
            return self
        if self.tm0_per_pressure is None or self.tg_per_pressure is None:
            raise ValidityError(
                f"{where}: expected tm0_per_pressure and tg_per_pressure (in K/MPa) for a pressure "
                f"of {pressure / 1e6:g} MPa; the record has none: add them or use 0.1 MPa"
            )
        tm0_shift = self.tm0_per_pressure * (pressure - REFERENCE_PRESSURE)
        tg_shift = self.tg_per_pressure * (pressure - REFERENCE_PRESSURE)
        return replace(
            self,
            t_m0=self.t_m0 + tm0_shift,
            t_g=self.t_g + tg_shift,
            t_m_observed=self.t_m_observed + tm0_shift,
            growth=self.growth.shifted(tm0_shift, tg_shift),
        )
