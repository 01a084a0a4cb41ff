"""Files that are whole or not there: atomic writing, durable appending, CSV with units.

What stands in a file is decided elsewhere.
"""

from __future__ import annotations

import csv
import hashlib
import io
import os
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

__all__ = ["append_line", "sha256", "table_text", "write_atomic"]


def write_atomic(path: str | Path, content: bytes | str) -> None:
    r"""Write a file so that it is there in full or not at all.

    Parameters
    ----------
    path : path-like
        Where it shall stand; the folder must exist.
    content : bytes or str
        What it shall hold; text is written in UTF-8 with ``\n`` at the ends of lines.

    Raises
    ------
    OSError
        If the disk or the folder refuses; nothing is left behind then.
    """
    target = Path(path)
    data = content.encode() if isinstance(content, str) else content
    handle, temporary = tempfile.mkstemp(dir=target.parent, prefix=f".{target.name}.")
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(data)
            stream.flush()
            os.fsync(stream.fileno())
        Path(temporary).chmod(0o644)
        Path(temporary).replace(target)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise


def append_line(path: str | Path, line: str) -> None:
    """Append one line and see it safely on the disk before returning.

    Parameters
    ----------
    path : path-like
        The file; made where it is missing.
    line : str
        One line without its end.
    """
    with Path(path).open("ab") as stream:
        stream.write(line.encode() + b"\n")
        stream.flush()
        os.fsync(stream.fileno())


def sha256(path: str | Path) -> str:
    """Return the SHA-256 of a file in hexadecimal digits.

    Parameters
    ----------
    path : path-like
        The file.

    Returns
    -------
    digest : str
        64 hexadecimal digits.
    """
    with Path(path).open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()


def table_text(columns: Mapping[str, Sequence[object]], *, digits: int = 9) -> str:
    r"""Return a CSV table; every column name carries its unit.

    Parameters
    ----------
    columns : mapping of str to sequence
        Columns of equal length by name, such as ``"diameter_um"``.
    digits : int, optional
        Significant digits of floats.

    Returns
    -------
    text : str
        Comma-separated table (RFC 4180) with ``\n`` at the ends of lines. Nothing stands for None
        and for nan.

    Raises
    ------
    ValueError
        If the columns are not equally long.

    Examples
    --------
    >>> print(table_text({"label": [1, 2], "diameter_um": [12.5, float("nan")]}), end="")
    label,diameter_um
    1,12.5
    2,
    """
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(columns)
    for row in zip(*columns.values(), strict=True):
        writer.writerow([_cell(value, digits) for value in row])
    return stream.getvalue()


def _cell(value: object, digits: int) -> str:
    if value is None or value != value:  # noqa: PLR0124 (nan is the value that differs from itself)
        return ""
    if isinstance(value, bool) or type(value).__name__ == "bool":
        return "yes" if value else "no"
    if isinstance(value, float) or (hasattr(value, "dtype") and value.dtype.kind == "f"):
        return f"{float(value):.{digits}g}"  # type: ignore[arg-type]
    return str(value)
