"""What is varied, and what is looked for: axes, points, series and aims, as records.

They are made in `spheru.config.series`; nothing is run here, see `spheru.run.series` and
`spheru.run.aim`.
"""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final, Literal

from spheru.constants import ZERO_CELSIUS
from spheru.errors import UnknownNameError
from spheru.units import format_si, from_si

if TYPE_CHECKING:
    from spheru.run.settings import Settings

__all__ = ["QUANTITIES", "Aim", "Axis", "Make", "Point", "Series", "key_paths", "with_value"]

Make = Callable[[Mapping[str, Any]], "Settings"]  # a document becomes settings

# what can be aimed at -> its name among the headline numbers, its SI unit
QUANTITIES: Final = {
    "mean diameter": ("number_mean_diameter_um", "m"),
    "half time": ("half_time_s", "s"),
    "peak temperature": ("peak_temperature_C", "K"),
}
_DIGITS: Final = 6  # of a value that is tried
_PART: Final = re.compile(r"\.?([A-Za-z_][\w-]*)|\[(\d+)\]")


@dataclass(frozen=True, slots=True, kw_only=True)
class Point:
    """One set of values of the keys that are varied.

    Attributes
    ----------
    columns : mapping of str to float or str
        The varied values under the names of their columns, the unit in each name.
    label : str
        The same in words, such as ``"rate = 10 K/min"``.
    document : mapping
        The whole settings as they would stand in a file.
    """

    columns: Mapping[str, float | str]
    label: str
    document: Mapping[str, Any]


@dataclass(frozen=True, slots=True, kw_only=True)
class Axis:
    """A key that is varied.

    Attributes
    ----------
    key : str
        Its dotted key.
    name : str
        What it is called in tables, such as ``"rate"``.
    values : tuple
        Its values as they stand in a settings file.
    unit : str
        The unit of the numbers; empty where they have none.
    numbers : tuple of float or None
        The values in that unit; None where they are no numbers.
    words : tuple of str or None
        How values that are no numbers are shown; else as they stand.
    """

    key: str
    name: str
    values: tuple[Any, ...]
    unit: str = ""
    numbers: tuple[float, ...] | None = None
    words: tuple[str, ...] | None = None

    @property
    def column(self) -> str:
        """Name of its column in a table, with the unit.

        Examples
        --------
        >>> Axis(key="cooling.steps[0].rate", name="rate", values=(), unit="K/min").column
        'rate_K_per_min'
        """
        words = self.unit.replace("/", " per ").replace("(", " ").replace(")", " ").split()
        return "_".join([self.name, *(word.replace("^", "").replace("*", "_") for word in words)])

    def shown(self, k: int) -> float | str:
        """Return the k-th value as it stands in a table."""
        if self.numbers is not None:
            return self.numbers[k]
        return self.words[k] if self.words is not None else str(self.values[k])


@dataclass(frozen=True, slots=True, kw_only=True)
class Series:
    """What is varied, and how often each point is run.

    Attributes
    ----------
    title : str
        What the series is called.
    base : mapping
        The settings as they stand in the file, without the table ``[series]``.
    axes : tuple of Axis
        The keys that are varied.
    combine : {"product", "step"}
        Every value with every other, or all keys in step.
    replicas : int
        Runs of each point, at least.
    diameter_within : float or None
        Half width of the 95 % interval of the mean diameter, as a share of it, down to which
        replicas are added.
    most_replicas : int
        Where that ends.
    half_time_at : float or None
        Temperature of a hold whose half time is wanted [K].
    neat_peak, self_seeded_peak : float or None
        Ends of the scale of nucleating efficiency [K].
    """

    title: str
    base: Mapping[str, Any]
    axes: tuple[Axis, ...]
    combine: Literal["product", "step"] = "product"
    replicas: int = 1
    diameter_within: float | None = None
    most_replicas: int = 1
    half_time_at: float | None = None
    neat_peak: float | None = None
    self_seeded_peak: float | None = None

    @property
    def count(self) -> int:
        """Number of points."""
        lengths = [len(axis.values) for axis in self.axes]
        return math.prod(lengths) if self.combine == "product" else lengths[0]

    def points(self) -> Iterator[Point]:
        """Yield the points, the last key running quickest.

        Raises
        ------
        UnknownNameError
            If a key leads nowhere.
        """
        ranges = [range(len(axis.values)) for axis in self.axes]
        places: Iterator[tuple[int, ...]] = (
            itertools.product(*ranges) if self.combine == "product" else zip(*ranges, strict=True)
        )
        for place in places:
            yield self.point(place)

    def point(self, place: Sequence[int]) -> Point:
        """Return the point at one place of every axis."""
        document, words = dict(self.base), []
        for axis, k in zip(self.axes, place, strict=True):
            document = with_value(document, axis.key, axis.values[k])
            value = axis.words[k] if axis.words is not None else axis.values[k]
            words.append(f"{axis.name} = {value}")
        columns = {axis.column: axis.shown(k) for axis, k in zip(self.axes, place, strict=True)}
        return Point(columns=columns, label=", ".join(words), document=document)


