"""The report of a run, from the files of its folder alone.

What a run's folder says is put into words here; how a report looks stands in the templates, and
`spheru.output.report` brings the two together.
"""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from spheru.config.read import read_settings
from spheru.errors import DataError, FolderError
from spheru.files import sha256, write_atomic
from spheru.output.asked import VIEWS, describe_settings, spelled
from spheru.output.report import (
    CAUTIONS,
    Picture,
    ReportContent,
    Table,
    image_data,
    render_report,
    scale_of,
    written,
)
from spheru.run.summary import FORMAT_VERSION

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.output.report import Scale
    from spheru.run.settings import Settings

__all__ = ["run_content", "run_report", "write_report"]

_PICTURES: Final = ("map.png", "sizes.png", "conversion.png")
_READ: Final = ("settings.toml", *_PICTURES)

# key in summary.json -> what a reader calls it, by group, in this order; units come from the key
_GROUPS: Final[Mapping[str, Mapping[str, str]]] = {
    "Size": {
        "number_mean_diameter_um": "mean diameter, by number",
        "area_weighted_mean_diameter_um": "mean diameter, by area",
        "volume_weighted_mean_diameter_um": "mean diameter, by volume",
        "diameter_standard_deviation_um": "standard deviation of the diameters",
        "diameter_d10_um": "10 % by number are smaller than",
        "diameter_d50_um": "50 % by number are smaller than",
        "diameter_d90_um": "90 % by number are smaller than",
        "diameter_of_mean_area_um": "diameter of the mean area",
        "diameter_of_mean_volume_um": "diameter of the mean volume",
        "mean_intercept_um": "mean intercept in 3D",
    },
    "Number and boundaries": {
        "spherulites": "spherulites in the map",
        "number_density_per_mm3": "nuclei that grew, per volume",
        "section_count_per_mm2": "spherulites in the picture, per area",
        "boundary_density_per_mm": "boundary density",
    },
    "Solidification": {
        "fraction_transformed": "transformed fraction",
        "crystallinity": "crystallinity by mass",
        "onset_temperature_C": "onset temperature",
        "peak_temperature_C": "peak temperature",
        "half_temperature_C": "half temperature",
        "half_time_s": "half time",
        "mean_crystallisation_time_s": "mean crystallisation time",
    },
}
_UNITS: Final = {
    "_per_mm3": "1/mm³",
    "_per_mm2": "1/mm²",
    "_per_mm": "1/mm",
    "_um2": "µm²",
    "_um3": "µm³",
    "_um": "µm",
    "_C": "°C",
    "_K": "K",
    "_s": "s",
}
# numbers of summary.json that say how it was computed, not what came out
_NO_RESULTS: Final = frozenset({"format_version", "seed", "replica", "pixel_um"})


def write_report(folder: str | Path) -> Path:
    """Write ``report.html`` into a run's folder, from the files that are there.

    Parameters
    ----------
    folder : path-like
        Folder of a run.

    Returns
    -------
    path : Path
        The report. One that was there is replaced.

    Raises
    ------
    DataError, ConfigError
        As `run_content` does.
    FolderError
        If the disk refuses.
    """
    html = run_report(folder)
    path = Path(folder) / "report.html"
    try:
        write_atomic(path, html)
    except OSError as fault:
        raise FolderError(
            f"{path}: cannot be written ({fault.strerror or fault}); make room, or copy the run "
            "to a folder in which you may write"
        ) from fault
    return path


def run_report(folder: str | Path) -> str:
    """Return the report of a run as HTML: the same bytes for the same files.

    Parameters
    ----------
    folder : path-like
        Folder of a run.

    Returns
    -------
    html : str
        One document that needs no other file.

    Raises
    ------
    DataError, ConfigError
        As `run_content` does.
    """
    return render_report(run_content(folder))


