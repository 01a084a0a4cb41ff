"""Tables in files of their own, brought into the document that names them.

A growth or site law may say ``file = "measured.csv"`` in place of its lists; from here on only the
lists are known, so that what is written back stands on its own.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from spheru.config.faults import Collecting
from spheru.errors import Fault
from spheru.files import read_table

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

__all__ = ["GROWTH_COLUMNS", "NUCLEI_COLUMNS", "SITE_COLUMNS", "with_columns"]

# key in the document -> column in the file, its SI unit
GROWTH_COLUMNS = {"temperature": ("temperature", "K"), "rate": ("growth_rate", "m/s")}
SITE_COLUMNS = {"undercooling": ("undercooling", "K"), "number": ("number", "1/m^3")}
NUCLEI_COLUMNS = {"undercooling": ("undercooling", "K"), "density": ("density", "1/m^3")}


def with_columns(
    table: Any,
    columns: Mapping[str, tuple[str, str]],
    *,
    folder: Path,
    where: str,
    faults: list[Fault],
) -> Any:
    """Return a law with its columns in place of the name of a file.

    Parameters
    ----------
    table : any
        The law as it stands in the document; one that names no file comes back as it is.
    columns : mapping of str to (str, str)
        Key in the document -> column in the file and its SI unit.
    folder : Path
        From where the path counts.
    where : str
        Dotted key of the law.
    faults : list of Fault
        Where a fault of the file is added.

    Returns
    -------
    table : any
        The law with the lists in it, and without the name; where the file is at fault the lists
        are empty and the name is kept.
    """
    if not isinstance(table, dict) or not isinstance(table.get("file"), str):
        return table
    name, before = table["file"], len(faults)
    faults.extend(
        Fault(where=f"{where}.{key}", what="stands beside file; leave one of them out")
        for key in columns
        if key in table
    )
    with Collecting(faults, f"{where}.file"):
        read = read_table(folder / name, dict(columns.values()), differences={"undercooling"})
        lists = {
            key: [f"{value!r} {unit}" for value in read[column].tolist()]
            for key, (column, unit) in columns.items()
        }
        if len(faults) == before:
            return {key: value for key, value in table.items() if key != "file"} | lists
    return table | {key: [] for key in columns}
