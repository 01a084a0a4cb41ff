"""The shape of a settings file and of a material record: keys, units, bounds, meanings.

One model a table, read by pydantic; numbers come out in SI units. What must hold between keys is
checked where the records are built, and the faults are put in words in `spheru.config.faults`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Any, Final, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Field, Tag
from pydantic_core import PydanticCustomError, core_schema

from spheru.errors import UnitError
from spheru.units import describe, to_si

__all__ = ["Document", "Material", "Quantity", "Record", "Table"]

# For editors only: a number with a decimal point, then a unit; `spheru.units` knows better.
_PATTERN: Final = (
    r"^\s*[-+−]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?"
    r"(\s*(?![eE][-+]?\d)[^\s\d.,].*|\s+1\s*/.*)$"
)


@dataclass(frozen=True, slots=True)
class Quantity:
    """Annotation of a float that stands in the file as text with a unit.

    Attributes
    ----------
    unit : str
        SI unit of the float.
    difference : bool
        Whether a temperature is a difference.
    low : {"above", "from", None}
        Whether the number lies above 0, or at or above 0.
    most : float or None
        Largest value in SI units.
    """

    unit: str
    difference: bool = False
    low: Literal["above", "from"] | None = None
    most: float | None = None

    @property
    def expected(self) -> str:
        """What is expected, in words."""
        kind, example = describe(self.unit, difference=self.difference)
        bound = f" {self.low} 0" if self.low else ""
        if self.most is not None:
            bound += f"{' up' if self.low != 'from' else ''} to {self.most * 100:g} %"
        return f"{kind}{bound} such as '{example}'" if bound else f"{kind} like '{example}'"

    def parse(self, given: object) -> float:
        """Return the value in SI units, or say what is wrong with it."""
        try:
            value = to_si(given, self.unit, difference=self.difference)  # type: ignore[arg-type]  # to_si answers for it
        except UnitError as fault:
            raise PydanticCustomError("quantity", "{why}", {"why": str(fault)}) from None
        below = (self.low == "above" and value <= 0) or (self.low == "from" and value < 0)
        if below or (self.most is not None and value > self.most):
            why = f"expected {self.expected}, got '{given}'"
            raise PydanticCustomError("quantity", "{why}", {"why": why})
        return value

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> core_schema.CoreSchema:
        """Read the text in place of pydantic's own reading of floats."""
        del source, handler
        return core_schema.no_info_plain_validator_function(self.parse)

    def __get_pydantic_json_schema__(self, schema: Any, handler: Any) -> dict[str, Any]:
        """Describe the text for editors."""
        del schema, handler
        _, example = describe(self.unit, difference=self.difference)
        return {
            "type": "string",
            "pattern": _PATTERN,
            "examples": [example],
        }


Temperature = Annotated[float, Quantity("K")]
Difference = Annotated[float, Quantity("K", difference=True, low="from")]
Rate = Annotated[float, Quantity("K/s")]
Time = Annotated[float, Quantity("s", low="above")]
Length = Annotated[float, Quantity("m", low="above")]
PerVolume = Annotated[float, Quantity("1/m^3", low="from")]
PerArea = Annotated[float, Quantity("1/m^2", low="from")]
Slope = Annotated[float, Quantity("1/K", low="above")]
Density = Annotated[float, Quantity("kg/m^3", low="above")]
SurfaceEnergy = Annotated[float, Quantity("J/m^2", low="from")]
Share = Annotated[float, Quantity("1", low="from", most=1.0)]
GrowthRate = Annotated[float, Quantity("m/s", low="above")]
Shift = Annotated[float, Quantity("K/Pa", low="from")]
MolarMass = Annotated[float, Quantity("kg/mol", low="above")]
Energy = Annotated[float, Quantity("J/mol", low="from")]


