"""`spheru grow`: run a settings file and write the run's folder."""

from __future__ import annotations

from pathlib import Path

import click

from spheru.cli.console import CAUTION, notices, print_json, print_numbers, progress
from spheru.config.read import read_settings

__all__ = ["command"]


@click.command("grow")
@click.argument("settings", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    type=click.Path(path_type=Path),
    help="Folder to write; the name of the settings file beside the current folder by default.",
)
@click.option("--overwrite", is_flag=True, help="Replace a run that is already there.")
@click.option("--replica", type=click.IntRange(min=0), default=0, help="Other random numbers.")
@click.option("--threads", type=click.IntRange(min=1), help="Threads to use; all by default.")
@click.option("--store", is_flag=True, help="Keep the map on the disk, not in memory; resumable.")
@click.option("--json", "as_json", is_flag=True, help="Print summary.json for programs.")
def command(
    settings: Path,
    *,
    output: Path | None,
    overwrite: bool,
    replica: int,
    threads: int | None,
    store: bool,
    as_json: bool,
) -> None:
    """Grow the map of SETTINGS (TOML), measure it and write a folder.

    The folder holds the labelled map, pictures, tables and every headline number with its 95 %
    interval beside the mean field. The same settings and seed give the same bytes.

    A volume larger than the free memory is written chunk by chunk instead (labels.ome.zarr; asked
    for by --store): stopped at any point, it is continued by the same command.
    """
    asked = read_settings(settings)
    folder = output if output is not None else Path(settings.stem)
    # the libraries behind these take a second: not before the file is in order
    from spheru.output.folder import refuse_folder, save_run
    from spheru.output.unfinished import store_run, unfinished_folder
    from spheru.run.estimate import estimate
    from spheru.run.grow import grow
    from spheru.run.plan import fits_memory

    refuse_folder(folder, overwrite=overwrite)
    expected = estimate(asked)
    volume = expected.plan.frame.dimension == 3
    begun = volume and unfinished_folder(expected, folder, replica=replica).exists()
    if volume and not (store or begun or fits_memory(expected.plan)):
        store = True
        gigabytes = f"{expected.plan.memory / 1e9:.1f} GB"
        notices([f"the map needs {gigabytes} of memory, more than is free: it is kept on the disk"])
    with progress("growing") as tell:
        if store or begun:
            result = store_run(
                expected,
                folder,
                overwrite=overwrite,
                replica=replica,
                threads=threads,
                progress=tell,
                notice=lambda line: notices([line]),
            )
        else:
            result = grow(asked, replica=replica, threads=threads, progress=tell, expected=expected)
            tell("writing", 0.97)
            save_run(result, folder, overwrite=overwrite)
    if as_json:
        print_json(result.summary)
    else:
        click.echo(result.settings.title)
        print_numbers({"simulated": result.summary, "mean field": result.estimate.numbers})
        click.echo(f"half time counts from the {result.summary['half_time_from']}")
        doubt = result.summary["kinetic_uncertainty"]
        click.echo(
            f"with growth uncertain by a factor of {doubt['growth_factor']:.3g} and nuclei by "
            f"{doubt['site_factor']:.3g}: typical diameter {doubt['typical_diameter_low_um']:.4g} "
            f"to {doubt['typical_diameter_high_um']:.4g} um"
        )
        click.echo(f"written to {folder}")
    notices([*result.estimate.plan.notices, *result.warnings, CAUTION])
