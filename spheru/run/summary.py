"""The headline numbers of a run, each with its 95 % interval, and what must be said with them.

What is measured stands elsewhere; here it gets its name and unit.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru import __version__
from spheru.constants import ZERO_CELSIUS
from spheru.measure.intervals import TILES, Statistic, tile_interval, tile_waves
from spheru.run.estimate import course_numbers

if TYPE_CHECKING:
    from spheru.births import Births
    from spheru.measure.sizes import Sizes
    from spheru.run.course import Landmarks
    from spheru.run.estimate import Estimate
    from spheru.run.result import Conversion

__all__ = ["FORMAT_VERSION", "SCOPE", "summarise"]

FORMAT_VERSION: Final = 1
SCOPE: Final = (
    "A quiescent melt (no flow-induced nucleation), primary crystallisation, no melting. "
    "Predictions rank and explain; they do not qualify a part."
)


def summarise(
    expected: Estimate,
    births: Births,
    owners: Births,
    sizes: Sizes,
    curves: Conversion,
    *,
    replica: int,
) -> tuple[dict[str, Any], tuple[str, ...]]:
    """Return the headline numbers of a run and its warnings.

    Parameters
    ----------
    expected : Estimate
        The mean field of the run, with its plan and warnings.
    births : Births
        All nuclei that survived.
    owners : Births
        Those that own a pixel of the map.
    sizes : Sizes
        Its spherulites, measured in the picture.
    curves : Conversion
        Its conversion.
    replica : int
        Number of the replica.

    Returns
    -------
    summary : dict
        Numbers by name with the unit in it; intervals stand under ``..._ci95_low`` and ``_high``.
    warnings : tuple of str
        What must be said with the numbers.
    """
    plan, settings = expected.plan, expected.settings
    view, statistics = plan.sample.view, sizes.statistics
    count = _number_density(expected, births)
    fraction = curves.intervals["fraction_transformed"]
    volume = _diameter_of_mean_volume(fraction.value, count)
    weighted = "volume_weighted" if sizes.dimension == 3 else "area_weighted"
    summary: dict[str, Any] = {
        "format_version": FORMAT_VERSION,
        "spheru_version": __version__,
        "title": settings.title,
        "scope": SCOPE,
        "seed": settings.seed,
        "replica": replica,
        "view": view,
        "material": settings.material.name,
        "size_um": [edge * 1e6 for edge in plan.frame.extent[::-1]],
        "pixel_um": plan.frame.pixel * 1e6,
        "spherulites": len(owners),
        "measured": {
            "what": "equivalent diameter of a label "
            + ("in the volume" if sizes.dimension == 3 else f"in the picture ({_sight(expected)})"),
            "edge_rule": sizes.edge_rule,
            "count": sizes.count,
            "detection_floor_um": sizes.floor * 1e6,
            "intervals": "95 %, from the long waves over 8 tiles an axis",
        },
        **_with_interval("number_density_per_mm3", count, 1e-9),
    }
    if sizes.dimension == 2:
        summary |= _with_interval("section_count_per_mm2", statistics.number_density, 1e-6)
    summary |= _with_interval("number_mean_diameter_um", statistics.number_mean_diameter, 1e6)
    summary |= _with_interval(
        f"{weighted}_mean_diameter_um", statistics.size_weighted_mean_diameter, 1e6
    )
    summary |= _with_interval("diameter_standard_deviation_um", statistics.diameter_sd, 1e6)
    ten, half, ninety = (float(d) * 1e6 for d in sizes.quantiles([0.1, 0.5, 0.9]))
    summary |= {"diameter_d10_um": ten, "diameter_d50_um": half, "diameter_d90_um": ninety}
    summary |= _with_interval("diameter_of_mean_volume_um", volume, 1e6)
    summary |= _with_interval("boundary_density_per_mm", statistics.boundary_density, 1e-3)
    summary |= _with_interval("fraction_transformed", fraction, 1.0)
    summary |= _with_interval("crystallinity", fraction, settings.material.crystallinity)
    summary |= _course(curves)
    summary |= {
        "spherulites_by_origin": _by_origin(owners),
        "kinetic_uncertainty": expected.numbers["kinetic_uncertainty"],
        "estimate": dict(expected.numbers),
    }
    warnings = (*expected.warnings, *_warnings(sizes, statistics.number_mean_diameter))
    summary["warnings"] = list(warnings)
    return summary, warnings


def _with_interval(key: str, statistic: Statistic, factor: float) -> dict[str, float | None]:
    scaled = statistic.scaled(factor)
    return {
        key: _number(scaled.value),
        f"{key}_ci95_low": _number(scaled.low),
        f"{key}_ci95_high": _number(scaled.high),
    }


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _number_density(expected: Estimate, births: Births) -> Statistic:
    """Return the nuclei that survived per volume [m-3]."""
    plan, frame = expected.plan, expected.plan.frame
    chosen = frame.holds(births.position)
    depth = 1.0 if frame.dimension == 3 else plan.sample.thickness or 1.0
    if plan.count_depth is not None:
        chosen &= np.abs(births.position[:, 0]) <= plan.count_depth
        depth = 2 * plan.count_depth
    position = births.position[chosen][:, -frame.dimension :]
    share = (position - np.array(frame.origin)) / np.array(frame.extent)
    cell = np.minimum((share * TILES).astype(np.int64), TILES - 1)
    grid = (TILES,) * frame.dimension
    tiles = math.prod(grid)
    counts = np.bincount(np.ravel_multi_index(tuple(cell.T), grid), minlength=tiles)
    totals = np.column_stack([counts, np.full(tiles, frame.measure * depth / tiles)])
    waves = tile_waves(len(position), frame.extent, frame.periodic)
    return tile_interval(totals, lambda total: total[..., 0] / total[..., 1], waves)


def _diameter_of_mean_volume(fraction: float, count: Statistic) -> Statistic:
    """Return (6 f/(pi N))^(1/3); the interval is that of the count."""

    def diameter(number: float) -> float:
        return (6 * fraction / (math.pi * number)) ** (1 / 3) if number > 0 else math.nan

    return Statistic(
        value=diameter(count.value), low=diameter(count.high), high=diameter(count.low)
    )


def _sight(expected: Estimate) -> str:
    sample = expected.plan.sample
    if sample.view == "film":
        return {"mid": "middle plane of the film", "face": "lower face of the film"}.get(
            sample.sight, "through the film"
        )
    return {"section": "plane section of a bulk sample"}.get(sample.view, "plane layer")


def _course(curves: Conversion) -> dict[str, Any]:
    numbers = course_numbers(curves.landmarks)
    for name, statistic in curves.intervals.items():
        shift, unit = (ZERO_CELSIUS, "C") if name.endswith("temperature") else (0.0, "s")
        key = {"mean_time": "mean_crystallisation_time"}.get(name, name) + f"_{unit}"
        if key in numbers and numbers[key] is not None:
            numbers[f"{key}_ci95_low"] = _number(statistic.low - shift)
            numbers[f"{key}_ci95_high"] = _number(statistic.high - shift)
    marks: Landmarks = curves.landmarks
    numbers["rate_smoothed_over_K"] = marks.smoothing_temperature
    numbers["rate_smoothed_over_s"] = marks.smoothing_time
    return numbers


def _by_origin(owners: Births) -> dict[str, int]:
    """Return how many spherulites of the map come from each source."""
    if owners.origin is None:
        return {}
    counts = np.bincount(owners.origin, minlength=len(owners.origin_names))
    return {name: int(n) for name, n in zip(owners.origin_names, counts, strict=True)}


def _warnings(sizes: Sizes, diameter: Statistic) -> list[str]:
    notes = []
    if not math.isfinite(diameter.low):
        notes.append("too few spherulites for 95 % intervals: choose a larger window or replicas")
    elif diameter.high - diameter.low > 0.2 * diameter.value:
        notes.append(
            "the 95 % interval of the mean diameter is wider than 20 % of it: choose a larger "
            "window"
        )
    if sizes.spanning:
        notes.append(
            f"{sizes.spanning} spherulites reach across the whole window: sizes read too small"
        )
    return notes
