"""One case of a series: what it is called, how it is run, and the journal of those that are done.

A case is one run: one set of settings and one replica. Which cases there are is decided in
`spheru.run.series` and `spheru.run.aim`; on which processes they run, in `spheru.run.workers`.
"""

from __future__ import annotations

import hashlib
import io
import json
import logging
import math
from contextlib import suppress
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru import __version__
from spheru.errors import (
    FolderError,
    InputFault,
    NoCrystallisationError,
    SpheruError,
)
from spheru.files import append_line, write_atomic
from spheru.run.course import Course
from spheru.run.kinetics import kinetics
from spheru.thermal.history import History, Hold

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.run.points import Make, Point
    from spheru.run.result import Result
    from spheru.run.settings import Settings

__all__ = [
    "Case",
    "Done",
    "Job",
    "Journal",
    "identity",
    "isothermal_half_time",
    "run_case",
]

_LOG = logging.getLogger("spheru")

_LARGEST: Final = 1024  # pixels along an edge of the picture that is kept of a case
_WHOLE: Final = 0.999
_LONGEST: Final = 1e12  # s, of a hold that is tried for a half time
_NO_NUMBERS: Final = {"format_version", "seed", "replica"}  # of a summary


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """One run of a series.

    Attributes
    ----------
    key : str
        Its identity: that of its settings (see `identity`) and the replica.
    point : Point
        The values it is run with.
    replica : int
        Number of the replica.
    """

    key: str
    point: Point
    replica: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """What is done with every case; it travels to the workers.

    Attributes
    ----------
    make : callable
        Turns a document into settings; it must be picklable.
    half_time_at : float or None
        Temperature of a hold whose half time is wanted beside the run [K].
    """

    make: Make
    half_time_at: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Done:
    """What comes back from a worker.

    Attributes
    ----------
    numbers : mapping of str to float, int, str or None
        Headline numbers by name, the unit in every name; empty where the case failed.
    warnings : tuple of str
        What must be said with them.
    picture : bytes or None
        The map and the conversion of the first replica, as an npz file.
    fault : str
        Why the case failed; empty where it did not.
    """

    numbers: Mapping[str, Any]
    warnings: tuple[str, ...] = ()
    picture: bytes | None = None
    fault: str = ""


def identity(settings: Settings) -> str:
    """Return the identity of settings: the same settings, files and version, the same text.

    Parameters
    ----------
    settings : Settings
        What is run; title and order of keys do not matter.

    Returns
    -------
    digest : str
        16 hexadecimal digits of a SHA-256.
    """
    document = {key: value for key, value in settings.document.items() if key != "title"}
    files = {name: hashlib.sha256(data).hexdigest() for name, data in settings.attachments.items()}
    whole = [__version__, document | {"seed": settings.seed}, files]
    return hashlib.sha256(json.dumps(whole, sort_keys=True).encode()).hexdigest()[:16]


def run_case(job: Job, document: Mapping[str, Any], replica: int) -> Done:
    """Run one case on one thread; a fault comes back as text, so that it survives the way.

    Parameters
    ----------
    job : Job
        What is done with every case.
    document : mapping
        The settings of the case.
    replica : int
        Number of the replica; of the first one the map is kept.

    Returns
    -------
    done : Done
        Headline numbers, or the fault.
    """
    from spheru.run.grow import grow  # noqa: PLC0415 (the compiler is loaded by workers only)

    try:
        settings = job.make(document)
        result = grow(settings, replica=replica, threads=1)
        numbers = _headline(result.summary)
        if job.half_time_at is not None:
            numbers["estimate_half_time_of_hold_s"] = isothermal_half_time(
                settings, job.half_time_at
            )
    except SpheruError as fault:
        return Done(numbers={}, fault=str(fault))
    except Exception as fault:  # noqa: BLE001 (whatever it is, the other cases go on)
        return Done(numbers={}, fault=f"unexpected fault: {type(fault).__name__}: {fault}")
    return Done(
        numbers=numbers,
        warnings=result.warnings,
        picture=_picture(result) if replica == 0 else None,
    )


def isothermal_half_time(settings: Settings, temperature: float) -> float | None:
    """Return the half time of a hold by mean field, as if the melt were there at once.

    Parameters
    ----------
    settings : Settings
        Material and nuclei; their own history is left aside.
    temperature : float
        Temperature of the hold [K].

    Returns
    -------
    half_time : float or None
        Time from the start of the hold to half of the final fraction [s]; None where nothing
        crystallises.
    """
    duration = 1e3
    while duration < _LONGEST:
        history = History(segments=(Hold(temperature=temperature, duration=duration),))
        with suppress(NoCrystallisationError):
            found = kinetics(replace(settings, history=history))
            if found.fraction[-1] > _WHOLE:
                return Course(time=found.clock.time, fraction=found.fraction).reaches(0.5)
        duration *= 10
    return None


