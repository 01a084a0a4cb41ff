"""The folder of a run: written whole or not at all.

What stands in the tables and figures is decided in `spheru.output.tables` and
`spheru.output.plots`.
"""

from __future__ import annotations

import hashlib
import json
import os
import secrets
import shutil
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru import __version__
from spheru.config.write import resolved_document, write_settings
from spheru.errors import FolderError, ValidityError
from spheru.files import sha256
from spheru.image.formats import write_labels
from spheru.output.plots.canvas import png
from spheru.output.plots.conversion import plot_conversion
from spheru.output.plots.map import describe_edges, plot_map
from spheru.output.plots.sizes import plot_sizes
from spheru.output.run_report import run_report
from spheru.output.tables import conversion_table, size_table, spherulite_lines
from spheru.run.result import StoredMap

if TYPE_CHECKING:
    from spheru.run.result import Result
    from spheru.run.settings import Sample, Settings

__all__ = [
    "STORE",
    "json_text",
    "put_folder",
    "refuse_folder",
    "run_identity",
    "save_run",
    "write_folder",
    "write_run",
]

STORE: Final = "labels.ome.zarr"  # of a run whose map was larger than memory

_SUMMARY: Final = "summary.json"
_REPORT: Final = "report.html"
_LATER: Final = frozenset({_SUMMARY, _REPORT})  # of a run, but not in its list of files


def refuse_folder(folder: str | Path, *, overwrite: bool = False, record: str = _SUMMARY) -> None:
    """Raise if a run cannot be written to a folder: to be asked before a long run.

    Parameters
    ----------
    folder : path-like
        Folder of the run.
    overwrite : bool, optional
        Whether a run that is there may be replaced.
    record : str, optional
        Name of the JSON file by which an earlier one is known: it lists its ``files``.

    Raises
    ------
    FolderError
        If the folder is there and must not be replaced, holds anything but an earlier run, or
        stands where nothing can be written.
    """
    target = Path(folder).resolve()
    if target.exists():
        if not target.is_dir():
            raise FolderError(f"{folder}: is a file, not a folder; choose another name")
        if not overwrite:
            raise FolderError(
                f"{folder}: is already there; choose another name, or replace it with --overwrite"
            )
        foreign = _foreign(target, record)
        if foreign:
            named = ", ".join(foreign[:3]) + (", ..." if len(foreign) > 3 else "")
            raise FolderError(
                f"{folder}: holds what no run has written ({named}), so it is not replaced; move "
                "that away, or choose another name"
            )
        if Path.cwd().is_relative_to(target):
            raise FolderError(
                f"{folder}: cannot be replaced from within; go to another folder first"
            )
    above = next(parent for parent in target.parents if parent.exists())
    if not above.is_dir():
        raise FolderError(f"{folder}: {above} is a file, not a folder; choose another name")
    if not os.access(above, os.W_OK | os.X_OK):
        raise FolderError(f"{folder}: no permission to write in {above}; choose another folder")


def save_run(result: Result, folder: str | Path, *, overwrite: bool = False) -> Path:
    """Write the folder of a run.

    Everything is written to a hidden folder beside it first, which then takes the name: whatever
    happens, the folder is there in full or not at all. The same settings, seed and version give
    the same bytes.

    Parameters
    ----------
    result : Result
        A finished run.
    folder : path-like
        Folder of the run; folders above it are made where they are missing.
    overwrite : bool, optional
        Whether an earlier run there is replaced, once the new one is complete.

    Returns
    -------
    folder : Path
        The folder, as it was asked for.

    Raises
    ------
    FolderError
        As `refuse_folder` does, or if the disk refuses.
    ValidityError
        If an attachment of the settings has a name that cannot stand in the folder.
    """
    return write_folder(folder, lambda staging: write_run(result, staging), overwrite=overwrite)


def write_folder(
    folder: str | Path,
    write: Callable[[Path], None],
    *,
    overwrite: bool = False,
    record: str = _SUMMARY,
) -> Path:
    """Write a folder so that it is there in full or not at all.

    Parameters
    ----------
    folder : path-like
        The folder; those above it are made where they are missing.
    write : callable
        Fills the folder that it is given.
    overwrite : bool, optional
        Whether an earlier one is replaced, once the new one is complete.
    record : str, optional
        As for `refuse_folder`.

    Returns
    -------
    folder : Path
        The folder, as it was asked for.

    Raises
    ------
    FolderError
        As `refuse_folder` does, or if the disk refuses.
    """
    refuse_folder(folder, overwrite=overwrite, record=record)
    target = Path(folder).resolve()
    staging = target.with_name(f".{target.name}.{secrets.token_hex(4)}")
    missing = [parent for parent in target.parents if not parent.exists()]
    try:
        staging.mkdir(parents=True)
        write(staging)
        refuse_folder(folder, overwrite=overwrite, record=record)  # it may have come up meanwhile
        put_folder(staging, target)
    except BaseException as fault:
        shutil.rmtree(staging, ignore_errors=True)
        for parent in missing:
            with suppress(OSError):
                parent.rmdir()
        if isinstance(fault, OSError) and not isinstance(fault, FolderError):
            raise FolderError(
                f"{folder}: cannot be written ({fault.strerror or fault}); make room or "
                "choose another folder; nothing is left behind"
            ) from fault
        raise
    return Path(folder)


def put_folder(staging: Path, target: Path) -> None:
    """Give a complete folder its name; an earlier one is removed only then.

    Parameters
    ----------
    staging : Path
        The folder, on the same disk.
    target : Path
        Its name.
    """
    if not target.exists():
        staging.rename(target)
        return
    old = staging.with_name(f"{staging.name}.old")
    try:
        target.rename(old)
        staging.rename(target)
    finally:
        if old.exists() and not target.exists():
            old.rename(target)
        shutil.rmtree(old, ignore_errors=True)


