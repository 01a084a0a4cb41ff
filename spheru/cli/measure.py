"""`spheru measure`: measure label images as a laboratory measures micrographs."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from spheru.cli.console import notices, number, print_json, print_table, progress

if TYPE_CHECKING:
    from collections.abc import Mapping

__all__ = ["command"]

_RULES = ("auto", "none", "exclude", "miles-lantuejoul", "counting-frame", "guard-frame")

# key in measure.json -> what it is called on a screen
_ROWS = {
    "number_density_per_mm2": "spherulites per area [1/mm^2]",
    "number_density_per_mm3": "spherulites per volume [1/mm^3]",
    "number_mean_diameter_um": "mean diameter, by number [um]",
    "area_weighted_mean_diameter_um": "mean diameter, by area [um]",
    "volume_weighted_mean_diameter_um": "mean diameter, by volume [um]",
    "diameter_standard_deviation_um": "standard deviation of the diameter [um]",
    "mean_area_um2": "mean area [um^2]",
    "mean_volume_um3": "mean volume [um^3]",
    "mean_aspect": "mean aspect",
    "mean_circularity": "mean circularity",
    "mean_sphericity": "mean sphericity",
    "boundary_density_per_mm": "boundary density [1/mm]",
}
_COUNTS = {
    ("planimetric", "count_per_mm2"): "planimetric count [1/mm^2]",
    ("planimetric", "grain_size_number_manner_of_astm_e112"): (
        "grain size G from it, in the manner of ASTM E112"
    ),
    ("planimetric", "grain_size_number_manner_of_iso_643"): (
        "grain size G from it, in the manner of ISO 643"
    ),
    ("intercepts", "mean_intercept_um"): "mean intercept [um]",
    ("intercepts", "grain_size_number_manner_of_astm_e112"): (
        "grain size G from it, in the manner of ASTM E112"
    ),
}


@click.command("measure")
@click.argument("images", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--pixel", help="Edge of a pixel, such as '0.5 um', where the file does not tell.")
@click.option(
    "--edges",
    default="auto",
    show_default=True,
    metavar="|".join(_RULES),
    help="What happens at cut edges; auto is unbiased.",
)
@click.option("--guard", help="Width of the guard of the last two rules, such as '50 um'.")
@click.option("--floor", help="Diameter below which nothing counts, such as '1 um'.")
@click.option(
    "--patches/--labels",
    default=False,
    help="Whether a size is that of a connected patch or of a label (default).",
)
@click.option(
    "-o", "--output", type=click.Path(path_type=Path), help="Folder for tables and figures."
)
@click.option("--overwrite", is_flag=True, help="Replace a measurement that is already there.")
@click.option("--json", "as_json", is_flag=True, help="Print measure.json for programs.")
def command(
    images: tuple[Path, ...],
    *,
    pixel: str | None,
    edges: str,
    guard: str | None,
    floor: str | None,
    patches: bool,
    output: Path | None,
    overwrite: bool,
    as_json: bool,
) -> None:
    """Measure IMAGES: label images (TIFF, PNG, .npy, OME-Zarr) or folders of runs.

    Several images are fields of one material: intervals then come from their scatter. Without
    --output nothing is written.
    """
    lengths = {
        name: None if text is None else _length(name, text)
        for name, text in {"pixel": pixel, "guard": guard, "floor": floor}.items()
    }
    from spheru.image.read import read_labels
    from spheru.run.measure import measure_images
    from spheru.run.plan import free_memory

    if output is not None:
        from spheru.output.measurement import refuse_measurement, save_measurement

        refuse_measurement(output, overwrite=overwrite)
    memory = free_memory()
    with progress("measuring") as tell:
        pictures = []
        for path in images:
            tell(f"reading {path.name}", 0.0)
            pictures.append(read_labels(path, pixel=lengths["pixel"], memory=memory))
        found = measure_images(
            pictures,
            names=_names(images),
            edges=edges,  # type: ignore[arg-type] # judged there
            guard=lengths["guard"],
            floor=lengths["floor"] or 0.0,
            kind="patch" if patches else "label",
            progress=lambda stage, done: tell(stage, 0.1 + 0.7 * done),
        )
        if output is not None:
            tell("writing", 0.8)
            save_measurement(found, output, overwrite=overwrite)
    if as_json:
        print_json(found.summary)
    else:
        _print(found.summary)
        if output is not None:
            click.echo(f"written to {output}")
    notices(found.warnings)


def _length(option: str, text: str) -> float:
    from spheru.errors import UnitError, ValidityError
    from spheru.units import to_si

    try:
        value = to_si(text, "m")
    except UnitError as fault:
        raise UnitError(f"--{option}: {fault}") from None
    if value < 0 or (value == 0 and option != "floor"):
        raise ValidityError(f"--{option}: expected a length above 0 such as '0.5 um', got '{text}'")
    return value


def _names(images: tuple[Path, ...]) -> list[str]:
    """Return the bare names of files where they differ, else as they were given."""
    bare = [path.resolve().name for path in images]
    return bare if len(set(bare)) == len(bare) else [str(path) for path in images]


def _print(summary: Mapping[str, Any]) -> None:
    measured = summary["measured"]
    for one in summary["fields"]:
        pixels = " x ".join(map(str, one["pixels"]))
        click.echo(
            f"{one['name']}: {pixels} pixels of {one['pixel_um']:.4g} um, {one['labels']} labels "
            f"in {one['patches']} patches, {one['used']} used"
        )
    guard, floor = measured["guard_um"], measured["detection_floor_um"]
    click.echo(
        f"{measured['what']}; edge rule {measured['edge_rule']}"
        + (f", guard {guard:.4g} um" if guard else "")
        + (f"; from {floor:.4g} um up" if floor else "")
        + f"; n = {measured['used']}"
    )
    lines = [["", "measured", "95 % interval"]]
    for key, name in _ROWS.items():
        if key in summary:
            lines.append(_row(name, summary, key))
    for (group, key), name in _COUNTS.items():
        if group in summary:
            lines.append(_row(name, summary[group], key))
    for body in summary.get("body_if_this_is_a_plane_section", ()):
        name = f"in the body, if a section of a {body['structure']} structure: mean diameter [um]"
        lines.append(_row(name, body, "number_mean_diameter_um"))
    print_table(lines)
    for group, name in (("planimetric", "planimetric count"), ("intercepts", "mean intercept")):
        accuracy = summary.get(group, {}).get("relative_accuracy_percent")
        if accuracy is not None:
            click.echo(f"relative accuracy of the {name}: {accuracy:.2g} %")
    fields = summary.get("planimetric", {}).get("fields")
    counted = f"; those of counts, intercepts and G from {fields} fields" if fields else ""
    click.echo(f"intervals: {measured['intervals']}{counted}")


def _row(name: str, numbers: Mapping[str, Any], key: str) -> list[str]:
    low, high = numbers.get(f"{key}_ci95_low"), numbers.get(f"{key}_ci95_high")
    interval = "" if low is None else f"{number(low)} to {number(high)}"
    return [name, number(numbers.get(key)), interval]
