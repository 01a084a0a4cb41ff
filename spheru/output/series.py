"""The folder of a series or an aim: tables, figures, the answer, the settings of what failed.

The journal and the maps of the cases are there already (`spheru.run.cases`); everything here can
be written again from them, and is whenever the same command is given.
"""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING, Any, Final

from spheru import __version__
from spheru.config.write import write_settings
from spheru.constants import ZERO_CELSIUS
from spheru.errors import FolderError
from spheru.files import table_text, write_atomic
from spheru.output.plots.canvas import png
from spheru.output.plots.series import plot_curves, plot_sheet, plot_trend, read_picture
from spheru.run.points import QUANTITIES
from spheru.run.summary import SCOPE
from spheru.run.trends import local_exponents, nucleating_efficiency

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path

    from spheru.measure.intervals import Statistic
    from spheru.output.plots.series import Picture
    from spheru.run.aim import Answer
    from spheru.run.cases import Journal
    from spheru.run.points import Axis, Series
    from spheru.run.series import Finding, Findings
    from spheru.run.workers import Failure

__all__ = ["answer_object", "save_answer", "save_series", "series_table"]

# numbers of a point that its table shows, with their intervals and mean field where they have any
_SHOWN: Final = (
    "peak_temperature_C",
    "onset_temperature_C",
    "half_temperature_C",
    "half_time_s",
    "number_density_per_mm3",
    "number_mean_diameter_um",
    "area_weighted_mean_diameter_um",
    "volume_weighted_mean_diameter_um",
    "diameter_of_mean_volume_um",
    "fraction_transformed",
)


def series_table(series: Series, findings: Findings) -> list[dict[str, Any]]:
    """Return the table of a series, one row a point.

    Parameters
    ----------
    series : Series
        What was varied.
    findings : Findings
        What came out.

    Returns
    -------
    rows : list of dict
        Varied values, number of runs and of spherulites measured, headline numbers with 95 %
        intervals (means over the replicas), mean field. Where a rate is varied, the local
        exponents d ln D/d ln rate of the mean diameter and of the diameter of the mean volume;
        where a dose is and the self-seeded peak is given, the nucleating efficiency; the half time
        of a hold (mean field) where its temperature is given. None where there is no number.
    """
    rows = [_row(series, finding) for finding in findings.points]
    for axis in series.axes:
        if axis.name.endswith("rate") and axis.numbers is not None:
            _add_exponents(series, findings, axis, rows)
            break
    if series.self_seeded_peak is not None:
        _add_efficiency(series, rows)
    return rows


def save_series(series: Series, findings: Findings, journal: Journal, text: str) -> None:
    """Write tables, figures and answer of a series into its folder.

    Parameters
    ----------
    series : Series
        What was varied.
    findings : Findings
        What came out.
    journal : Journal
        The cases, in the folder that is written.
    text : str
        The settings file as it was given.

    Raises
    ------
    FolderError
        If the disk refuses; the cases are kept.
    """
    rows = series_table(series, findings)
    answer = {
        **_head("series", series.title),
        "varied": [{"key": a.key, "unit": a.unit, "values": list(a.values)} for a in series.axes],
        "replicas": sum(len(point.keys) for point in findings.points),
        "points": rows,
        "failed": _failed(findings.failures),
        "warnings": _warnings(findings.points),
    }
    figures = _figures(series, findings.points, journal) if findings.points else ()
    _save(journal, text, findings.points, findings.failures, rows, answer, figures)


def save_answer(answer: Answer, journal: Journal, text: str) -> None:
    """Write tables, figures and answer of an aim into its folder.

    Parameters
    ----------
    answer : Answer
        What came out.
    journal : Journal
        The cases, in the folder that is written.
    text : str
        The settings file as it was given.

    Raises
    ------
    FolderError
        If the disk refuses; the cases are kept.
    """
    rows = [_plain_row(finding) for finding in answer.points]
    pictures = _pictures(answer.points, journal)
    figures = (
        ("maps.png", png(plot_sheet(pictures, title=answer.aim.title))),
        ("conversion.png", png(plot_curves(pictures, title=answer.aim.title))),
    )
    _save(journal, text, answer.points, answer.failures, rows, answer_object(answer), figures)


