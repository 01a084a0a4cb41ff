"""`spheru series`: vary keys of a settings file, or find the value that meets a target."""

from __future__ import annotations

import importlib
import math
import sys
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import click

from spheru.cli.console import CAUTION, notices, number, print_table, progress

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    from spheru.run.aim import Answer
    from spheru.run.points import Make, Series
    from spheru.run.workers import Failure, Progress

__all__ = ["command"]

_MANY: Final = 1000  # runs from which on one is asked first
_START: Final = 4.0  # s of the time of a single run that a worker pays only once
_EACH: Final = 0.5  # s of a run beyond what its map takes
_LINE: Final = 4_000  # bytes on the disk, of a run
_PIXEL: Final = 0.3  # bytes on the disk, of a pixel of the map of a point

# key of the table -> head of its column on the screen
_COLUMNS: Final = {
    "runs": "runs",
    "peak_temperature_C": "peak [degC]",
    "onset_temperature_C": "onset [degC]",
    "half_temperature_C": "half [degC]",
    "half_time_s": "half time [s]",
    "nucleating_efficiency_percent": "efficiency [%]",
    "number_density_per_mm3": "nuclei [1/mm^3]",
    "spherulites_measured": "n",
    "number_mean_diameter_um": "mean diameter [um]",
    "local_exponent_mean_diameter": "d ln D/d ln rate",
    "estimate_local_exponent_mean_volume": "by mean field",
}
_LEFT_OUT: Final = {  # what the trade does not report, by what is varied
    "rate": {"onset_temperature_C", "half_time_s", "number_density_per_mm3"},
    "dose": {"half_temperature_C", "half_time_s"},
}
_WITH_INTERVAL: Final = {"number_mean_diameter_um", "local_exponent_mean_diameter"}


@click.command("series")
@click.argument("settings", type=click.Path(path_type=Path))
@click.option(
    "-o",
    "--output",
    type=click.Path(path_type=Path),
    help="Folder to write, or to go on with; the name of the settings file by default.",
)
@click.option("--workers", type=click.IntRange(min=1), help="Processes to use; one a core if none.")
@click.option("--cluster", metavar="ADDRESS", help="Run on a dask.distributed scheduler instead.")
@click.option("--yes", is_flag=True, help="Start a long series without asking.")
@click.option("--json", "as_json", is_flag=True, help="Print answer.json for programs.")
def command(
    settings: Path,
    *,
    output: Path | None,
    workers: int | None,
    cluster: str | None,
    yes: bool,
    as_json: bool,
) -> None:
    """Run the series, or solve the aim, of SETTINGS (TOML) and write a folder.

    A table [series] varies keys of the file, a table [aim] looks for the value of one that meets
    a target. Finished runs are kept at once: whatever happens, the same command goes on where it
    was stopped. A run that fails does not end the series; it is listed, and the exit code is 1.
    """
    from spheru.config.series import read_series
    from spheru.files import read_text
    from spheru.run.cases import Journal
    from spheru.run.points import Series
    from spheru.run.series import run_series

    asked, make = read_series(settings)
    text = read_text(settings)
    folder = output if output is not None else Path(settings.stem)
    if isinstance(asked, Series):
        _ask(asked, make, workers, yes=yes)
    journal = Journal(folder, asked.base)
    from spheru.output.series import save_answer, save_series
    from spheru.run.aim import solve_aim

    try:
        with _pool(workers, cluster) as pool, progress("runs") as tell:
            told = _counting(tell)
            if isinstance(asked, Series):
                findings = run_series(asked, make, journal, pool, progress=told)
            else:
                answer = solve_aim(asked, make, journal, pool, progress=told)
    except KeyboardInterrupt:
        click.echo(f"{len(journal)} finished runs are kept; the same command goes on", err=True)
        raise
    if isinstance(asked, Series):
        save_series(asked, findings, journal, text)
        failures, points = findings.failures, findings.points
    else:
        save_answer(answer, journal, text)
        failures, points = answer.failures, answer.points
    if as_json:
        click.echo((folder / "answer.json").read_text(encoding="utf-8"), nl=False)
    elif isinstance(asked, Series):
        from spheru.output.series import series_table

        _print_series(asked, series_table(asked, findings))
    else:
        _print_answer(answer)
    if not as_json:
        click.echo(f"written to {folder}")
    said = dict.fromkeys(text for point in points for text in point.warnings)
    notices([*said, CAUTION])
    _print_failures(failures, folder)
    if failures:
        sys.exit(1)