def run_content(folder: str | Path) -> ReportContent:
    """Return what the report of a run says.

    Parameters
    ----------
    folder : path-like
        Folder of a run.

    Returns
    -------
    content : ReportContent
        Numbers with four digits, each with its unit.

    Raises
    ------
    DataError
        If the folder holds no run, one of another format, or lacks a file.
    ConfigError
        If its settings do not read.
    """
    source = Path(folder)
    summary = _summary(source)
    missing = [name for name in _READ if not (source / name).is_file()]
    if missing:
        raise DataError(
            f"{folder}: {', '.join(missing)} missing; the report shows what the folder holds, so "
            "put it back or grow the settings again"
        )
    settings = read_settings(source / "settings.toml")
    return ReportContent(
        kind="Run",
        title=settings.title,
        version=summary.get("spheru_version", ""),
        asked=describe_settings(settings, replica=summary.get("replica", 0)),
        answer=_answer(summary),
        warnings=[
            *map(spelled, summary.get("warnings", [])),
            *_changed(source, summary),
        ],
        pictures=_pictures(source, summary),
        scales=_scales(summary),
        scale_note=_scale_note(summary),
        table=_table(summary),
        notes=_notes(summary),
        scope=summary.get("scope", ""),
        cautions=list(CAUTIONS),
        settings=(source / "settings.toml").read_text(encoding="utf-8"),
        sources=_recalled(settings),
        provenance=_provenance(settings, summary),
        files=Table(
            "files",
            "SHA-256 of the files of this run",
            ("File", "SHA-256"),
            [("", sorted(summary.get("files", {}).items()))],
            numeric=False,
        ),
    )


def _summary(folder: Path) -> dict[str, Any]:
    path = folder / "summary.json"
    advice = "give a folder that spheru grow has written"
    if not path.is_file():
        raise DataError(f"{folder}: holds no run, summary.json is missing; {advice}")
    try:
        summary = json.loads(path.read_bytes())
    except ValueError:
        summary = None
    if not isinstance(summary, dict) or "format_version" not in summary:
        raise DataError(f"{path}: is not the summary of a run; {advice}")
    if summary["format_version"] != FORMAT_VERSION:
        raise DataError(
            f"{path}: expected format_version {FORMAT_VERSION}, got {summary['format_version']}; "
            "use the version of spheru that wrote it, or grow the settings again"
        )
    return summary


def _changed(folder: Path, summary: Mapping[str, Any]) -> list[str]:
    """Say which of the files shown here are not those that the run wrote."""
    hashes = summary.get("files", {})
    return [
        f"{name} is not as the run wrote it: its SHA-256 has changed"
        for name in _READ
        if name in hashes and sha256(folder / name) != hashes[name]
    ]


def _answer(summary: Mapping[str, Any]) -> list[tuple[str, bool]]:
    """Return the answer in one sentence, with its uncertainties."""
    if summary.get("number_mean_diameter_um") is None:
        return [("No spherulite could be measured in this map.", True)]
    pieces: list[tuple[str, bool]] = [("Expect spherulites ", False)]
    pieces += [
        (f"{_with_unit(summary, 'number_mean_diameter_um')} across", True),
        (f" on average (by number, {_where(summary)}", False),
        (f"{_interval(summary, 'number_mean_diameter_um', '; 95 % interval ')})", False),
    ]
    if summary.get("peak_temperature_C") is not None:
        pieces += [
            (" and the ", False),
            (f"crystallisation peak at {_with_unit(summary, 'peak_temperature_C')}", True),
            (_interval(summary, "peak_temperature_C", " (95 % ", ")"), False),
        ]
    elif summary.get("half_time_s") is not None:
        pieces += [
            (" and ", False),
            (f"half of the crystallisation after {_with_unit(summary, 'half_time_s')}", True),
            (f" from the {summary['half_time_from']}", False),
            (_interval(summary, "half_time_s", " (95 % ", ")"), False),
        ]
    fraction = summary.get("fraction_transformed")
    if fraction is not None and fraction < 0.99:
        share = f"{written(100 * fraction)} %"
        pieces += [(", with ", False), (f"only {share} transformed", True), (" at the end", False)]
    doubt = summary.get("kinetic_uncertainty")
    if doubt:
        low, high = (written(doubt[f"typical_diameter_{end}_um"]) for end in ("low", "high"))
        pieces += [
            ("; uncertain material data alone let the typical diameter lie ", False),
            (f"anywhere from {low} to {high} µm", True),
        ]
    return [*((text, strong) for text, strong in pieces if text), (".", False)]


def _where(summary: Mapping[str, Any]) -> str:
    names = {
        "block": "in the volume",
        "film": "in the picture of the film",
        "plane": "in the layer",
    }
    return names.get(summary.get("view", ""), "in a plane section")