def answer_object(answer: Answer) -> dict[str, Any]:
    """Return the answer of an aim as answer.json holds it.

    Parameters
    ----------
    answer : Answer
        What came out.

    Returns
    -------
    content : dict
        Key, unit, whether the target is reached, the value with its interval and the result of
        the runs; the unit in every key or beside it.
    """
    aim = answer.aim
    name, _ = QUANTITIES[aim.quantity]
    return {
        **_head("aim", aim.title),
        "key": aim.key,
        "unit": aim.unit,
        "from": aim.written(aim.low),
        "to": aim.written(aim.high),
        "quantity": aim.quantity,
        f"target_{name}": aim.wanted,
        "confidence": aim.confidence,
        "reached": answer.reached,
        "confirmed": answer.confirmed,
        "value": answer.value.value,
        "value_low": _known(answer.value.low),
        "value_high": _known(answer.value.high),
        "others_by_mean_field": list(answer.others),
        "tried": answer.tried,
        name: answer.result.value,
        f"{name}_low": _known(answer.result.low),
        f"{name}_high": _known(answer.result.high),
        f"{name}_span": list(answer.span),
        "notes": list(answer.notes),
        "failed": _failed(answer.failures),
        "warnings": _warnings(answer.points),
    }


def _head(kind: str, title: str) -> dict[str, Any]:
    return {
        "format_version": 1,
        "spheru_version": __version__,
        "kind": kind,
        "title": title,
        "scope": SCOPE,
    }


def _failed(failures: Sequence[Failure]) -> list[dict[str, Any]]:
    return [
        {"case": f.case.point.label, "replica": f.case.replica, "message": f.message}
        for f in failures
    ]


def _warnings(points: Sequence[Finding]) -> list[str]:
    return list(dict.fromkeys(text for point in points for text in point.warnings))