def _ask(series: Series, make: Make, workers: int | None, *, yes: bool) -> None:
    """Say what a long series takes, and go on only where that is wanted."""
    runs = series.count * series.replicas
    if runs <= _MANY or yes:
        return
    from spheru.run.estimate import estimate
    from spheru.run.workers import cores

    places = [[k * (len(axis.values) - 1) // 2 for axis in series.axes] for k in (0, 1, 2)]
    plans = [estimate(make(series.point(place).document)).plan for place in places]
    seconds = sum(max(plan.seconds - _START, 0.0) + _EACH for plan in plans) / len(plans)
    pixels = sum(math.prod(plan.frame.shape[-2:]) for plan in plans) / len(plans)
    hours = runs * seconds / (workers or cores()) / 3600
    size = (runs * _LINE + series.count * _PIXEL * pixels) / 1e9
    click.echo(
        f"{runs} runs of {series.count} points: roughly {number(round(hours, 1))} h on "
        f"{workers or cores()} workers, and {size:.2g} GB on the disk",
        err=True,
    )
    if not sys.stdin.isatty():
        raise click.UsageError(f"{runs} runs are many; start them with --yes")
    click.confirm("start?", abort=True, err=True)


@contextmanager
def _pool(workers: int | None, cluster: str | None) -> Iterator[Any]:
    """Yield workers: processes here, or those of a dask.distributed scheduler."""
    from spheru.run.workers import Pool

    if cluster is None:
        with Pool(workers) as pool:
            yield pool
        return
    from spheru.errors import DataError, MissingExtraError

    try:
        distributed = importlib.import_module("distributed")
    except ImportError:
        raise MissingExtraError("runs on several machines", "cluster") from None
    try:
        client = distributed.Client(cluster, timeout="10s")
    except (OSError, ValueError) as fault:
        raise DataError(
            f"--cluster: no scheduler answers at '{cluster}' ({fault}); expected an address such "
            "as tcp://192.168.0.1:8786"
        ) from None
    with client:
        threads = sum(client.nthreads().values())
        with Pool(workers or max(threads, 1), executor=client.get_executor(pure=False)) as pool:
            yield pool


def _counting(tell: Callable[[str, float], None]) -> Callable[[Progress], None]:
    """Return what tells how many runs are done, running and failed.

    The share counts what this call has to do: the runs of an earlier one took it no time.
    """
    first, total = 0, 0

    def told(now: Progress) -> None:
        nonlocal first, total
        if now.total != total:  # another round, or the first one
            first, total = now.done, now.total
        failed = f", {now.failed} failed" if now.failed else ""
        share = (now.done + now.failed - first) / max(total - first, 1)
        tell(f"{now.done} of {total} done, {now.running} running{failed}", share)

    return told


def _print_series(series: Series, rows: list[dict[str, Any]]) -> None:
    """Print the table as the trade reports it."""
    click.echo(series.title)
    varied = {axis.column: _head(axis.name, axis.unit) for axis in series.axes}
    names = {axis.name for axis in series.axes}
    hidden = set.intersection(*(_LEFT_OUT.get(name, set()) for name in names)) if names else set()
    extra = {
        name: name.removeprefix("estimate_").removesuffix("_C_s").replace("_", " ") + " degC [s]"
        for name in (rows[0] if rows else {})
        if name.startswith("estimate_half_time_at_")
    }
    heads = {**varied, **_COLUMNS, **extra}
    shown = [
        name
        for name in heads
        if name not in hidden and any(row.get(name) is not None for row in rows)
    ]
    lines = [[heads[name] for name in shown]]
    lines.extend([_cell(row, name) for name in shown] for row in rows)
    if rows:
        print_table(lines)


def _head(name: str, unit: str) -> str:
    return f"{name} [{unit}]" if unit else name


def _cell(row: Mapping[str, Any], name: str) -> str:
    value = row.get(name)
    if value is None or isinstance(value, str):
        return value or ""
    text = number(value)
    low, high = row.get(f"{name}_ci95_low"), row.get(f"{name}_ci95_high")
    if name in _WITH_INTERVAL and low is not None:
        text += f" ({number(low)} to {number(high)})"
    return text


def _print_answer(answer: Answer) -> None:
    """Print the answer of an aim in a sentence or two."""
    from spheru.run.points import QUANTITIES

    aim = answer.aim
    name, _ = QUANTITIES[aim.quantity]
    unit = {"um": "um", "s": "s", "C": "degC"}[name.rsplit("_", 1)[1]]

    def written(value: float) -> str:
        return f"{number(value)} {aim.unit}".strip()

    result = (
        f"{number(answer.result.value)} {unit} ({100 * aim.confidence:g} %: "
        f"{number(answer.result.low)} to {number(answer.result.high)} {unit})"
    )
    click.echo(aim.title)
    if answer.reached:
        click.echo(
            f"{aim.name} = {written(answer.value.value)} ({100 * aim.confidence:g} %: "
            f"{written(answer.value.low)} to {written(answer.value.high)}) gives a "
            f"{aim.quantity} of {number(aim.wanted)} {unit}"
        )
        click.echo(f"runs with {aim.name} = {written(answer.tried)} gave {result}")
        for other in answer.others:
            click.echo(f"by mean field also met with {aim.name} = {written(other)}, not run")
    else:
        low, high = written(aim.written(aim.low)), written(aim.written(aim.high))
        click.echo(
            f"a {aim.quantity} of {number(aim.wanted)} {unit} cannot be reached with {aim.name} "
            f"between {low} and {high}: it lies between {number(answer.span[0])} and "
            f"{number(answer.span[1])} {unit}"
        )
        click.echo(f"the best is {aim.name} = {written(answer.value.value)}, which gave {result}")
    notices(answer.notes)


def _print_failures(failures: tuple[Failure, ...], folder: Path) -> None:
    for failure in failures:
        message = failure.message.replace("\n", " ")
        click.echo(
            f"spheru: failed: {failure.case.point.label}, replica {failure.case.replica}: "
            f"{message}",
            err=True,
        )
    if failures:
        click.echo(
            f"spheru: {len(failures)} runs failed; their settings stand in {folder / 'failed'}; "
            "the same command tries them again",
            err=True,
        )