class Table(BaseModel):
    """A table of a file: no unknown key, nothing converted silently."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, defer_build=True)


def _tag_by_law(table: Any) -> str | None:
    law = table.get("law") if isinstance(table, dict) else getattr(table, "law", None)
    return f"<{law}>" if law is not None else None


# ---------------------------------------------------------------- settings


class Material(Table):
    """The material, with whatever of its record is overridden."""

    model_config = ConfigDict(extra="allow")

    name: str | None = Field(None, description="Name of a shipped record.")
    file: str | None = Field(None, description="A record of your own, in place of a name.")
    pressure: Annotated[float, Quantity("Pa", low="above")] | None = Field(
        None, description="Pressure in the melt; shifts melting and glass transition."
    )
    background: bool = Field(
        True, description="Whether the nuclei of the record's own site law are there."
    )


class RampStep(Table):
    """A linear ramp, to a temperature or for a time."""

    rate: Rate = Field(description="Cooling rate, positive for cooling, negative for heating.")
    until: Temperature | None = Field(None, description="Temperature at which the ramp ends.")
    for_: Time | None = Field(None, alias="for", description="Time that the ramp takes.")


class HoldStep(Table):
    """A hold at the temperature reached before."""

    hold: Time = Field(description="Time at the temperature reached before.")


class QuenchStep(Table):
    """An exponential approach to the temperature of a bath."""

    quench: Temperature = Field(description="Temperature of the bath.")
    time_constant: Time = Field(description="Time in which the difference falls to 1/e.")
    for_: Time = Field(alias="for", description="Time in the bath.")


def _tag_step(step: Any) -> str:
    known = step if isinstance(step, dict) else ()
    return next((f"<{key}>" for key in ("quench", "hold") if key in known), "<rate>")


Step = Annotated[
    Annotated[RampStep, Tag("<rate>")]
    | Annotated[HoldStep, Tag("<hold>")]
    | Annotated[QuenchStep, Tag("<quench>")],
    Discriminator(_tag_step),
]


class Cooling(Table):
    """Temperature over time: a start and steps, or a measured trace."""

    start: Temperature | None = Field(None, description="Temperature of the melt at the start.")
    steps: list[Step] | None = Field(
        None,
        min_length=1,
        description="Steps one after another: { rate, until }, { rate, for }, { hold } or "
        "{ quench, time_constant, for }.",
    )
    trace: str | None = Field(
        None,
        description="CSV file with the columns time and temperature, units in the header; in place "
        "of start and steps. Its path counts from the folder of the settings.",
    )


class MaterialNuclei(Table):
    """The record's own site law; there even if it is not listed."""

    law: Literal["material"]
    factor: float = Field(1.0, gt=0, description="Multiplies the number of sites [-].")


class FixedNuclei(Table):
    """A number of nuclei per volume that are active from the start."""

    law: Literal["fixed"]
    density: PerVolume = Field(description="Number of nuclei per volume.")


class ExponentialNuclei(Table):
    """Sites exp(a dT + b) per m3 up to a ceiling, with the undercooling dT."""

    law: Literal["exponential"]
    a: Slope = Field(description="Slope of ln N over undercooling.")
    b: float = Field(description="ln of the number per m3 at no undercooling [-].")
    ceiling: PerVolume = Field(description="Largest number per volume.")


class TableNuclei(Table):
    """Sites against undercooling, log-linear between the points."""

    law: Literal["table"]
    undercooling: list[Difference] = Field(description="Undercoolings, rising.")
    density: list[PerVolume] = Field(description="Number of sites active by then, not falling.")
    file: str | None = Field(
        None, description="CSV with the columns undercooling and density, in place of the lists."
    )


class _ClassicalTable(Table):
    shape: Literal["block", "sphere"] = Field(
        "block", description="Shape of the nucleus: chain-folded block, or sphere."
    )
    lateral_surface_energy: SurfaceEnergy | None = Field(
        None, description="Energy of the lateral surface, of the sphere; else the record's."
    )
    fold_surface_energy: SurfaceEnergy | None = Field(
        None, description="Energy of the fold surface (block); else the record's."
    )
    mobility_energy: Energy | None = Field(
        None, description="Activation energy of transport; else that of the growth law."
    )
    driving_force_factor: bool = Field(
        True, description="Whether 2T/(Tm0 + T) stands in the driving force."
    )


class ClassicalNuclei(_ClassicalTable):
    """Homogeneous nucleation at a rate per volume, by the classical theory."""

    law: Literal["classical"]
    prefactor: Annotated[float, Quantity("1/(m^3 s)", low="above")] = Field(
        description="Attempts per volume and time."
    )


class SubstrateNuclei(_ClassicalTable):
    """Equal sites that start at random, by the classical theory on a substrate."""

    law: Literal["substrate"]
    density: PerVolume = Field(description="Number of sites per volume.")
    prefactor: Annotated[float, Quantity("1/s", low="above")] = Field(
        description="Attempts of one site per time."
    )
    interfacial_energy_difference: SurfaceEnergy | None = Field(
        None, description="Interfacial-energy difference of the substrate (block)."
    )
    contact_angle: Annotated[float, Quantity("rad", low="from")] | None = Field(
        None, description="Contact angle (sphere)."
    )
    particle_radius: Length | None = Field(
        None, description="Radius of the particle (sphere); flat where it is not given."
    )


