"""`spheru report`: write the report of a run's folder again, from its files."""

from __future__ import annotations

from pathlib import Path

import click

__all__ = ["command"]


@click.command("report")
@click.argument("run", type=click.Path(path_type=Path))
def command(run: Path) -> None:
    """Write report.html into the folder RUN, from the files that are there.

    One file that can be mailed: pictures inside, no script, nothing is fetched. The same files
    give the same bytes.
    """
    from spheru.output.run_report import write_report

    click.echo(f"written to {write_report(run)}")