@dataclass(frozen=True, slots=True, kw_only=True)
class Aim:
    """What is looked for.

    Attributes
    ----------
    title : str
        What the search is called.
    base : mapping
        The settings as they stand in the file, without the table ``[aim]``.
    key, name : str
        Dotted key whose value is looked for, and what it is called.
    unit : str
        The unit in which the value is written; empty for a plain number.
    low, high : float
        Range of the value in SI units.
    scale : {"linear", "logarithmic"}
        How the range is searched.
    quantity : str
        What has to meet the target, one of `QUANTITIES`.
    target : float
        The target in SI units.
    confidence : float
        Confidence of the interval of the answer, between 0 and 1.
    replicas : int
        Runs of each value that is tried.
    pick : {"lowest", "highest"}
        Which value is answered where several meet the target.
    """

    title: str
    base: Mapping[str, Any]
    key: str
    name: str
    unit: str
    low: float
    high: float
    scale: Literal["linear", "logarithmic"]
    quantity: str
    target: float
    confidence: float = 0.95
    replicas: int = 8
    pick: Literal["lowest", "highest"] = "lowest"

    def point(self, value: float) -> Point:
        """Return the point at a value in SI units."""
        number = float(f"{self.written(value):.{_DIGITS}g}")
        text = format_si(value, self.unit, _DIGITS) if self.unit else number
        column = "_".join([self.name, *self.unit.replace("/", " per ").replace("^", "").split()])
        return Point(
            columns={column: number},
            label=f"{self.name} = {text}",
            document=with_value(self.base, self.key, text),
        )

    def written(self, value: float) -> float:
        """Return a value in SI units as a number in its own unit."""
        return from_si(value, self.unit) if self.unit else value

    @property
    def wanted(self) -> float:
        """The target in the unit of the headline number."""
        key, _ = QUANTITIES[self.quantity]
        return {"um": self.target * 1e6, "C": self.target - ZERO_CELSIUS}.get(
            key.rsplit("_", 1)[1], self.target
        )


def key_paths(document: Mapping[str, Any]) -> Iterator[str]:
    """Yield the dotted key of every value of a document.

    Parameters
    ----------
    document : mapping
        Tables and lists as in a settings file.

    Yields
    ------
    key : str
        Such as ``"cooling.steps[0].rate"``.

    Examples
    --------
    >>> list(key_paths({"cooling": {"steps": [{"rate": "1 K/s"}]}}))
    ['cooling.steps[0].rate']
    """

    def walk(value: Any, place: str) -> Iterator[str]:
        if isinstance(value, Mapping):
            for key, item in value.items():
                yield from walk(item, f"{place}.{key}" if place else key)
        elif isinstance(value, list) and any(isinstance(item, Mapping) for item in value):
            for k, item in enumerate(value):
                yield from walk(item, f"{place}[{k}]")
        else:
            yield place

    return walk(document, "")


def with_value(document: Mapping[str, Any], key: str, value: Any) -> dict[str, Any]:
    """Return a document with another value under a dotted key.

    Parameters
    ----------
    document : mapping
        Tables and lists as in a settings file; it stays as it is.
    key : str
        Dotted key; the table or the item of a list in which it stands must be there.
    value : any
        The new value.

    Returns
    -------
    document : dict
        A copy along the path of the key.

    Raises
    ------
    UnknownNameError
        If the key leads nowhere.

    Examples
    --------
    >>> with_value({"cooling": {"steps": [{"rate": "1 K/s"}]}}, "cooling.steps[0].rate", "2 K/s")
    {'cooling': {'steps': [{'rate': '2 K/s'}]}}
    """
    parts: list[str | int] = []
    position = 0
    while position < len(key) and (part := _PART.match(key, position)):
        parts.append(part[1] if part[2] is None else int(part[2]))
        position = part.end()
    if position < len(key) or not parts:
        raise UnknownNameError("key", key, key_paths(document))

    def placed(table: Any, rest: list[str | int]) -> Any:
        head, *tail = rest
        if isinstance(head, int):
            if not isinstance(table, list) or head >= len(table):
                raise UnknownNameError("key", key, key_paths(document))
            inner = value if not tail else placed(table[head], tail)
            return [*table[:head], inner, *table[head + 1 :]]
        if not isinstance(table, Mapping) or (tail and head not in table):
            raise UnknownNameError("key", key, key_paths(document))
        return {**table, head: value if not tail else placed(table[head], tail)}

    changed: dict[str, Any] = placed(document, parts)
    return changed