class SurfaceNuclei(Table):
    """Nuclei on the faces of the sample: a fixed number per area, or exp(a dT + b)."""

    law: Literal["surface"]
    on: list[Literal["z-low", "z-high"]] = Field(
        min_length=1, description="Faces that carry the nuclei; the number counts for each."
    )
    density: PerArea | None = Field(None, description="Number per area, active from the start.")
    a: Slope | None = Field(None, description="Slope of ln N over undercooling.")
    b: float | None = Field(None, description="ln of the number per m2 at no undercooling [-].")
    ceiling: PerArea | None = Field(None, description="Largest number per area.")


class Particle(Table):
    """The particles of an agent: a log-normal distribution of sizes."""

    d50_volume: Length | None = Field(None, description="Median diameter by volume.")
    d50_number: Length | None = Field(None, description="Median diameter by number.")
    spread: float = Field(
        ge=1, description="Geometric standard deviation of the diameters [-], 1 for equal ones."
    )
    density: Density = Field(description="Density of the particles.")


class Cluster(Table):
    """Agglomerates: particles in clusters (Neyman-Scott process)."""

    mean_number: float = Field(gt=0, description="Mean number of active particles in a cluster.")
    radius: Length = Field(description="Radius of a cluster.")


class Activation(Table):
    """Undercooling at which particles start, with its spread."""

    mean: Difference = Field(description="Mean undercooling at which a particle starts.")
    spread: Difference = Field(description="Standard deviation of that undercooling.")


def _tag_activation(given: Any) -> str:
    return "<table>" if isinstance(given, dict | Activation) else "<one>"


class AgentNuclei(Table):
    """A nucleating agent: dose, particles, the share of them that works, and when."""

    law: Literal["agent"]
    dose: Share = Field(description="Mass share of the agent in the compound.")
    particle: Particle | None = Field(None, description="Particles of an insoluble agent.")
    active: float | None = Field(
        None, gt=0, le=1, description="Share of the particles that can ever start a crystal [-]."
    )
    activation: Annotated[
        Annotated[Difference, Tag("<one>")] | Annotated[Activation, Tag("<table>")],
        Discriminator(_tag_activation),
    ] = Field(description="Undercooling at which they start: one value, or { mean, spread }.")
    loss: float | None = Field(
        None, ge=0, lt=1, description="Share of the sites lost to agglomeration [-]."
    )
    cluster: Cluster | None = Field(None, description="Agglomerates as clusters, in place of loss.")
    sites_per_ppm: PerVolume | None = Field(
        None, description="Sites per ppm beyond the threshold, of an agent that dissolves."
    )
    threshold: Share | None = Field(
        None, description="Dose up to which the agent stays dissolved and idle."
    )


Nuclei = Annotated[
    Annotated[MaterialNuclei, Tag("<material>")]
    | Annotated[FixedNuclei, Tag("<fixed>")]
    | Annotated[ExponentialNuclei, Tag("<exponential>")]
    | Annotated[TableNuclei, Tag("<table>")]
    | Annotated[ClassicalNuclei, Tag("<classical>")]
    | Annotated[SubstrateNuclei, Tag("<substrate>")]
    | Annotated[SurfaceNuclei, Tag("<surface>")]
    | Annotated[AgentNuclei, Tag("<agent>")],
    Discriminator(_tag_by_law),
]

EdgeName = Literal["periodic", "cut", "closed"]


class Edges(Table):
    """What happens at the edges, axis by axis."""

    x: EdgeName = Field("periodic", description="Edges across x.")
    y: EdgeName = Field("periodic", description="Edges across y.")
    z: EdgeName | None = Field(None, description="Edges across z; closed in a film.")


def _tag_edges(given: Any) -> str:
    return "<table>" if isinstance(given, dict | Edges) else "<one>"


class Sample(Table):
    """What is looked at: view, window, pixel, edges."""

    view: Literal["section", "block", "film", "plane"] = Field(
        description="A plane cut of a bulk sample, a volume, a film between two faces, or growth "
        "in a layer far thinner than its spherulites."
    )
    size: list[Length] | None = Field(
        None, description="Edges of the window: x, y, in a block also z."
    )
    spherulites: int | None = Field(
        None, ge=1, description="Number of spherulites wanted in the picture, in place of size."
    )
    pixel: Length | None = Field(None, description="Edge of a pixel.")
    pixels_across: float | None = Field(
        None, ge=1, description="Pixels across a typical spherulite, in place of pixel; 25 if none."
    )
    edges: Annotated[
        Annotated[EdgeName, Tag("<one>")] | Annotated[Edges, Tag("<table>")],
        Discriminator(_tag_edges),
    ] = Field(
        "periodic",
        description="periodic, cut (out of a larger body) or closed (real walls); or per axis.",
    )
    thickness: Length | None = Field(None, description="Thickness of a film or a plane layer.")
    sight: Literal["mid", "face", "through"] | None = Field(
        None, description="How the picture of a film is taken; mid if none."
    )


