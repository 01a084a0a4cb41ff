"""`spheru materials`: list the material records that come along, or show one."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click
import numpy as np

from spheru.cli.console import CAUTION, notices, number, print_json, print_table
from spheru.config.records import read_record, record_names
from spheru.constants import ZERO_CELSIUS

if TYPE_CHECKING:
    from spheru.material.record import MaterialRecord

__all__ = ["command"]


@click.command("materials")
@click.argument("name", required=False)
@click.option("--plot", type=click.Path(path_type=Path), help="Draw G(T) and N(T) to this PNG.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON for programs.")
def command(name: str | None, *, plot: Path | None, as_json: bool) -> None:
    """List the material records, or show the one called NAME (or stored in a TOML file).

    Every value is shown with its mark: seen in a source, from memory, calibrated or assumed.
    """
    if name is None:
        _list(as_json=as_json)
        return
    record = read_record(name)
    if as_json:
        print_json(
            {
                "name": record.name,
                "title": record.title,
                "values": {
                    key: {"value": p.value, "mark": p.mark, "source": p.source}
                    for key, p in record.provenance.items()
                },
            }
        )
    else:
        _show(record)
    if plot is not None:
        from spheru.output.plots.material import save_material

        save_material(record, plot)
        click.echo(f"drawn to {plot}", err=True)
    if not as_json:
        notices([CAUTION])


def _list(*, as_json: bool) -> None:
    records = [read_record(name) for name in record_names()]
    if as_json:
        print_json([{"name": record.name, "title": record.title} for record in records])
        return
    lines = [["name", "Tm0 [degC]", "largest G [um/min]", "at [degC]", "own site law"]]
    for record in records:
        at, rate = _fastest(record)
        lines.append(
            [
                record.name,
                f"{record.t_m0 - ZERO_CELSIUS:.1f}",
                number(rate * 60e6),
                f"{at - ZERO_CELSIUS:.0f}",
                "yes" if record.sites is not None else "no, give one",
            ]
        )
    print_table(lines)


def _show(record: MaterialRecord) -> None:
    at, rate = _fastest(record)
    click.echo(f"{record.title} ({record.name})")
    click.echo(
        f"grows fastest at {at - ZERO_CELSIUS:.0f} degC: {number(rate * 60e6)} um/min; "
        f"not at all outside {record.growth.window()[0] - ZERO_CELSIUS:.0f} to "
        f"{record.growth.window()[1] - ZERO_CELSIUS:.0f} degC"
    )
    if record.sites is None and record.site_decades is not None:
        low, high = record.site_decades
        click.echo(
            f"no site law is known: give one in [[nuclei]]; usual are 1e{low:.0f} to 1e{high:.0f} "
            "nuclei per m^3"
        )
    for jump, ratio in record.growth.jumps():
        click.echo(
            f"the growth rate jumps by a factor of {ratio:.3g} at {jump - ZERO_CELSIUS:.1f} degC"
        )
    click.echo("")
    for key, p in record.provenance.items():
        click.echo(f"{key} = {p.value}   [{p.mark}] {p.source}")


def _fastest(record: MaterialRecord) -> tuple[float, float]:
    """Return the temperature [K] of the fastest growth, and the rate there [m/s]."""
    grid = np.linspace(*record.growth.window(), 4001)
    rate = record.growth.rate(grid)
    top = int(np.argmax(rate))
    return float(grid[top]), float(rate[top])
