"""The folder of a measurement: numbers, a row a grain, figures.

Written whole or not at all, as a run's folder is.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

from spheru.files import sha256, table_text
from spheru.output.folder import json_text, refuse_folder, write_folder
from spheru.output.plots.canvas import png
from spheru.output.plots.distribution import plot_distribution
from spheru.output.plots.map import describe_edges
from spheru.output.plots.outlines import plot_outlines, plot_test_lines
from spheru.output.tables import size_table

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path

    from spheru.run.measure import MeasuredField, Measurement

__all__ = ["grain_table", "refuse_measurement", "save_measurement"]

_RECORD: Final = "measure.json"


def refuse_measurement(folder: str | Path, *, overwrite: bool = False) -> None:
    """Raise if a measurement cannot be written to a folder: to be asked before the work.

    Parameters
    ----------
    folder : path-like
        The folder.
    overwrite : bool, optional
        Whether a measurement that is there may be replaced.

    Raises
    ------
    FolderError
        If the folder is there and must not be replaced, holds anything but an earlier measurement,
        or stands where nothing can be written.
    """
    refuse_folder(folder, overwrite=overwrite, record=_RECORD)


def save_measurement(
    measurement: Measurement,
    folder: str | Path,
    *,
    overwrite: bool = False,
    extra: Mapping[str, object] | None = None,
) -> Path:
    """Write measure.json, grains.csv, sizes.csv and the figures to a folder.

    Parameters
    ----------
    measurement : Measurement
        What was measured. Of a body there are no pictures with outlines or lines.
    folder : path-like
        The folder; those above it are made where they are missing.
    overwrite : bool, optional
        Whether an earlier measurement there is replaced, once the new one is complete.
    extra : mapping, optional
        What stands in measure.json besides, such as hashes of the pictures.

    Returns
    -------
    folder : Path
        The folder, as it was asked for.

    Raises
    ------
    FolderError
        As `refuse_measurement` does, or if the disk refuses.
    """

    def write(staging: Path) -> None:
        for name, content in _contents(measurement):
            data = content.encode() if isinstance(content, str) else content
            (staging / name).write_bytes(data)
        names = sorted(entry.name for entry in staging.iterdir())
        record = {
            **measurement.summary,
            **(extra or {}),
            "files": {name: sha256(staging / name) for name in names},
        }
        (staging / _RECORD).write_bytes(json_text(record).encode())

    return write_folder(folder, write, overwrite=overwrite, record=_RECORD)


def grain_table(fields: Sequence[MeasuredField]) -> str:
    """Return the table of the grains, a row each.

    Parameters
    ----------
    fields : sequence of MeasuredField
        The pictures.

    Returns
    -------
    text : str
        CSV with the columns field, label, patch (empty where labels were measured), area_um2 (or
        volume_um3), diameter_um, perimeter_um (or surface_um2), aspect, circularity (or
        sphericity), centre_x_um, centre_y_um (centre_z_um), touches_edge, pixels, weight_per_mm2
        (weight_per_mm3): what the grain stands for by the edge rule, 0 where it is not used.
    """
    axes = fields[0].sizes.dimension
    size, boundary, roundness = (
        ("area_um2", "perimeter_um", "circularity")
        if axes == 2
        else ("volume_um3", "surface_um2", "sphericity")
    )
    columns: dict[str, list[object]] = {}

    def add(name: str, values: Sequence[object]) -> None:
        columns.setdefault(name, []).extend(values)

    for one in fields:
        sizes, shapes = one.sizes, one.shapes
        patch = sizes.label.tolist() if sizes.kind == "patch" else [None] * len(sizes)
        add("field", [one.name] * len(sizes))
        add("label", one.owner.tolist())
        add("patch", patch)
        add(size, (sizes.size * 1e6**axes).tolist())
        add("diameter_um", (sizes.diameter * 1e6).tolist())
        add(boundary, (shapes.boundary * 1e6 ** (axes - 1)).tolist())
        add("aspect", shapes.aspect.tolist())
        add(roundness, shapes.circularity.tolist())
        for axis, centre in zip("xyz", sizes.centre.T[::-1], strict=False):
            add(f"centre_{axis}_um", (centre * 1e6).tolist())
        add("touches_edge", sizes.touches_edge.tolist())
        add("pixels", sizes.pixels.tolist())
        add(f"weight_per_mm{axes}", (sizes.weight * 1e-3**axes).tolist())
    return table_text(columns)


def _contents(found: Measurement) -> Iterator[tuple[str, str | bytes]]:
    """Yield tables and figures, one at a time."""
    yield "grains.csv", grain_table(found.fields)
    yield "sizes.csv", size_table(found.sizes)
    several = len(found.fields) > 1
    title = f"{len(found.fields)} fields" if several else found.fields[0].name
    frame = found.fields[0].image.frame
    where = "" if several else f"{describe_edges(frame).capitalize()}. "
    caption = f"{where}Pixel {frame.pixel * 1e6:.4g} µm. Lines: means; bands: 95 % intervals."
    above, _ = plot_distribution(found.sizes, title=title, caption=caption)
    yield "distribution.png", png(above)
    if found.intercepts is None:
        return
    mean = found.intercepts.mean_intercept.value * 1e6
    for number, one in enumerate(found.fields):
        tail = f"-{number + 1}" if several else ""
        pixel = f"pixel {one.image.frame.pixel * 1e6:.4g} µm"
        ax = plot_outlines(
            one,
            title=one.name,
            caption=f"n = {one.sizes.count} of {len(one.sizes)} "
            f"{'patches' if one.sizes.kind == 'patch' else 'labels'} count, edge rule "
            f"{one.sizes.edge_rule}, {pixel}, {describe_edges(one.image.frame)}.",
        )
        yield f"outlines{tail}.png", png(ax)
        lines = [line for line in found.intercepts.lines if not several or line.field == number]
        ax = plot_test_lines(
            one, lines, title=one.name, caption=f"Mean intercept {mean:.4g} µm, {pixel}."
        )
        yield f"intercepts{tail}.png", png(ax)
