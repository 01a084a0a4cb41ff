"""Runs whose map is larger than memory: written chunk by chunk, and continued after any stop.

Until such a run is complete it lives in a hidden folder beside its own, whose name tells which run
it is. What a chunk holds is computed in `spheru.run.stored`, how it is written in
`spheru.output.store`.
"""

from __future__ import annotations

import hashlib
import io
import shutil
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final
from zipfile import BadZipFile

import numpy as np

from spheru.errors import CapacityError, FolderError, RunError, ValidityError
from spheru.files import sha256, write_atomic
from spheru.output.folder import STORE, put_folder, refuse_folder, run_identity, write_run
from spheru.output.store import CHUNK, LabelStore, require_zarr
from spheru.run.plan import free_memory
from spheru.run.stored import chunk_windows, grow_stored

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    from numpy.typing import NDArray

    from spheru.run.estimate import Estimate
    from spheru.run.plan import Plan
    from spheru.run.result import Result

__all__ = ["Unfinished", "disk_needed", "memory_needed", "store_run", "unfinished_folder"]

_SUFFIX: Final = ".unfinished"
_FORMAT: Final = "chunks 1"  # raised whenever what is noted of a chunk changes


def disk_needed(plan: Plan) -> int:
    """Return how much room on the disk a stored run takes at the most.

    Parameters
    ----------
    plan : Plan
        What would be run.

    Returns
    -------
    size : int
        Bytes. Labels take 4 bytes a pixel; packed they were measured to take 1/(1.5 d) of that,
        d = (pixels/spherulites)^(1/3), from d = 3 to 48: twice as much is asked for. Tables and
        what is noted of the chunks take up to 400 bytes a spherulite.
    """
    across = (plan.frame.pixels / max(plan.spherulites, 1.0)) ** (1 / 3)
    packed = 4 * plan.frame.pixels * min(1.0, 2 / (1.5 * across))
    return int(packed + 400 * plan.spherulites) + 20_000_000


def memory_needed(plan: Plan) -> int:
    """Return how much memory a stored run takes: it does not depend on the number of voxels.

    Parameters
    ----------
    plan : Plan
        What would be run.

    Returns
    -------
    memory : int
        Bytes: program and chunks in work (measured: 370 MB on two threads, 500 MB on eight), 150
        for each nucleus that is drawn, 30 a pixel of the picture.
    """
    picture = plan.frame.pixels // plan.frame.shape[0]
    return 600_000_000 + int(150 * plan.candidates) + 30 * picture


def store_run(
    expected: Estimate,
    folder: str | Path,
    *,
    overwrite: bool = False,
    replica: int = 0,
    threads: int | None = None,
    chunk: int = CHUNK,
    progress: Callable[[str, float], None] | None = None,
    notice: Callable[[str], None] | None = None,
) -> Result:
    """Grow a volume chunk by chunk into the folder of its run.

    A run that was stopped, in whatever way, is continued by the same call: what is done is not
    done again, and the result is the same.

    Parameters
    ----------
    expected : Estimate
        What is run: the estimate of settings whose view is a block or a film.
    folder : path-like
        Folder of the run; the map stands in it as ``labels.ome.zarr``.
    overwrite : bool, optional
        Whether an earlier run there is replaced, once the new one is complete.
    replica : int, optional
        Number of the replica.
    threads : int, optional
        Threads to use; all cores where it is None.
    chunk : int, optional
        Pixels along the edge of a chunk.
    progress : callable, optional
        Called with the name of the stage and the share that is done of what was still to do.
    notice : callable, optional
        Called with a line that the user should know, such as that a run is continued.

    Returns
    -------
    result : Result
        The run; its map is in the folder only.

    Raises
    ------
    FolderError
        As `refuse_folder` does, if an unfinished run of other settings is there, or the disk
        refuses; finished chunks stay then.
    CapacityError
        If the disk has not enough room, or the memory for the nuclei.
    MissingExtraError
        If zarr is not installed.
    ValidityError
        If the view is neither a block nor a film.
    """
    plan = expected.plan
    if plan.frame.dimension != 3:
        raise ValidityError(
            f"sample.view: expected a block or a film for a map that is stored chunk by chunk, got "
            f"a {plan.sample.view}"
        )
    require_zarr()
    refuse_folder(folder, overwrite=overwrite)
    target = Path(folder).resolve()
    place = unfinished_folder(expected, folder, replica=replica, chunk=chunk)
    _refuse_others(target, place.name)
    _refuse_too_many(plan)
    _refuse_full_disk(plan, place)
    try:
        place.mkdir(parents=True, exist_ok=True)
        with _alone(place):
            kept = Unfinished(place, expected, chunk)
            if kept.done and notice is not None:
                notice(f"continued: {kept.done} of {len(kept.windows)} chunks were there already")
            result = grow_stored(
                expected, kept, replica=replica, threads=threads, progress=progress
            )
            if progress is not None:
                progress("writing", 0.98)
            kept.empty()
            write_run(result, kept.run)
            refuse_folder(folder, overwrite=overwrite)  # it may have come up meanwhile
            put_folder(kept.run, target)
    except KeyboardInterrupt:
        if notice is not None:
            notice(f"finished chunks are kept in {place}: the same command goes on from there")
        raise
    except OSError as fault:
        if isinstance(fault, FolderError):
            raise
        raise FolderError(
            f"{folder}: cannot be written ({fault.strerror or fault}); finished chunks are kept in "
            f"{place}: make room, then give the same command again"
        ) from fault
    shutil.rmtree(place, ignore_errors=True)
    return result