def _with_unit(summary: Mapping[str, Any], key: str) -> str:
    value = summary.get(key)
    return "unknown" if value is None else f"{written(value)} {_split(key)[1]}".strip()


def _interval(summary: Mapping[str, Any], key: str, before: str = "", after: str = "") -> str:
    """Return the 95 % interval of a number with its unit, nothing where there is none."""
    low, high = summary.get(f"{key}_ci95_low"), summary.get(f"{key}_ci95_high")
    if low is None or high is None:
        return ""
    return f"{before}{written(low)} to {written(high)} {_split(key)[1]}".rstrip() + after


def _split(key: str) -> tuple[str, str]:
    """Return the name in a key of summary.json, and its unit.

    Examples
    --------
    >>> _split("section_count_per_mm2"), _split("spherulites")
    (('section count', '1/mm²'), ('spherulites', ''))
    """
    end = next((end for end in _UNITS if key.endswith(end)), "")
    return key.removesuffix(end).replace("_", " "), _UNITS.get(end, "")


def _scales(summary: Mapping[str, Any]) -> list[Scale]:
    """Return the sizes, and the temperatures, with the ranges of both kinds of doubt."""
    doubt, expected = summary.get("kinetic_uncertainty"), summary.get("estimate", {})
    if not doubt:
        return []
    weighted = next((key for key in summary if re.fullmatch(r"\w+_weighted_mean\w+_um", key)), "")
    typical = next(
        key
        for key in ("diameter_of_mean_area_um", "diameter_of_mean_volume_um")
        if key in expected or key == "diameter_of_mean_volume_um"
    )
    wanted = (
        ("Diameter", "µm", ("number_mean_diameter_um", weighted), typical, "typical_diameter"),
        ("Temperature", "°C", ("onset_temperature_C", "peak_temperature_C", "half_temperature_C"),
         "half_temperature_C", "half_temperature"),
    )  # fmt: skip
    scales = []
    for name, unit, simulated, middle, varied in wanted:
        values = [
            (_name(key), summary[key], summary.get(f"{key}_ci95_low"),
             summary.get(f"{key}_ci95_high"), True)
            for key in simulated
            if summary.get(key) is not None
        ]  # fmt: skip
        end = "um" if unit == "µm" else "C"
        low, high = doubt[f"{varied}_low_{end}"], doubt[f"{varied}_high_{end}"]
        if values and expected.get(middle) is not None and low < high:
            values.append((f"{_name(middle)}, mean field", expected[middle], low, high, False))
            scales.append(scale_of(name, unit, values))
    return scales


def _scale_note(summary: Mapping[str, Any]) -> str:
    doubt = summary.get("kinetic_uncertainty")
    if not doubt:
        return ""
    return (
        "Simulated values carry the 95 % interval that comes from a window of finite size. The "
        "mean field carries the range that follows from the material record, with growth uncertain "
        f"by a factor of {doubt['growth_factor']:.4g} and nuclei by {doubt['site_factor']:.4g}; "
        "only better data narrow it."
    )


def _name(key: str) -> str:
    return next((names[key] for names in _GROUPS.values() if key in names), _split(key)[0])


def _table(summary: Mapping[str, Any]) -> Table:
    """Return every number beside the mean field; those without a name of their own come last."""
    expected = summary.get("estimate", {})
    known = {key for names in _GROUPS.values() for key in names}
    further = {
        key: _split(key)[0]
        for key, value in {**expected, **summary}.items()
        if key not in known | _NO_RESULTS
        and not re.search(r"_ci95_(low|high)$|_smoothed_over_", key)
        and (value is None or (isinstance(value, int | float) and not isinstance(value, bool)))
    }
    groups = []
    for title, names in {**_GROUPS, "Further numbers": further}.items():
        rows = []
        for key, name in names.items():
            unit = _split(key)[1]
            cells = (written(summary.get(key)), _interval(summary, key), written(expected.get(key)))
            cells = (cells[0], cells[1].removesuffix(f" {unit}"), cells[2])
            if any(cells):
                rows.append((f"{name} [{unit}]" if unit else name, *(c or "–" for c in cells)))
        if rows:
            groups.append((title, rows))
    heads = ("Quantity", "Simulated", "95 % interval", "Mean field")
    return Table("numbers", "Simulation beside mean field", heads, groups)