def _headline(summary: Mapping[str, Any]) -> dict[str, Any]:
    """Return the numbers of a summary on one level."""

    def numbers(table: Mapping[str, Any], front: str = "") -> dict[str, Any]:
        return {
            f"{front}{key}": value
            for key, value in table.items()
            if key not in _NO_NUMBERS and (value is None or isinstance(value, int | float))
        }

    return {
        **numbers(summary),
        "half_time_from": summary["half_time_from"],
        "spherulites_measured": summary["measured"]["count"],
        **numbers(summary["spherulites_by_origin"], "spherulites_from_"),
        **numbers(summary["kinetic_uncertainty"]),
        **numbers(summary["estimate"], "estimate_"),
    }


def _picture(result: Result) -> bytes:
    """Return a corner of the map and the conversion as an npz file."""
    labels = result.picture.labels[:_LARGEST, :_LARGEST]
    whole = labels.shape == result.picture.labels.shape
    curves = result.conversion
    stream = io.BytesIO()
    np.savez_compressed(
        stream,
        labels=labels.astype(np.min_scalar_type(int(labels.max()))),
        pixel=result.picture.frame.pixel,
        periodic=np.array(result.picture.frame.periodic) & whole,
        time=curves.time,
        temperature=curves.temperature,
        fraction=curves.fraction.astype(np.float32),
        fraction_estimate=curves.fraction_estimate.astype(np.float32),
        cools=curves.landmarks.half_temperature is not None,
    )
    return stream.getvalue()


class Journal:
    """The finished cases of a folder: one line each, appended durably.

    Only the places of the lines are kept in memory. A line that a kill or a full disk has cut
    short is dropped when the journal is opened; its case is run again.

    Parameters
    ----------
    folder : path-like
        Folder of the series; made where it is missing.
    base : mapping
        The settings without what is varied: a folder belongs to one of these.

    Raises
    ------
    FolderError
        If the folder holds another series or what no series has written, or cannot be written.
    """

    def __init__(self, folder: str | Path, base: Mapping[str, Any]) -> None:
        self.folder = Path(folder)
        self.path = self.folder / "cases.jsonl"
        self._places: dict[str, int] = {}
        digest = hashlib.sha256(json.dumps(base, sort_keys=True).encode()).hexdigest()
        try:
            self._open(digest)
        except OSError as fault:
            if isinstance(fault, InputFault):
                raise
            raise FolderError(
                f"{folder}: cannot be written ({fault.strerror or fault}); make room or choose "
                "another folder"
            ) from fault

    def _open(self, digest: str) -> None:
        if self.folder.exists() and not self.folder.is_dir():
            raise FolderError(f"{self.folder}: is a file, not a folder; choose another name")
        self.folder.mkdir(parents=True, exist_ok=True)
        if not self.path.exists():
            if foreign := sorted(entry.name for entry in self.folder.iterdir()):
                raise FolderError(
                    f"{self.folder}: holds what no series has written ({', '.join(foreign[:3])}); "
                    "choose another name"
                )
            write_atomic(self.path, json.dumps({"format_version": 1, "base": digest}) + "\n")
        (self.folder / "maps").mkdir(exist_ok=True)
        with self.path.open("rb+") as stream:
            place, head = 0, True
            for line in stream:
                record = _read_line(line)
                if head and (record or {}).get("base") != digest:
                    raise FolderError(
                        f"{self.folder}: holds a series of other settings; choose another name. "
                        "(What is varied, and how often, may change: finished cases are kept.)"
                    )
                if record is not None and "key" in record:
                    self._places[record["key"]] = place
                if not line.endswith(b"\n"):
                    break
                place, head = place + len(line), False
            stream.truncate(place)

    def __contains__(self, key: str) -> bool:
        return key in self._places

    def __len__(self) -> int:
        return len(self._places)

    def __getitem__(self, key: str) -> dict[str, Any]:
        """Return the line of a finished case: key, label, replica, numbers, warnings."""
        with self.path.open("rb") as stream:
            stream.seek(self._places[key])
            record: dict[str, Any] = json.loads(stream.readline())
        return record

    def map_path(self, key: str) -> Path:
        """Return where the map of a case stands, if it was kept."""
        return self.folder / "maps" / f"{key}.npz"

    def add(self, case: Case, done: Done) -> None:
        """Put down a finished case, safely on the disk before this returns.

        Raises
        ------
        OSError
            If the disk refuses; what was put down before stays.
        """
        if done.picture is not None:
            write_atomic(self.map_path(case.key), done.picture)
        record = {
            "key": case.key,
            "label": case.point.label,
            "replica": case.replica,
            "numbers": {name: _plain(value) for name, value in done.numbers.items()},
            "warnings": list(done.warnings),
        }
        place = self.path.stat().st_size
        append_line(self.path, json.dumps(record, allow_nan=False))
        self._places[case.key] = place


def _plain(value: Any) -> Any:
    """Return a number as the journal holds it: 12 digits, None for what is not finite.

    The digits beyond depend on the number of threads that the linear algebra library uses, which
    is not the same on every worker.
    """
    if not isinstance(value, float):
        return value
    return float(f"{value:.12g}") if math.isfinite(value) else None


def _read_line(line: bytes) -> dict[str, Any] | None:
    try:
        record = json.loads(line)
    except ValueError:
        _LOG.warning("a damaged line of the journal is passed over; its case is run again")
        return None
    return record if isinstance(record, dict) else None