class Memory(Table):
    """Nuclei left over in a melt that was not heated enough."""

    slope: Slope = Field(description="Slope of ln N against the melt temperature.")
    erase_temperature: Temperature = Field(description="From here on nothing is remembered.")
    time: Time = Field(description="Time constant with which the surplus decays.")
    melt_temperature: Temperature | None = Field(
        None, description="Highest temperature of the melt; else that of the history."
    )
    hold: Annotated[float, Quantity("s", low="from")] | None = Field(
        None, description="Time spent there; else that of the history."
    )


class InductionTable(Table):
    """A delay t = time (dT/1 K)^(-exponent) that must pass before anything starts."""

    time: Time = Field(description="Induction time at an undercooling of 1 K.")
    exponent: float = Field(gt=0, description="How steeply it falls with undercooling [-].")


class Document(Table):
    """Settings of a run of spheru."""

    title: str | None = Field(None, description="What the run is called.")
    seed: int = Field(0, ge=0, description="Seed of the random numbers, a whole number.")
    material: Material = Field(description="What crystallises; record values may be overridden.")
    cooling: Cooling = Field(description="How it cools.")
    nuclei: list[Nuclei] = Field(
        default_factory=list, description="Where nuclei come from, beside the material's own."
    )
    sample: Sample = Field(description="What is looked at.")
    memory: Memory | None = Field(None, description="Melt memory, if any.")
    induction: InductionTable | None = Field(None, description="Induction time, if any.")


# ---------------------------------------------------------------- material record


class Transitions(Table):
    """Temperatures at which the material changes."""

    equilibrium_melting: Temperature = Field(description="Equilibrium melting temperature.")
    observed_melting: Temperature = Field(description="Where real crystals are seen to melt.")
    glass: Temperature = Field(description="Glass transition.")
    melting_per_pressure: Shift | None = Field(None, description="Shift of melting.")
    glass_per_pressure: Shift | None = Field(None, description="Shift of the glass transition.")


class MolarMassTable(Table):
    """Molar mass of the grade, and how the growth rate falls with it."""

    value: MolarMass = Field(description="Molar mass of the grade.")
    reference: MolarMass = Field(description="Molar mass for which the law was fitted.")
    exponent: float = Field(ge=0, description="G falls as the molar mass to this power [-].")


class BranchTable(Table):
    """One branch (regime) of a growth law."""

    prefactor: GrowthRate = Field(description="Prefactor G0.")
    constant: Annotated[float, Quantity("K^2", low="above")] = Field(
        description="Nucleation constant Kg."
    )
    from_: Temperature | None = Field(None, alias="from", description="Lower end of the branch.")
    to: Temperature | None = Field(None, description="Upper end of the branch.")


class _GrowthTable(Table):
    mobility_temperature: Temperature = Field(description="Temperature T_inf of no mobility.")
    molar_mass: MolarMassTable | None = Field(None, description="Another molar mass.")


class LauritzenHoffmanTable(_GrowthTable):
    """Growth by the Lauritzen-Hoffman law."""

    law: Literal["lauritzen-hoffman"]
    mobility_energy: Energy = Field(description="Activation energy U* of transport.")
    driving_force_factor: bool = Field(description="Whether 2T/(Tm0 + T) stands in the law.")
    fitted_range: list[Temperature] | None = Field(
        None, min_length=2, max_length=2, description="Temperatures between which it was fitted."
    )
    branches: list[BranchTable] = Field(min_length=1, description="Branches, adjoining.")


class BellTable(_GrowthTable):
    """Growth by a bell curve."""

    law: Literal["bell"]
    maximum: GrowthRate = Field(description="Largest growth rate.")
    maximum_temperature: Temperature = Field(description="Where it is largest.")
    curvature: Annotated[float, Quantity("1/K^2", low="above")] = Field(
        description="c of exp(-c (T - T_max)^2)."
    )
    fitted_range: list[Temperature] | None = Field(
        None, min_length=2, max_length=2, description="Temperatures between which it was fitted."
    )