def _known(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _save(
    journal: Journal,
    text: str,
    points: Sequence[Finding],
    failures: Sequence[Failure],
    rows: Sequence[Mapping[str, Any]],
    answer: Mapping[str, Any],
    figures: Sequence[tuple[str, bytes]] | Iterator[tuple[str, bytes]],
) -> None:
    folder = journal.folder
    try:
        write_atomic(folder / "series.toml", text)
        write_atomic(folder / "cases.csv", _csv(_case_rows(points, journal)))
        write_atomic(folder / "table.csv", _csv(rows))
        for name, content in figures:
            write_atomic(folder / name, content)
        _write_failures(folder / "failed", failures)
        whole = json.dumps(answer, indent=2, ensure_ascii=False, allow_nan=False)
        write_atomic(folder / "answer.json", f"{whole}\n")
    except OSError as fault:
        raise FolderError(
            f"{folder}: cannot be written ({fault.strerror or fault}); the {len(journal)} finished "
            "cases are kept: make room, then give the same command again"
        ) from fault


def _write_failures(folder: Path, failures: Sequence[Failure]) -> None:
    """Write the settings of every case that failed, with why; those of an earlier call go."""
    if folder.exists():
        for old in folder.glob("*.toml"):
            old.unlink()
    elif failures:
        folder.mkdir()
    for k, failure in enumerate(failures, start=1):
        why = "".join(f"# {line}\n" for line in failure.message.splitlines())
        content = write_settings(failure.case.point.document)
        head = f"# {failure.case.point.label}, replica {failure.case.replica}\n{why}\n"
        write_atomic(folder / f"{k:04d}.toml", head + content)


def _case_rows(points: Sequence[Finding], journal: Journal) -> list[dict[str, Any]]:
    rows = []
    for finding in points:
        for key in finding.keys:
            record = journal[key]
            rows.append(
                {
                    "case": key,
                    **finding.point.columns,
                    "replica": record["replica"],
                    **record["numbers"],
                    "warnings": "; ".join(record["warnings"]),
                }
            )
    return rows


def _csv(rows: Sequence[Mapping[str, Any]]) -> str:
    names = dict.fromkeys(name for row in rows for name in row)
    return table_text({name: [row.get(name) for row in rows] for name in names})


def _row(series: Series, finding: Finding) -> dict[str, Any]:
    row = _plain_row(finding)
    if series.half_time_at is not None:
        at = f"{series.half_time_at - ZERO_CELSIUS:g}"
        found = finding.numbers.get("estimate_half_time_of_hold_s")
        row[f"estimate_half_time_at_{at}_C_s"] = None if found is None else _known(found.value)
    return row


def _plain_row(finding: Finding) -> dict[str, Any]:
    numbers = finding.numbers
    row: dict[str, Any] = {
        **finding.point.columns,
        "runs": len(finding.keys),
        "spherulites_measured": round(numbers["spherulites_measured"].value * len(finding.keys)),
    }
    for name in _SHOWN:
        if name in numbers:
            row |= _cells(name, numbers[name])
    for name in _SHOWN:
        if f"estimate_{name}" in numbers:
            row[f"estimate_{name}"] = _known(numbers[f"estimate_{name}"].value)
    return row


def _cells(name: str, statistic: Statistic) -> dict[str, float | None]:
    return {
        name: _known(statistic.value),
        f"{name}_ci95_low": _known(statistic.low),
        f"{name}_ci95_high": _known(statistic.high),
    }


def _add_exponents(
    series: Series, findings: Findings, axis: Axis, rows: list[dict[str, Any]]
) -> None:
    """Add the local exponents against a rate, among the points that share all else."""
    for members in _alike(series, axis, rows):
        rates = [rows[k][axis.column] for k in members]
        for name, found in (
            ("local_exponent_mean_diameter", "number_mean_diameter_um"),
            ("local_exponent_mean_volume", "diameter_of_mean_volume_um"),
            ("estimate_local_exponent_mean_volume", "estimate_diameter_of_mean_volume_um"),
        ):
            values = [findings.points[k].numbers[found] for k in members]
            for k, slope in zip(members, local_exponents(rates, values), strict=True):
                cells = _cells(name, slope)
                rows[k] |= {name: cells[name]} if name.startswith("estimate_") else cells


def _add_efficiency(series: Series, rows: list[dict[str, Any]]) -> None:
    axis = next((axis for axis in series.axes if axis.name.endswith("dose")), None)
    seeded = series.self_seeded_peak
    if axis is None or axis.numbers is None or seeded is None:
        return
    for members in _alike(series, axis, rows):
        neat = next(
            (rows[k]["peak_temperature_C"] for k in members if rows[k][axis.column] == 0), None
        )
        if series.neat_peak is not None:
            neat = series.neat_peak - ZERO_CELSIUS
        for k in members:
            peak = rows[k]["peak_temperature_C"]
            rows[k]["nucleating_efficiency_percent"] = (
                None
                if neat is None or peak is None
                else nucleating_efficiency(peak, neat=neat, self_seeded=seeded - ZERO_CELSIUS)
            )


def _alike(series: Series, axis: Axis, rows: Sequence[Mapping[str, Any]]) -> list[list[int]]:
    """Return the numbers of the rows that differ in one key only; all, where keys go in step."""
    others = [a.column for a in series.axes if a is not axis and series.combine == "product"]
    groups: dict[tuple[Any, ...], list[int]] = {}
    for k, row in enumerate(rows):
        groups.setdefault(tuple(row[name] for name in others), []).append(k)
    return list(groups.values())


def _figures(
    series: Series, points: Sequence[Finding], journal: Journal
) -> Iterator[tuple[str, bytes]]:
    seed = f"seed {series.base.get('seed', 0)}"
    runs = sum(len(point.keys) for point in points)
    seen = sum(p.numbers["spherulites_measured"].value * len(p.keys) for p in points)
    caption = f"{runs} runs, n = {seen:.0f} spherulites, {seed}."
    for axis in series.axes:
        if axis.numbers is not None and len(axis.numbers) > 1:
            size, _ = plot_trend(points, axis, title=series.title, caption=caption)
            name = "".join(c if c.isalnum() else "-" for c in axis.name)
            yield f"against-{name}.png", png(size)
    pictures = _pictures(points, journal)
    yield "maps.png", png(plot_sheet(pictures, title=series.title, caption=f"{seed.capitalize()}."))
    yield "conversion.png", png(plot_curves(pictures, title=series.title))


def _pictures(points: Sequence[Finding], journal: Journal) -> list[tuple[str, Picture]]:
    """Return what is kept of the first replicas; a point whose first one failed has none."""
    found = []
    for point in points:
        path = journal.map_path(point.keys[0])
        if path.exists():
            found.append((point.point.label, read_picture(path.read_bytes())))
    return found
