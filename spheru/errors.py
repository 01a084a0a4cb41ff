"""The errors that spheru raises.

Nothing but the tree; each message is written where the fault is found.

    SpheruError
    ├── InputFault                  what the user gave is at fault (the command line ends with 2)
    │   ├── ConfigError             a settings file or a material record; lists every fault at once
    │   ├── DataError               a data file: trace, image, table
    │   ├── UnitError               a quantity without a unit, or with the wrong one
    │   ├── ValidityError           a number outside what a law or function accepts
    │   ├── UnknownNameError        a name that is not in a list; carries the nearest ones
    │   ├── NoCrystallisationError  the history never lets the material crystallise
    │   ├── MeltingError            the history melts what it has crystallised
    │   ├── CapacityError           more memory, labels or disk than there is
    │   ├── FolderError             an output folder that is already there, or cannot be written
    │   └── MissingExtraError       an optional library that is not installed
    └── RunError                    the run itself failed (the command line ends with 1)
"""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

__all__ = [
    "CapacityError",
    "ConfigError",
    "DataError",
    "Fault",
    "FolderError",
    "InputFault",
    "MeltingError",
    "MissingExtraError",
    "NoCrystallisationError",
    "RunError",
    "SpheruError",
    "UnitError",
    "UnknownNameError",
    "ValidityError",
    "nearest",
]


class SpheruError(Exception):
    """Root of every error that spheru raises on purpose."""


class InputFault(SpheruError):  # noqa: N818 (a branch of the tree, named after what it says)
    """Something that the user gave is at fault."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """One fault of a file: where it stands, and what was expected and found.

    Attributes
    ----------
    where : str
        Dotted key (``"cooling.steps[0].rate"``), or row and column of a table.
    what : str
        What was expected with its unit, what was found, what to do.

    Examples
    --------
    >>> str(Fault(where="sample.pixel", what="expected a length above 0, got '-1 um'"))
    "sample.pixel: expected a length above 0, got '-1 um'"
    """

    where: str
    what: str

    def __str__(self) -> str:
        return f"{self.where}: {self.what}" if self.where else self.what


class ConfigError(InputFault, ValueError):
    """Every fault of one settings file or material record.

    Parameters
    ----------
    source : str
        Name of the file or of the mapping.
    faults : iterable of Fault
        All that was found, in the order of the file.

    Examples
    --------
    >>> print(ConfigError("run.toml", [Fault(where="seed", what="expected a whole number")]))
    run.toml: 1 fault
      seed: expected a whole number
    """

    def __init__(self, source: str, faults: Iterable[Fault]) -> None:
        self.source = source
        self.faults = tuple(faults)
        count = len(self.faults)
        head = f"{source}: {count} fault{'' if count == 1 else 's'}"
        super().__init__("\n  ".join([head, *map(str, self.faults)]))


class DataError(InputFault, ValueError):
    """A data file that cannot be used as it stands."""


class UnitError(InputFault, ValueError):
    """A quantity without a unit, with an unknown unit, or with the wrong dimension."""


class ValidityError(InputFault, ValueError):
    """A number outside the range that a law or a function accepts."""


class UnknownNameError(InputFault, LookupError):
    """A name that is not among the known ones.

    Parameters
    ----------
    kind : str
        What the name should name, such as ``"material"``.
    name : str
        The name that was given.
    known : iterable of str
        The names that would have been right.

    Examples
    --------
    >>> print(UnknownNameError("view", "sektion", ["block", "section"]))
    unknown view 'sektion'; did you mean 'section'? Known: block, section
    """

    def __init__(self, kind: str, name: str, known: Iterable[str]) -> None:
        self.kind = kind
        self.name = name
        self.known = tuple(sorted(known))
        close = nearest(name, self.known)
        hint = f"; did you mean '{close}'?" if close else "."
        super().__init__(f"unknown {kind} '{name}'{hint} Known: {', '.join(self.known)}")


class NoCrystallisationError(InputFault, ValueError):
    """The thermal history never lets the material crystallise."""


class MeltingError(InputFault, ValueError):
    """The thermal history melts what it has crystallised; melting is not modelled."""


class CapacityError(InputFault, MemoryError):
    """The job needs more memory, labels or disk than there is."""


class FolderError(InputFault, OSError):
    """An output folder that is already there or cannot be written."""


class MissingExtraError(InputFault, ImportError):
    """An optional library that is not installed.

    Parameters
    ----------
    purpose : str
        What it is needed for.
    extra : str
        The extra of spheru that brings it.

    Examples
    --------
    >>> print(MissingExtraError("volumes beyond memory", "zarr"))
    volumes beyond memory: install the extra with: pip install 'spheru[zarr]'
    """

    def __init__(self, purpose: str, extra: str) -> None:
        self.extra = extra
        super().__init__(f"{purpose}: install the extra with: pip install 'spheru[{extra}]'")


class RunError(SpheruError, RuntimeError):
    """The run failed although its input was in order."""


def nearest(name: str, known: Iterable[str]) -> str | None:
    """Return the known name that is closest to a misspelt one.

    Parameters
    ----------
    name : str
        The name that was given.
    known : iterable of str
        The names that would have been right.

    Returns
    -------
    name : str or None
        The nearest known name, or None where nothing is near.

    Examples
    --------
    >>> nearest("densty", ["density", "dose"])
    'density'
    >>> nearest("xyz", ["density", "dose"]) is None
    True
    """
    close = difflib.get_close_matches(name, list(known), n=1, cutoff=0.6)
    return close[0] if close else None