def _foreign(folder: Path, record: str) -> list[str]:
    """Return the names in a folder that no run has written."""
    names = {entry.name for entry in folder.iterdir()}
    ours: set[str] = set()
    with suppress(OSError, ValueError, TypeError, KeyError):
        summary = json.loads((folder / record).read_bytes())
        if "format_version" in summary:
            ours = set(summary["files"]) | _LATER | {record}
    return sorted(names - ours)


def run_identity(settings: Settings, replica: int) -> str:
    """Return a text that no two different runs share: version, settings, seed and replica.

    Parameters
    ----------
    settings : Settings
        The settings with window and pixel settled.
    replica : int
        Number of the replica.

    Returns
    -------
    identity : str
        The same whenever the same run is made again.
    """
    digest = hashlib.sha256(_settings_text(settings)).hexdigest()
    return f"{__version__} {digest} {settings.seed} {replica}"


def write_run(result: Result, folder: Path) -> None:
    """Fill an empty folder with the files of a run; a stored map must be there already.

    Parameters
    ----------
    result : Result
        A finished run.
    folder : Path
        The folder.

    Raises
    ------
    ValidityError
        If an attachment of the settings has a name that cannot stand in the folder.
    OSError
        If the disk refuses.
    """
    settings = _settings_text(result.settings)
    hashes = {}
    if isinstance(result.image, StoredMap):
        hashes[STORE] = result.image.sha256
    else:
        identity = run_identity(result.settings, result.replica)
        write_labels(folder / "labels.ome.tif", result.image, identity=identity)
    for name, content in _contents(result):
        with (folder / name).open("wb") as stream:
            stream.writelines(c.encode() if isinstance(c, str) else c for c in content)
    (folder / "settings.toml").write_bytes(settings)
    _attach(result.settings.attachments, folder)
    names = sorted(entry.name for entry in folder.iterdir())
    summary = {
        **result.summary,
        "settings_sha256": hashlib.sha256(settings).hexdigest(),
        "files": {name: hashes.get(name) or sha256(folder / name) for name in names},
    }
    (folder / _SUMMARY).write_bytes(json_text(summary).encode())
    (folder / _REPORT).write_bytes(run_report(folder).encode())
    for name in {*names, *_LATER} - set(hashes):
        with (folder / name).open("rb+") as stream:
            os.fsync(stream.fileno())


def _settings_text(settings: Settings) -> bytes:
    return write_settings(resolved_document(settings)).encode()


def _contents(result: Result) -> Iterator[tuple[str, Iterable[str | bytes]]]:
    """Yield the tables and figures of a run piece by piece, one at a time."""
    settings, sizes = result.settings, result.sizes
    measured = result.image if sizes.dimension == 3 else result.picture
    yield "spherulites.csv", spherulite_lines(sizes, measured.births)
    yield "conversion.csv", [conversion_table(result.conversion)]
    yield "sizes.csv", [size_table(sizes)]

    seed = f"seed {settings.seed}" + (f", replica {result.replica}" if result.replica else "")
    pixel = f"pixel {result.picture.frame.pixel * 1e6:.4g} µm"
    view, edges = _describe_view(settings.sample), describe_edges(measured.frame)
    ax = plot_map(
        result.picture,
        title=settings.title,
        caption=f"n = {result.picture.count} spherulites, {seed}, {pixel}, {view}, "
        f"{describe_edges(result.picture.frame)}.",
    )
    yield "map.png", [png(ax)]
    measured_in = "whole block" if sizes.dimension == 3 else view
    ax = plot_sizes(
        sizes,
        title=settings.title,
        caption=f"{measured_in.capitalize()}, {edges}, {pixel}, {seed}.",
    )
    yield "sizes.png", [png(ax)]
    ax, _ = plot_conversion(
        result.conversion,
        title=settings.title,
        caption=f"Simulated: n = {result.image.count} spherulites, {seed}.",
    )
    yield "conversion.png", [png(ax)]


def _describe_view(sample: Sample) -> str:
    thickness = "" if sample.thickness is None else f" of {sample.thickness * 1e6:.4g} µm"
    if sample.view == "section":
        return "plane section of a bulk sample"
    if sample.view == "block":
        return "middle plane of a block"
    if sample.view == "plane":
        return f"growth in the plane of a thin film{thickness}"
    sight = {"mid": "middle plane of", "face": "lower face of", "through": "view through"}
    return f"{sight[sample.sight]} a film{thickness}"


def _attach(attachments: Mapping[str, bytes], folder: Path) -> None:
    for name, content in attachments.items():
        path = folder / name
        if Path(name).name != name or path.exists() or name in _LATER:
            raise ValidityError(
                f"attachment '{name}': expected the bare name of a file that a run does not have "
                "itself; rename it"
            )
        path.write_bytes(content)


def json_text(value: Any) -> str:
    """Return a value as JSON, with numpy's numbers, and null for what is not finite.

    Parameters
    ----------
    value : object
        Mappings, sequences, arrays, numbers and text within each other.

    Returns
    -------
    text : str
        Indented, with an end of line.

    Examples
    --------
    >>> print(json_text({"n": np.int64(2), "high": float("nan")}), end="")
    {
      "n": 2,
      "high": null
    }
    """
    return json.dumps(_plain(value), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def _plain(value: Any) -> Any:
    """Return what JSON can hold: numpy's numbers as numbers, nan and infinity as null."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, np.ndarray | np.generic):
        return _plain(value.tolist())
    if isinstance(value, float) and not np.isfinite(value):
        return None
    return value