class GrowthRateTable(_GrowthTable):
    """Measured growth rates."""

    law: Literal["table"]
    temperature: list[Temperature] = Field(description="Temperatures, rising.")
    rate: list[GrowthRate] = Field(description="Growth rates.")
    file: str | None = Field(
        None, description="CSV with the columns temperature and growth_rate, in place of the lists."
    )


class ExponentialSitesTable(Table):
    """Sites exp(slope dT + intercept) per m3 up to a ceiling."""

    law: Literal["exponential"]
    slope: Slope = Field(description="Slope of ln N over undercooling.")
    intercept: float = Field(description="ln of the number per m3 at no undercooling [-].")
    ceiling: Annotated[float, Quantity("1/m^3", low="above")] = Field(
        description="Largest number per volume."
    )
    fitted_range: list[Difference] | None = Field(
        None, min_length=2, max_length=2, description="Undercoolings between which it was fitted."
    )
    includes: list[Literal["melt memory", "induction"]] = Field(
        default_factory=list, description="Effects that the data contain already."
    )


class FixedSitesTable(Table):
    """A fixed number of sites."""

    law: Literal["fixed"]
    number: PerVolume = Field(description="Number of sites per volume.")
    includes: list[Literal["melt memory", "induction"]] = Field(
        default_factory=list, description="Effects that the data contain already."
    )


class SitesTable(Table):
    """Sites against undercooling."""

    law: Literal["table"]
    undercooling: list[Difference] = Field(description="Undercoolings, rising.")
    number: list[PerVolume] = Field(description="Number of sites active by then.")
    file: str | None = Field(
        None, description="CSV with the columns undercooling and number, in place of the lists."
    )
    includes: list[Literal["melt memory", "induction"]] = Field(
        default_factory=list, description="Effects that the data contain already."
    )


class DecadesTable(Table):
    """No law is known, only the usual size of the number of sites."""

    decades: list[float] = Field(
        min_length=2, max_length=2, description="log10 of the usual number per m3, low and high."
    )


def _tag_sites(table: Any) -> str | None:
    if isinstance(table, dict) and "law" not in table and "decades" in table:
        return "<decades>"
    return _tag_by_law(table)


class Body(Table):
    """Densities, heat, optics and surface energies."""

    density_crystal: Density = Field(description="Density of the crystal.")
    density_amorphous: Density = Field(description="Density of the amorphous solid.")
    density_melt: Density = Field(description="Density of the melt.")
    heat_of_fusion: Annotated[float, Quantity("J/kg", low="above")] = Field(
        description="Heat of fusion of the perfect crystal."
    )
    crystallinity: float = Field(
        gt=0, le=1, description="Mass share of crystal inside a spherulite [-]."
    )
    birefringence: float | None = Field(
        None, description="Radial less tangential refractive index [-]."
    )
    lateral_surface_energy: SurfaceEnergy | None = Field(None, description="Lateral surface.")
    fold_surface_energy: SurfaceEnergy | None = Field(None, description="Fold surface.")


class Uncertainty(Table):
    """Factors by which growth rate and number of sites are uncertain."""

    growth_factor: float = Field(ge=1, description="Factor of the growth rate [-].")
    site_factor: float = Field(ge=1, description="Factor of the number of sites [-].")


class Record(Table):
    """A material record of spheru."""

    name: str = Field(description="Name to ask for, in small letters with hyphens.")
    title: str = Field(description="Name to print.")
    note: str = Field("", description="What the user of the record should know.")
    transitions: Transitions = Field(description="Temperatures of transitions.")
    growth: Annotated[
        Annotated[LauritzenHoffmanTable, Tag("<lauritzen-hoffman>")]
        | Annotated[BellTable, Tag("<bell>")]
        | Annotated[GrowthRateTable, Tag("<table>")],
        Discriminator(_tag_by_law),
    ] = Field(description="Growth rate against temperature.")
    sites: (
        Annotated[
            Annotated[ExponentialSitesTable, Tag("<exponential>")]
            | Annotated[FixedSitesTable, Tag("<fixed>")]
            | Annotated[SitesTable, Tag("<table>")]
            | Annotated[DecadesTable, Tag("<decades>")],
            Discriminator(_tag_sites),
        ]
        | None
    ) = Field(None, description="The material's own sites.")
    body: Body = Field(description="Densities, heat, optics, surfaces.")
    uncertainty: Uncertainty = Field(description="How far the numbers may be off.")
