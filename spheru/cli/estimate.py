"""`spheru estimate`: check a settings file and predict by mean field, without running it."""

from __future__ import annotations

from pathlib import Path

import click

from spheru.cli.console import CAUTION, notices, print_json, print_numbers
from spheru.config.read import read_settings
from spheru.run.estimate import estimate
from spheru.run.plan import fits_memory

__all__ = ["command"]


@click.command("estimate")
@click.argument("settings", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object for programs.")
def command(settings: Path, *, as_json: bool) -> None:
    """Check SETTINGS (TOML) and say what a run would do and give.

    Every fault of the file is reported at once. The numbers are those of the mean field; nothing
    is drawn, nothing is written.
    """
    expected = estimate(read_settings(settings))
    if as_json:
        print_json({**expected.numbers, "warnings": list(expected.warnings)})
        return
    run, doubt = expected.numbers["run"], expected.numbers["kinetic_uncertainty"]
    click.echo(expected.settings.title)
    print_numbers({"mean field": expected.numbers})
    click.echo(f"half time counts from the {expected.numbers['half_time_from']}")
    click.echo(
        f"with growth uncertain by a factor of {doubt['growth_factor']:.3g} and nuclei by "
        f"{doubt['site_factor']:.3g}: typical diameter {doubt['typical_diameter_low_um']:.4g} to "
        f"{doubt['typical_diameter_high_um']:.4g} um"
    )
    pixels = " x ".join(map(str, run["pixels"]))
    click.echo(
        f"a run: {pixels} pixels of {run['pixel_um']:.4g} um, about {run['candidate_nuclei']:.3g} "
        f"nuclei drawn, {run['memory_GB']:.2g} GB, roughly {run['seconds_about']:.2g} s"
    )
    if expected.plan.frame.dimension == 3 and not fits_memory(expected.plan):
        notices(["that is more memory than is free: a run would keep the map on the disk"])
    notices([*expected.plan.notices, *expected.warnings, CAUTION])