def _notes(summary: Mapping[str, Any]) -> list[str]:
    """Return how the numbers were measured."""
    notes = []
    if measured := summary.get("measured"):
        floor = measured.get("detection_floor_um") or 0
        notes.append(
            f"Sizes: {measured['what']}, n = {measured['count']}, edge rule "
            f"{measured['edge_rule']}"
            + (f", from {written(floor)} µm up" if floor else "")
            + f". Intervals: {measured['intervals']}."
        )
    if summary.get("half_time_from"):
        notes.append(f"Half time and mean time count from the {summary['half_time_from']}.")
    if (window := summary.get("rate_smoothed_over_s")) is not None:
        kelvins = summary.get("rate_smoothed_over_K")
        over = "" if kelvins is None else f" ({written(kelvins)} K)"
        notes.append(
            f"Peak and onset are read off the rate averaged over {written(window)} s{over}."
        )
    maxima = summary.get("rate_maxima", [])
    if len(maxima) > 1:
        listed = ", ".join(
            f"{written(peak['temperature_C'])} °C ({written(100 * peak['height'])} %)"
            for peak in maxima
        )
        notes.append(f"Maxima of the rate, with their share of the largest: {listed}.")
    if origins := summary.get("spherulites_by_origin"):
        listed = ", ".join(f"{name} {count}" for name, count in origins.items())
        notes.append(f"Spherulites in the map by origin of their nuclei: {listed}.")
    return notes


def _pictures(folder: Path, summary: Mapping[str, Any]) -> list[Picture]:
    data = [image_data((folder / name).read_bytes()) for name in _PICTURES]
    window = " × ".join(f"{edge:.4g}" for edge in summary.get("size_um", [])[:2])
    count = summary.get("spherulites", "")
    sight = VIEWS.get(summary.get("view", ""), "").lower()
    ten, half, ninety = (_with_unit(summary, f"diameter_d{share}_um") for share in (10, 50, 90))
    mean = _with_unit(summary, "number_mean_diameter_um")
    kind = "volume" if "volume_weighted_mean_diameter_um" in summary else "area"
    if summary.get("peak_temperature_C") is not None:
        onset, peak = (_with_unit(summary, f"{name}_temperature_C") for name in ("onset", "peak"))
        course = f"onset {onset}, peak {peak}"
    else:
        course = f"half time {_with_unit(summary, 'half_time_s')}"
    final = written(summary.get("fraction_transformed"))
    return [
        Picture(
            data[0],
            f"Map of spherulites with a scale bar, {window} µm, {sight}; {count} spherulites in "
            "the whole map.",
            f"Map, {window} µm. One colour a spherulite; the colours only keep neighbours apart.",
        ),
        Picture(
            data[1],
            f"Histograms of the diameters by number and by {kind}: mean by number {mean}, "
            f"10, 50 and 90 % by number below {ten}, {half} and {ninety}.",
            f"Sizes. By number every spherulite counts once, by {kind} as much as it is large. "
            f"Half of them are smaller than {half}.",
            wide_text=True,
        ),
        Picture(
            data[2],
            f"Curves of the transformed fraction and of the heat flow: {course}, final fraction "
            f"{final}.",
            "Conversion and heat flow, exothermic upwards. Solid: simulated; dashed: mean field.",
            wide_text=True,
        ),
    ]


def _recalled(settings: Settings) -> Table | None:
    """Return the values of the record that are from memory."""
    rows: list[tuple[str, ...]] = [
        (key, spelled(p.value), spelled(p.source))
        for key, p in settings.material.provenance.items()
        if p.mark == "memory"
    ]
    if not rows:
        return None
    total = len(settings.material.provenance)
    return Table(
        "memory",
        f"{len(rows)} of the {total} values of the record {settings.material.name} are from "
        "memory, not checked against their source",
        ("Value of the record", "Used", "Recalled from"),
        [("", rows)],
        numeric=False,
    )


def _provenance(settings: Settings, summary: Mapping[str, Any]) -> list[tuple[str, str]]:
    return [
        ("Computed by", f"spheru {summary.get('spheru_version', '')}"),
        ("Material record", settings.material.name),
        ("Seed", str(summary.get("seed", settings.seed))),
        ("Replica", str(summary.get("replica", 0))),
        ("SHA-256 of the settings", summary.get("settings_sha256", "")),
    ]