def unfinished_folder(
    expected: Estimate, folder: str | Path, *, replica: int = 0, chunk: int = CHUNK
) -> Path:
    """Return where a stored run lives until it is complete.

    Parameters
    ----------
    expected, folder, replica, chunk
        As for `store_run`.

    Returns
    -------
    folder : Path
        A hidden folder beside that of the run, named after version, settings, seed and replica.
    """
    target = Path(folder).resolve()
    identity = f"{run_identity(expected.settings, replica)} {_FORMAT} {chunk}"
    digest = hashlib.sha256(identity.encode()).hexdigest()[:16]
    return target.with_name(f".{target.name}.{digest}{_SUFFIX}")


class Unfinished:
    """The chunks of a run and what is noted of them, in its hidden folder.

    Parameters
    ----------
    folder : Path
        The folder; the run grows in ``run``, the notes stand in ``notes``.
    expected : Estimate
        What is run.
    chunk : int
        Pixels along the edge of a chunk.
    """

    def __init__(self, folder: Path, expected: Estimate, chunk: int) -> None:
        self.run, self._notes = folder / "run", folder / "notes"
        labels, frame = self.run / STORE, expected.plan.frame
        if not self._notes.is_dir():  # nothing is noted before the store is whole
            shutil.rmtree(self.run, ignore_errors=True)
            self.run.mkdir()
            LabelStore.create(labels, frame, chunk=chunk)
            self._notes.mkdir()
        for remains in (*labels.rglob("*.partial"), *self._notes.glob(".*")):
            remains.unlink()  # of a write that was cut short
        self.store = LabelStore(labels)
        self.windows = chunk_windows(frame.shape, self.store.chunk)
        self.done = len(list(self._notes.glob("grown-*")))

    @property
    def chunk(self) -> tuple[int, ...]:
        """Edges of a chunk in pixels."""
        return self.store.chunk

    def write(self, window: tuple[slice, ...], labels: NDArray[np.uint32]) -> None:
        """Keep the labels of one chunk, safely on the disk before this returns."""
        self.store.write(window, labels)

    def read(self, window: tuple[slice, ...]) -> NDArray[np.uint32]:
        """Return the labels of any part of the volume."""
        return self.store.read(window)

    def note(self, stage: str, chunk: int, record: Mapping[str, NDArray[Any]]) -> None:
        """Keep what was found about a chunk, safely on the disk before this returns."""
        stream = io.BytesIO()
        arrays: dict[str, Any] = {**record, "file_sha256": self._file_digest(chunk)}
        np.savez(stream, **arrays)  # packing them takes longer than growing the chunk
        write_atomic(self._path(stage, chunk), stream.getvalue())

    def noted(self, stage: str, chunk: int) -> bool:
        """Tell whether a chunk is done and its file is still the same."""
        try:
            return str(self.recall(stage, chunk, "file_sha256")[0]) == self._file_digest(chunk)
        except (OSError, LookupError, ValueError, BadZipFile):  # lost or damaged
            return False

    def recall(self, stage: str, chunk: int, *names: str) -> list[NDArray[Any]]:
        """Return some of what was found about a chunk."""
        with np.load(self._path(stage, chunk)) as record:
            return [record[name] for name in names]

    def empty(self) -> None:
        """Take away what an earlier attempt to complete the folder has left beside the map."""
        for entry in self.run.iterdir():
            if entry.name != STORE:
                entry.unlink()

    def _path(self, stage: str, chunk: int) -> Path:
        return self._notes / f"{stage}-{chunk:06d}.npz"

    def _file_digest(self, chunk: int) -> str:
        return sha256(self.store.chunk_file(self.windows[chunk]))


def _refuse_others(target: Path, name: str) -> None:
    """Raise where another run has been started under the same name and is not finished."""
    if not target.parent.is_dir():
        return
    for entry in target.parent.iterdir():
        if (
            entry.name.startswith(f".{target.name}.")
            and entry.name.endswith(_SUFFIX)
            and entry.name != name
            and (entry / "notes").is_dir()
        ):
            raise FolderError(
                f"{target.name}: an unfinished run of other settings, seed, replica or version is "
                f"kept in {entry}; give it the settings it was started with to continue it, delete "
                "it, or choose another name"
            )


def _refuse_too_many(plan: Plan) -> None:
    """Raise where the nuclei alone outgrow the memory."""
    needed, free = memory_needed(plan), free_memory()
    if free is not None and needed > free:
        raise CapacityError(
            f"sample.size: {plan.candidates:.3g} nuclei are drawn, which needs {needed / 1e9:.1f} "
            f"GB of memory even with the map on the disk, and {free / 1e9:.1f} GB are free; choose "
            "a smaller window"
        )


def _refuse_full_disk(plan: Plan, place: Path) -> None:
    there = sum(file.stat().st_size for file in place.rglob("*") if file.is_file())
    above = next(parent for parent in place.parents if parent.exists())
    needed, free = disk_needed(plan) - there, shutil.disk_usage(above).free
    if needed > free:
        raise CapacityError(
            f"{above}: the map needs up to {needed / 1e9:.3g} GB on the disk and "
            f"{free / 1e9:.3g} GB are free; make room, or choose a folder on another disk, a "
            "smaller window or a larger pixel"
        )


@contextmanager
def _alone(place: Path) -> Iterator[None]:
    """Keep other processes from working on the same run; the lock goes with the process."""
    try:
        import fcntl  # noqa: PLC0415 (not there on Windows, where nobody is kept away)
    except ImportError:
        yield
        return
    with (place / "lock").open("w") as stream:
        try:
            fcntl.flock(stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise RunError(
                f"{place}: another process is working on this run; wait for it, or stop it"
            ) from None
        yield
