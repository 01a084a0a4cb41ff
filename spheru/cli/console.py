"""What the commands print: tables on standard output, progress and notices on standard error."""

from __future__ import annotations

import json
import sys
import time
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Final

import click

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence

__all__ = ["CAUTION", "notices", "number", "print_json", "print_numbers", "progress"]

CAUTION: Final = (
    "Predictions rank and explain; they do not qualify a part. Hot stages, fumes and fine powders "
    "can hurt: data sheets, local codes and licensed practice come first."
)

# key in summary.json -> what it is called on a screen, in this order
_ROWS: Final = {
    "spherulites": ("spherulites in the map", ""),
    "number_density_per_mm3": ("nuclei that grew, per volume", "1/mm^3"),
    "section_count_per_mm2": ("spherulites in the picture, per area", "1/mm^2"),
    "number_mean_diameter_um": ("mean diameter, by number", "um"),
    "area_weighted_mean_diameter_um": ("mean diameter, by area", "um"),
    "volume_weighted_mean_diameter_um": ("mean diameter, by volume", "um"),
    "diameter_of_mean_area_um": ("diameter of the mean area", "um"),
    "diameter_of_mean_volume_um": ("diameter of the mean volume", "um"),
    "boundary_density_per_mm": ("boundary density", "1/mm"),
    "mean_intercept_um": ("mean intercept in 3D", "um"),
    "triple_line_density_per_mm2": ("length of triple lines, per volume", "1/mm^2"),
    "fraction_transformed": ("transformed fraction", ""),
    "crystallinity": ("crystallinity by mass", ""),
    "onset_temperature_C": ("onset temperature", "degC"),
    "peak_temperature_C": ("peak temperature", "degC"),
    "half_temperature_C": ("half temperature", "degC"),
    "half_time_s": ("half time", "s"),
    "mean_crystallisation_time_s": ("mean crystallisation time", "s"),
}


def number(value: float | None) -> str:
    """Return a number with four digits, nothing for None.

    Parameters
    ----------
    value : float or None
        The number.

    Returns
    -------
    text : str
        Whole numbers below a million stay whole.

    Examples
    --------
    >>> number(51.6234), number(1000.0), number(1.38e10), number(None)
    ('51.62', '1000', '1.38e+10', '')
    """
    if value is None:
        return ""
    if abs(value) < 1e6 and float(value).is_integer():
        return str(int(value))
    return f"{value:.4g}"


def print_numbers(columns: Mapping[str, Mapping[str, Any]]) -> None:
    """Print the headline numbers, one column for each set of them.

    Parameters
    ----------
    columns : mapping of str to mapping
        Numbers as in summary.json under the heading of their column. A set that has intervals gets
        a column for them.
    """
    heads = [""]
    for head, numbers in columns.items():
        heads.append(head)
        if any(key.endswith("_ci95_low") for key in numbers):
            heads.append("95 % interval")
    lines = [heads]
    for key, (name, unit) in _ROWS.items():
        cells = [f"{name} [{unit}]" if unit else name]
        for numbers in columns.values():
            cells.append(number(numbers.get(key)))
            if any(k.endswith("_ci95_low") for k in numbers):
                low, high = numbers.get(f"{key}_ci95_low"), numbers.get(f"{key}_ci95_high")
                cells.append("" if low is None else f"{number(low)} to {number(high)}")
        if any(cells[1:]):
            lines.append(cells)
    print_table(lines)


def print_table(lines: Sequence[Sequence[str]]) -> None:
    """Print lines of cells in columns, the first to the left, the others to the right."""
    widths = [max(map(len, column)) for column in zip(*lines, strict=True)]
    for cells in lines:
        first = cells[0].ljust(widths[0])
        rest = (cell.rjust(width) for cell, width in zip(cells[1:], widths[1:], strict=True))
        click.echo("  ".join([first, *rest]).rstrip())


def print_json(value: Any) -> None:
    """Print a value as JSON for programs."""
    click.echo(json.dumps(value, indent=2, allow_nan=False))


def notices(lines: Sequence[str]) -> None:
    """Print what must be said with a result, one line each, on standard error."""
    for line in lines:
        click.echo(f"note: {line}", err=True)


@contextmanager
def progress(title: str) -> Iterator[Callable[[str, float], None]]:
    """Show how far long work has come, on standard error.

    Parameters
    ----------
    title : str
        What is being done.

    Yields
    ------
    tell : callable
        Takes the stage and the share of the whole that is done. On a terminal a bar with the time
        left is kept up to date; elsewhere there is one plain line every 30 s.
    """
    if not sys.stderr.isatty():
        yield _plain(title)
        return
    from rich.console import Console
    from rich.progress import (
        BarColumn,
        Progress,
        TaskProgressColumn,
        TextColumn,
        TimeRemainingColumn,
    )

    with Progress(
        TextColumn("{task.description}"),
        BarColumn(),
        TaskProgressColumn(),
        TimeRemainingColumn(),
        console=Console(stderr=True),
        transient=True,
    ) as bar:
        task = bar.add_task(title, total=1.0)

        def tell(stage: str, done: float) -> None:
            bar.update(task, completed=done, description=f"{title}: {stage}")

        yield tell


def _plain(title: str) -> Callable[[str, float], None]:
    begin = said = time.monotonic()

    def tell(stage: str, done: float) -> None:
        nonlocal said
        now = time.monotonic()
        if now - said >= 30 and done > 0:
            said = now
            left = (now - begin) * (1 - done) / done
            click.echo(f"{title}: {stage}, {100 * done:.0f} %, about {left:.0f} s left", err=True)

    return tell
