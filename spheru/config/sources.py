"""Tables of nuclei become sources: which law, which numbers, where they stand.

The laws themselves are in `spheru.material`; when and where nuclei start is `spheru.nuclei`.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from spheru.config.faults import Collecting
from spheru.config.models import (
    Activation,
    AgentNuclei,
    ClassicalNuclei,
    ExponentialNuclei,
    FixedNuclei,
    MaterialNuclei,
    SubstrateNuclei,
    SurfaceNuclei,
    TableNuclei,
)
from spheru.errors import Fault
from spheru.material.dosage import active_sites, dissolved_sites, particle_density
from spheru.material.growth_law import LauritzenHoffmanGrowth
from spheru.material.rate_law import ClassicalNucleation, SubstrateNucleation
from spheru.material.site_law import ActivatedSites, ExponentialSites, FixedSites, TableSites
from spheru.nuclei.activation import Athermal, Homogeneous, Thermal
from spheru.nuclei.placement import Clustered, Faces, Uniform
from spheru.nuclei.source import Source

if TYPE_CHECKING:
    from collections.abc import Sequence

    from spheru.config.models import Table
    from spheru.material.record import MaterialRecord
    from spheru.material.site_law import SiteLaw
    from spheru.nuclei.activation import Activation as When
    from spheru.nuclei.placement import Placement

__all__ = ["build_sources", "has_background"]

_NAMES = {MaterialNuclei: "background", ClassicalNuclei: "homogeneous"}


@dataclass(frozen=True, slots=True)
class _Place:
    """One table of nuclei: what it says, where it stands, where its faults go."""

    table: Any
    where: str
    faults: list[Fault]

    def fault(self, key: str, what: str) -> None:
        self.faults.append(Fault(where=f"{self.where}.{key}" if key else self.where, what=what))

    def exactly_one(self, *choices: str) -> bool:
        """Tell whether exactly one of some keys is given; else add the fault."""
        given = [key for key in choices if getattr(self.table, key) is not None]
        if len(given) == 1:
            return True
        listed = " or ".join(choices)
        if given:
            self.fault(given[1], f"stands beside {given[0]}; expected either {listed}, not both")
        else:
            self.fault(choices[0], f"is missing; expected either {listed}")
        return False

    def needs(self, because: str, *keys: str) -> bool:
        absent = [key for key in keys if getattr(self.table, key) is None]
        for key in absent:
            self.fault(key, f"is missing; {because} needs it")
        return not absent

    def refuses(self, because: str, *keys: str) -> bool:
        given = [key for key in keys if getattr(self.table, key) is not None]
        for key in given:
            self.fault(key, f"does not go with {because}; leave one of them out")
        return not given


def has_background(tables: Sequence[Table | None], background: bool) -> bool:
    """Tell whether the nuclei of the record's own site law take part.

    Parameters
    ----------
    tables : sequence of Table
        The tables ``[[nuclei]]``; None for one that could not be read.
    background : bool
        Whether the record's own sites are there unasked.

    Returns
    -------
    answer : bool
        True where they are there unasked or listed.
    """
    return background or any(isinstance(table, MaterialNuclei) for table in tables)


def build_sources(
    tables: Sequence[Table | None],
    record: MaterialRecord,
    *,
    background: bool,
    memory: float,
    faults: list[Fault],
) -> tuple[Source, ...]:
    """Build the sources of nuclei, the background first.

    Parameters
    ----------
    tables : sequence of Table
        The tables ``[[nuclei]]``; None for one that could not be read.
    record : MaterialRecord
        The material, with overrides and pressure in it.
    background : bool
        Whether the record's own sites are there unasked.
    memory : float
        Factor of the melt memory on the athermal sites that belong to the melt itself [-].
    faults : list of Fault
        Where faults are added.

    Returns
    -------
    sources : tuple of Source
        What could be built.
    """
    before = len(faults)
    made: list[tuple[str, When, Placement]] = []
    listed = [k for k, table in enumerate(tables) if isinstance(table, MaterialNuclei)]
    if listed and not background:
        faults.append(
            Fault(
                where="material.background",
                what=f"is false, but nuclei[{listed[0]}] asks for "
                "the record's own nuclei; leave out one of the two",
            )
        )
    faults.extend(
        Fault(where=f"nuclei[{k}]", what="the record's own nuclei are listed twice")
        for k in listed[1:]
    )
    if background and record.sites is not None and not listed:
        law = Athermal(law=record.sites, t_m0=record.t_m0, factor=memory)
        made.append(("background", law, Uniform()))
    for k, table in enumerate(tables):
        if table is None:
            continue
        place = _Place(table, f"nuclei[{k}]", faults)
        with Collecting(faults, place.where):
            found = _source(place, record, memory)
            if found is not None:
                made.append((_NAMES.get(type(table), getattr(table, "law", "")), *found))
    if not made and len(faults) == before and None not in tables:
        faults.append(Fault(where="nuclei", what=_advice(record, background)))
    made.sort(key=lambda source: source[0] != "background")
    total, seen = Counter(name for name, _, _ in made), Counter[str]()
    sources = []
    for name, activation, placement in made:
        seen[name] += 1
        title = name if total[name] == 1 else f"{name} {seen[name]}"
        sources.append(Source(name=title, activation=activation, placement=placement))
    return tuple(sources)


def _advice(record: MaterialRecord, background: bool) -> str:
    if record.sites is not None and not background:
        return (
            "expected at least one [[nuclei]], since background = false stands in [material]; "
            'add for example [[nuclei]] law = "fixed" density = "1e12 1/m^3"'
        )
    low, high = record.site_decades or (None, None)
    usual, middle = "how many there are is not known either", 12.0
    if low is not None and high is not None:
        usual, middle = f"usual are 1e{low:g} to 1e{high:g} per m3", (low + high) / 2
    return (
        f"the record '{record.name}' has no site law ({usual}); give one measured on your grade, "
        f'for example [[nuclei]] law = "fixed" density = "1e{middle:.0f} 1/m^3"'
    )


def _source(  # noqa: PLR0911 (one line a law)
    place: _Place, record: MaterialRecord, memory: float
) -> tuple[When, Placement] | None:
    table, t_m0 = place.table, record.t_m0
    if isinstance(table, MaterialNuclei):
        if record.sites is None:
            place.fault("law", _advice(record, background=True))
            return None
        factor = table.factor * memory
        return Athermal(law=record.sites, t_m0=t_m0, factor=factor), Uniform()
    if isinstance(table, FixedNuclei):
        return Athermal(law=FixedSites(number=table.density), t_m0=t_m0), Uniform()
    if isinstance(table, ExponentialNuclei):
        law: SiteLaw = ExponentialSites(a=table.a, b=table.b, ceiling=table.ceiling)
        return Athermal(law=law, t_m0=t_m0, factor=memory), Uniform()
    if isinstance(table, TableNuclei):
        if table.file is not None:  # it could not be read, and that is said already
            return None
        law = TableSites(undercooling=tuple(table.undercooling), number=tuple(table.density))
        return Athermal(law=law, t_m0=t_m0, factor=memory), Uniform()
    if isinstance(table, SurfaceNuclei):
        return _surface(place, t_m0)
    if isinstance(table, AgentNuclei):
        return _agent(place, record)
    return _classical(place, record)


def _surface(place: _Place, t_m0: float) -> tuple[When, Placement] | None:
    table = place.table
    if len(set(table.on)) < len(table.on):
        place.fault("on", f"expected each face once, got {', '.join(table.on)}")
        return None
    law: SiteLaw
    if table.density is not None:
        if not place.refuses("density", "a", "b", "ceiling"):
            return None
        law = FixedSites(number=table.density)
    else:
        if not place.needs("a surface without density", "a", "b", "ceiling"):
            return None
        law = ExponentialSites(a=table.a, b=table.b, ceiling=table.ceiling)
    faces = Faces(faces=tuple(("z", name.removeprefix("z-")) for name in table.on))
    return Athermal(law=law, t_m0=t_m0), faces


def _classical(place: _Place, record: MaterialRecord) -> tuple[When, Placement] | None:
    table, growth = place.table, record.growth
    mobility = table.mobility_energy
    if mobility is None and isinstance(growth, LauritzenHoffmanGrowth):
        mobility = growth.u_star
    energies = {"lateral_surface_energy": table.lateral_surface_energy}
    block = table.shape == "block"
    if block:
        energies["fold_surface_energy"] = table.fold_surface_energy
        fits = place.refuses(
            'shape = "block"',
            *({"contact_angle", "particle_radius"} & set(type(table).model_fields)),
        )
    else:
        fits = place.refuses(
            'shape = "sphere"',
            "fold_surface_energy",
            *({"interfacial_energy_difference"} & set(type(table).model_fields)),
        )
    for name, given in energies.items():
        energies[name] = getattr(record, name) if given is None else given
        if energies[name] is None:
            place.fault(name, "is missing; the record has none, expected one like '10 mJ/m^2'")
    if mobility is None:
        place.fault(
            "mobility_energy", "is missing; the growth law has none, expected one like '6270 J/mol'"
        )
    if isinstance(table, SubstrateNuclei):
        key = "interfacial_energy_difference" if block else "contact_angle"
        fits &= place.needs(f"a {table.shape} on a substrate", key)
    if not fits or mobility is None or None in energies.values():
        return None
    common = {
        "shape": table.shape,
        "prefactor": table.prefactor,
        "u_star": mobility,
        "t_inf": growth.t_inf,
        "t_m0": record.t_m0,
        "heat_of_fusion_volume": record.heat_of_fusion_volume,
        "sigma": energies["lateral_surface_energy"],
        "sigma_e": energies.get("fold_surface_energy"),
        "driving_force_factor": table.driving_force_factor,
    }
    if isinstance(table, ClassicalNuclei):
        return Homogeneous(law=ClassicalNucleation(**common)), Uniform()
    law = SubstrateNucleation(
        **common,
        sigma_difference=table.interfacial_energy_difference,
        contact_angle=table.contact_angle,
        particle_radius=table.particle_radius,
    )
    return Thermal(law=law, number=table.density), Uniform()


def _agent(place: _Place, record: MaterialRecord) -> tuple[When, Placement] | None:
    table: AgentNuclei = place.table
    number = _dissolving(place) if table.sites_per_ppm is not None else _particles(place, record)
    if number is None:
        return None
    start = table.activation
    if isinstance(start, Activation):
        law = ActivatedSites(number=number, activation=start.mean, spread=start.spread)
    else:
        law = ActivatedSites(number=number, activation=start)
    where: Placement = Uniform()
    if table.cluster is not None:
        where = Clustered(mean_number=table.cluster.mean_number, radius=table.cluster.radius)
    return Athermal(law=law, t_m0=record.t_m0), where


def _dissolving(place: _Place) -> float | None:
    table = place.table
    fits = place.refuses("sites_per_ppm", "particle", "active", "loss", "cluster")
    fits &= place.needs("an agent with sites_per_ppm", "threshold")
    if not fits:
        return None
    return dissolved_sites(
        table.dose * 1e6, sites_per_ppm=table.sites_per_ppm, threshold_ppm=table.threshold * 1e6
    )


def _particles(place: _Place, record: MaterialRecord) -> float | None:
    table = place.table
    fits = place.refuses("particle", "threshold") if table.particle is not None else True
    fits &= place.exactly_one("particle", "sites_per_ppm")
    fits &= place.needs("an agent of particles", "active")
    if table.loss is not None and table.cluster is not None:
        place.fault(
            "cluster",
            "stands beside loss; both describe the same agglomerates: give either the share lost "
            "or the clusters",
        )
        fits = False
    if table.particle is None:
        return None
    sizes = _Place(table.particle, f"{place.where}.particle", place.faults)
    if not sizes.exactly_one("d50_volume", "d50_number") or not fits:
        return None
    by_volume = table.particle.d50_volume is not None
    particles = 0.0
    if table.dose > 0:
        particles = particle_density(
            table.dose,
            d50=table.particle.d50_volume if by_volume else table.particle.d50_number,
            spread=table.particle.spread,
            basis="volume" if by_volume else "number",
            particle_density=table.particle.density,
            polymer_density=record.density_melt,
        )
    return active_sites(particles, active=table.active, loss=table.loss or 0.0)
