"""What a run will give, by mean field: the numbers that stand beside every simulation.

No random number and no compiler: this answers before a run is started.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru.constants import ZERO_CELSIUS
from spheru.run.course import Course, landmarks
from spheru.run.kinetics import kinetics
from spheru.run.plan import plan, typical_diameter

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.material.record import MaterialRecord
    from spheru.run.course import Landmarks
    from spheru.run.kinetics import Kinetics
    from spheru.run.plan import Plan
    from spheru.run.settings import Sample, Settings

__all__ = ["Estimate", "course_numbers", "estimate"]

_SMOOTHING: Final = 0.01  # the mean field needs hardly any
_OUTSIDE: Final = 0.05  # share of the conversion outside a fitted range that is worth a warning
_WHOLE: Final = 0.99
_COARSE: Final = 4000  # nodes are enough for the range that the record's factors give


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """The mean-field answer to a settings file.

    Attributes
    ----------
    settings : Settings
        The settings with window and pixel settled.
    kinetics : Kinetics
        The course of crystallisation.
    plan : Plan
        What a run would do.
    landmarks : Landmarks
        Peak, onset and half time.
    numbers : mapping of str to float, str or None
        Headline numbers, the unit in every key; the object that ``spheru estimate --json`` prints.
    warnings : tuple of str
        What must be said with the numbers.
    """

    settings: Settings
    kinetics: Kinetics
    plan: Plan
    landmarks: Landmarks
    numbers: Mapping[str, Any]
    warnings: tuple[str, ...]


def estimate(settings: Settings) -> Estimate:
    """Predict a run by mean field, and settle its window and pixel.

    Parameters
    ----------
    settings : Settings
        What is asked for.

    Returns
    -------
    estimate : Estimate
        Numbers, plan and warnings.

    Raises
    ------
    NoCrystallisationError, MeltingError, ValidityError
        If the history or the sample makes no sense.
    """
    found = kinetics(settings)
    made = plan(settings, found)
    settled = replace(settings, sample=made.sample)
    course = Course(time=found.clock.time, fraction=found.fraction)
    marks = landmarks(course, found.clock, settings.material.t_m0, smoothing=_SMOOTHING)
    numbers: dict[str, Any] = {
        "spherulites": made.spherulites,
        **_structure_numbers(made.sample, found),
        "fraction_transformed": float(found.fraction[-1]),
        "crystallinity": float(found.fraction[-1]) * settings.material.crystallinity,
        **course_numbers(marks),
        "kinetic_uncertainty": _uncertainty(settings, made.sample, found),
        "run": _run_numbers(made),
    }
    return Estimate(
        settings=settled,
        kinetics=found,
        plan=made,
        landmarks=marks,
        numbers=numbers,
        warnings=(*settings.warnings, *_warnings(settings, found, made)),
    )


def course_numbers(marks: Landmarks) -> dict[str, Any]:
    """Return the landmarks of a crystallisation curve under their names in summary.json.

    Parameters
    ----------
    marks : Landmarks
        What was read off the curve.

    Returns
    -------
    numbers : dict
        Temperatures in degC, times in s; None where there is none.
    """

    def celsius(temperature: float | None) -> float | None:
        return None if temperature is None else temperature - ZERO_CELSIUS

    return {
        "peak_temperature_C": celsius(marks.peak_temperature),
        "onset_temperature_C": celsius(marks.onset_temperature),
        "half_temperature_C": celsius(marks.half_temperature),
        "half_time_s": marks.half_time,
        "half_time_from": marks.half_time_from,
        "mean_crystallisation_time_s": marks.mean_time,
        "rate_maxima": [
            {"temperature_C": temperature - ZERO_CELSIUS, "height": height}
            for temperature, height in marks.peaks
        ],
    }


def _structure_numbers(sample: Sample, found: Kinetics) -> dict[str, Any]:
    """Return counts, sizes and boundaries, those that the view has."""
    bulk, film, final = found.bulk, found.film, float(found.fraction[-1])
    numbers: dict[str, Any] = {}
    per_volume = bulk.number_density
    if sample.view == "plane" and sample.thickness is not None:
        numbers["section_count_per_mm2"] = bulk.number_density * 1e-6
        per_volume = bulk.number_density / sample.thickness
    elif film is not None and sample.size is not None:
        per_volume = film.number_per_area / sample.size[0]
    elif sample.view == "section":
        count = bulk.section_count if final > _WHOLE else None  # Euler's count needs whole cells
        numbers["section_count_per_mm2"] = None if count is None else count * 1e-6
    numbers |= {
        "number_density_per_mm3": per_volume * 1e-9,
        "diameter_of_mean_volume_um": (6 * final / (math.pi * per_volume)) ** (1 / 3) * 1e6,
    }
    if sample.dimension == 2:
        numbers["diameter_of_mean_area_um"] = typical_diameter(sample, found) * 1e6
    if film is None:
        boundary = bulk.boundary_density
        shown = boundary * math.pi / 4 if sample.view == "section" else boundary
        intercept = 2 / boundary if sample.growth_dimension == 3 else math.pi / (2 * boundary)
        numbers |= {
            "boundary_density_per_mm": shown * 1e-3,
            "mean_intercept_um": intercept * 1e6 if final > _WHOLE else None,
        }
        if bulk.triple_line_density is not None:
            numbers["triple_line_density_per_mm2"] = bulk.triple_line_density * 1e-6
    return numbers


def _uncertainty(settings: Settings, sample: Sample, found: Kinetics) -> dict[str, Any]:
    """Return the range of size that follows from the record's factors for G and N."""
    material, clock = settings.material, found.clock
    sizes, halves = [], []
    every = max(1, len(clock.time) // _COARSE)
    for growth in (1 / material.growth_factor, material.growth_factor):
        for sites in (1 / material.site_factor, material.site_factor):
            other = found.scaled(growth=growth, sites=sites, every=every)
            sizes.append(typical_diameter(sample, other) * 1e6)
            half = Course(time=clock.time[::every], fraction=other.fraction).reaches(0.5)
            halves.append(float(clock.temperature_at(np.array([half]))[0]) - ZERO_CELSIUS)
    return {
        "growth_factor": material.growth_factor,
        "site_factor": material.site_factor,
        "typical_diameter_low_um": min(sizes),
        "typical_diameter_high_um": max(sizes),
        "half_temperature_low_C": min(halves),
        "half_temperature_high_C": max(halves),
    }


def _run_numbers(made: Plan) -> dict[str, Any]:
    return {
        "pixels": list(made.frame.shape[::-1]),
        "pixel_um": made.frame.pixel * 1e6,
        "size_um": [edge * 1e6 for edge in made.frame.extent[::-1]],
        "candidate_nuclei": made.candidates,
        "memory_GB": made.memory * 1e-9,
        "seconds_about": made.seconds,
    }


def _warnings(settings: Settings, found: Kinetics, made: Plan) -> list[str]:
    return [
        *_doubts_of_size(found, made),
        *_doubts_of_laws(settings.material, found),
        *_doubts_of_estimate(settings, made),
    ]


def _doubts_of_size(found: Kinetics, made: Plan) -> list[str]:
    notes = []
    final = float(found.fraction[-1])
    if final < _WHOLE:
        notes.append(
            f"not fully crystallised: {100 * final:.3g} % of the material has transformed when "
            "the history ends; the rest is label 0 (spherulites expected in a section are then "
            "counted as if they hardly touched: a few fewer will be seen)"
        )
    if made.spherulites < 100:
        notes.append(
            f"few spherulites: about {made.spherulites:.3g} in the picture; below 100 the spread "
            "is hardly known, choose a larger window"
        )
    across = typical_diameter(made.sample, found) / made.frame.pixel
    if across < 10:
        notes.append(
            f"coarse pixels: {across:.2g} across a typical spherulite; below 10 sizes, counts and "
            "boundaries are biased, choose a smaller pixel"
        )
    return notes


def _doubts_of_laws(material: MaterialRecord, found: Kinetics) -> list[str]:
    """Say where the conversion leaves the fitted ranges, where branches meet, what is recalled."""
    notes, clock = [], found.clock
    gained = np.diff(found.fraction, prepend=0.0) / found.fraction[-1]
    ranges = {"growth law": material.growth.fitted_range}
    own = any(getattr(s.activation, "law", None) is material.sites for s in found.sources)
    if own and material.sites is not None and material.sites.fitted_range is not None:
        low, high = material.sites.fitted_range
        ranges["site law"] = (material.t_m0 - high, material.t_m0 - low)
    for name, span in ranges.items():
        if span is None:
            continue
        outside = (clock.temperature < span[0]) | (clock.temperature > span[1])
        if (share := float(gained[outside].sum())) > _OUTSIDE:
            notes.append(
                f"{100 * share:.3g} % of the conversion lies outside the range in which the {name} "
                f"was fitted ({span[0] - ZERO_CELSIUS:.0f} to {span[1] - ZERO_CELSIUS:.0f} degC)"
            )
    notes.extend(
        f"the growth rate jumps by a factor of {ratio:.3g} at {at - ZERO_CELSIUS:.1f} degC, "
        "where two branches of the record meet"
        for at, ratio in material.growth.jumps()
        if clock.lowest_temperature[-1] < at < clock.temperature[0]
    )
    recalled = sum(p.mark == "memory" for p in material.provenance.values())
    if recalled:
        notes.append(
            f"{recalled} values of the record '{material.name}' are from memory, not checked "
            f"against their source; spheru materials {material.name} shows which"
        )
    return notes


def _doubts_of_estimate(settings: Settings, made: Plan) -> list[str]:
    notes = []
    if settings.clustered:
        notes.append(
            "the mean field spreads particles evenly; in clusters they act like fewer nuclei, so "
            "that the material crystallises later and the sizes spread more"
        )
    closed = [n for n, e in zip("xyz", made.sample.edges[::-1], strict=False) if e == "closed"]
    if any(name != "z" for name in closed):
        notes.append("the mean field leaves the closed walls across x and y out of account")
    return notes
