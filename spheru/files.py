"""Files that are whole or not there: atomic writing, durable appending, CSV with units.

What stands in a file is decided elsewhere.
"""

from __future__ import annotations

import csv
import hashlib
import io
import os
import re
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import DataError, UnitError, nearest
from spheru.units import describe, to_si

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping, Sequence

    from numpy.typing import NDArray

__all__ = ["append_line", "read_table", "read_text", "sha256", "table_text", "write_atomic"]

# What may follow the name of a column: time_s, time [s], time (s), time / s.
_UNIT: Final = re.compile(r"_(.+)|\s*\[(.+)\]|\s*\((.+)\)|\s*/\s*(.+)")


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


def read_text(path: str | Path) -> str:
    """Return the text of a file that a user gave.

    Parameters
    ----------
    path : path-like
        The file, in UTF-8, with or without a byte order mark.

    Returns
    -------
    text : str
        What it holds.

    Raises
    ------
    DataError
        If it is not there, is a folder, cannot be read or is not UTF-8.
    """
    source = Path(path)
    try:
        return source.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise DataError(f"{source}: there is no such file") from None
    except IsADirectoryError:
        raise DataError(f"{source}: expected a file, found a folder") from None
    except UnicodeDecodeError as fault:
        line = fault.object.count(b"\n", 0, fault.start) + 1
        raise DataError(
            f"{source}, row {line}: expected text in UTF-8, found the byte "
            f"0x{fault.object[fault.start]:02x}; save the file as UTF-8"
        ) from None
    except (OSError, ValueError) as fault:
        raise DataError(f"{source}: cannot be read ({fault})") from None


def read_table(
    path: str | Path, columns: Mapping[str, str], *, differences: Collection[str] = ()
) -> dict[str, NDArray[np.float64]]:
    """Read the wanted columns of a table whose header carries units.

    Commas, semicolons or tabs part the cells; lines that start with ``#`` and empty ones are passed
    over. A unit stands behind the name: ``time_s``, ``time [s]``, ``time (min)``, ``time / s``;
    ``temperature_C`` means degrees Celsius.

    Parameters
    ----------
    path : path-like
        The file, in UTF-8.
    columns : mapping of str to str
        SI unit of every column wanted, by its name.
    differences : collection of str, optional
        Columns that hold differences of temperature.

    Returns
    -------
    table : dict of str to ndarray of float64, shape (n,)
        The columns in SI units, n >= 1.

    Raises
    ------
    DataError
        With file, row and column: a missing column or unit, a wrong unit, a cell that is no finite
        number, a row of another length, a temperature below absolute zero.
    """
    text = read_text(path)
    lines = [
        (number, line)
        for number, line in enumerate(text.splitlines(), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if len(lines) < 2:
        raise DataError(f"{path}: expected a header and at least one row, found {len(lines)} rows")
    first = lines[0][1]
    delimiter = next((mark for mark in "\t;" if mark in first), ",")
    header, *rows = [
        [cell.strip() for cell in row]
        for row in csv.reader((line for _, line in lines), delimiter=delimiter)
    ]
    if len(rows) != len(lines) - 1:
        raise DataError(f"{path}: a quotation mark is opened and not closed in its line")
    for (number, _), row in zip(lines[1:], rows, strict=True):
        if len(row) != len(header):
            raise DataError(
                f"{path}, row {number}: expected {len(header)} cells as in the header, "
                f"got {len(row)}"
                + ("; write decimal points, not commas" if delimiter == "," else "")
            )
    table = {}
    for name, unit in columns.items():
        place, low, high = _column(path, header, name, unit, difference=name in differences)
        values = [
            _number(path, number, name, unit, row[place])
            for (number, _), row in zip(lines[1:], rows, strict=True)
        ]
        table[name] = low + np.array(values) * (high - low)
        if unit == "K" and name not in differences and table[name].min() < 0:
            number = lines[1 + int(np.argmin(table[name]))][0]
            raise DataError(f"{path}, row {number}, column {name}: lies below absolute zero")
    return table


def _column(
    path: str | Path, header: list[str], name: str, unit: str, *, difference: bool
) -> tuple[int, float, float]:
    """Return where a column stands, and what 0 and 1 in it are in SI units."""
    kind, _ = describe(unit, difference=difference)
    wanted = name.casefold()
    found = [
        (place, cell[len(name) :])
        for place, cell in enumerate(header)
        if cell.casefold() == wanted
        or (cell.casefold().startswith(wanted) and _UNIT.fullmatch(cell[len(name) :]))
    ]
    if len(found) != 1:
        close = nearest(name, header)
        hint = f" (did you mean '{close}'?)" if close and not found else ""
        raise DataError(
            f"{path}: expected one column '{name}' with {kind} and its unit, such as "
            f"'{name} [{unit}]', found {len(found)} in the header: {', '.join(header)}{hint}"
        )
    place, rest = found[0]
    if not rest:
        if unit == "1":
            return place, 0.0, 1.0
        raise DataError(f"{path}: column '{name}' has no unit; write for example '{name} [{unit}]'")
    parts = _UNIT.fullmatch(rest)
    written = next(part for part in (parts.groups() if parts else ()) if part)
    written = re.sub(r"(?<![A-Za-z°])([CF])(?![A-Za-z])", r"deg\1", written.replace("_per_", "/"))
    try:
        zero, one = (to_si(f"{n} {written}", unit, difference=difference) for n in (0, 1))
    except UnitError as fault:
        raise DataError(f"{path}: column '{header[place]}': {fault}") from None
    return place, zero, one


def _number(path: str | Path, row: int, name: str, unit: str, cell: str) -> float:
    try:
        value = float(cell)
    except ValueError:
        value = float("nan")
    if not np.isfinite(value) or "_" in cell:
        hint = "; write a decimal point" if re.fullmatch(r"[+-]?\d+,\d+", cell) else ""
        raise DataError(
            f"{path}, row {row}, column {name}: expected {describe(unit)[0]} as a finite number, "
            f"got '{cell}'{hint}"
        )
    return value


def _cell(value: object, digits: int) -> str:
    if value is None or value != value:  # noqa: PLR0124 (nan is the value that differs from itself)
        return ""
    if isinstance(value, bool) or type(value).__name__ == "bool":
        return "yes" if value else "no"
    if isinstance(value, float) or (hasattr(value, "dtype") and value.dtype.kind == "f"):
        return f"{float(value):.{digits}g}"  # type: ignore[arg-type]
    return str(value)
