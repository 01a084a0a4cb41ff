"""The tables ``[series]`` and ``[aim]`` of a settings file: what is varied, what is looked for.

The rest of the file stays a settings file; every fault of both is reported at once. What is then
run stands in `spheru.run.series` and `spheru.run.aim`.
"""

from __future__ import annotations

import copy
import json
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final, Literal

import numpy as np
from pydantic import Field

from spheru.config.faults import check, refusal, shown
from spheru.config.models import Share, Table, Temperature
from spheru.config.read import settings_from_mapping
from spheru.config.records import parse_toml
from spheru.errors import ConfigError, Fault, InputFault, UnitError, UnknownNameError, nearest
from spheru.files import read_text
from spheru.run.points import QUANTITIES, Aim, Axis, Series, key_paths, with_value
from spheru.units import format_si, from_si, to_si, unit_of

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from spheru.run.points import Make

__all__ = ["SeriesTables", "read_series", "series_from_mapping"]

_MOST_SHOWN: Final = 20  # faults of points
_DIGITS: Final = 6  # of values between the ends of a range

Scale = Literal["linear", "logarithmic"]


class Vary(Table):
    """A key that is varied: a list of values, or a range in steps."""

    key: str = Field(description="Dotted key, such as cooling.steps[0].rate or nuclei[0].dose.")
    values: list[Any] | None = Field(
        None, min_length=1, description="Its values, as they would stand in the file."
    )
    from_: Any = Field(None, alias="from", description="First value of a range.")
    to: Any = Field(None, description="Last value of a range.")
    steps: int | None = Field(None, ge=2, description="Number of values of a range.")
    scale: Scale | None = Field(None, description="How a range is divided; linear if none.")


class SeriesTable(Table):
    """Many runs: which keys are varied, and how often each point is run."""

    vary: list[Vary] = Field(min_length=1, description="The keys that are varied.")
    combine: Literal["product", "step"] = Field(
        "product", description="Every value with every other, or all keys in step."
    )
    replicas: int = Field(1, ge=1, description="Runs of each point, with other random numbers.")
    diameter_within: Share | None = Field(
        None,
        description="Replicas are added until the 95 % interval of the mean diameter is no wider "
        "than this share of it to either side.",
    )
    most_replicas: int = Field(50, ge=1, description="Where adding replicas ends.")
    half_time_at: Temperature | None = Field(
        None, description="Temperature of a hold whose half time the table shows (mean field)."
    )
    neat_peak: Temperature | None = Field(
        None, description="Peak of the neat polymer; else that of the point without agent."
    )
    self_seeded_peak: Temperature | None = Field(
        None, description="Peak of the best self-seeded polymer: gives nucleating efficiencies."
    )


class AimTable(Table):
    """One key whose value is looked for, so that a target is met."""

    key: str = Field(description="Dotted key, such as nuclei[0].dose.")
    from_: Any = Field(alias="from", description="Lowest value that is considered.")
    to: Any = Field(description="Highest value that is considered.")
    scale: Scale | None = Field(
        None, description="How the range is searched; logarithmic if it lies above 0."
    )
    quantity: Literal["mean diameter", "half time", "peak temperature"] = Field(
        description="What has to meet the target."
    )
    target: str = Field(description="The target with its unit, such as 20 um.")
    confidence: Share = Field(0.95, description="Confidence of the interval of the answer.")
    replicas: int = Field(8, ge=3, description="Runs of each value that is tried.")
    pick: Literal["lowest", "highest"] = Field(
        "lowest", description="Which value is answered where several meet the target."
    )


class SeriesTables(Table):
    """The tables that make a settings file a series or an aim."""

    series: SeriesTable | None = Field(None, description="Many runs of these settings.")
    aim: AimTable | None = Field(None, description="A value that meets a target.")


def read_series(path: str | Path) -> tuple[Series | Aim, Make]:
    """Read a settings file with a table ``[series]`` or ``[aim]``.

    Parameters
    ----------
    path : path-like
        A file in TOML; paths in it count from its folder.

    Returns
    -------
    series : Series or Aim
        What is asked for.
    make : callable
        Turns a document of it into settings; picklable.

    Raises
    ------
    DataError
        If the file is not there, is a folder or is not UTF-8.
    ConfigError
        If it is no TOML, or its content is at fault; every fault is listed with its dotted key.
    """
    source = Path(path)
    document = parse_toml(read_text(source), str(path))
    document.setdefault("title", source.stem)
    return series_from_mapping(document, folder=source.parent, source=str(path))


def series_from_mapping(
    mapping: Mapping[str, Any], *, folder: str | Path = Path(), source: str = "settings"
) -> tuple[Series | Aim, Make]:
    """Build a series or an aim from what a settings file would say.

    Parameters
    ----------
    mapping : mapping
        Tables, lists, text and numbers as in the file.
    folder : path-like, optional
        From where paths in it count.
    source : str, optional
        What the mapping is called in a message.

    Returns
    -------
    series : Series or Aim
        What is asked for.
    make : callable
        Turns a document of it into settings; picklable.

    Raises
    ------
    ConfigError
        Every fault of the tables and of the settings, as far as one key at a time shows them.

    Examples
    --------
    >>> series, make = series_from_mapping({
    ...     "material": {"name": "isotactic-polypropylene-alpha"},
    ...     "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "40 degC"}]},
    ...     "sample": {"view": "section", "spherulites": 1000},
    ...     "series": {"vary": [{"key": "cooling.steps[0].rate", "from": "1 K/min",
    ...                          "to": "100 K/min", "steps": 3, "scale": "logarithmic"}]},
    ... })
    >>> [point.label for point in series.points()]
    ['rate = 1 K/min', 'rate = 10 K/min', 'rate = 100 K/min']
    """
    base = copy.deepcopy({k: v for k, v in mapping.items() if k not in SeriesTables.model_fields})
    tables = {key: mapping[key] for key in SeriesTables.model_fields if key in mapping}
    make = partial(settings_from_mapping, folder=Path(folder).resolve(), source=source)
    good, faults = check(SeriesTables, tables)
    series, aim = good.get("series"), good.get("aim")
    if len(tables) != 1:
        what = (
            "stands beside [series]; give each a file of its own"
            if tables
            else "is missing; expected a table [series] or [aim]; a single run needs neither: "
            f"spheru grow {source}"
        )
        faults.append(Fault(where="aim" if tables else "series", what=what))
    found: Series | Aim | None = None
    if series is not None and len(tables) == 1:
        found = _series(series, base, faults)
    if aim is not None and len(tables) == 1:
        found = _aim(aim, base, faults)
    documents = {"": base} if found is None else dict(_trials(found))
    _check_documents(documents, make, faults)
    if faults or found is None:
        raise refusal(source, faults)
    return found, make


def _series(table: SeriesTable, base: Mapping[str, Any], faults: list[Fault]) -> Series | None:
    before = len(faults)
    axes = []
    keys = [vary.key for vary in table.vary]
    ends = [key.split(".")[-1] for key in keys]
    for k, vary in enumerate(table.vary):
        where = f"series.vary[{k}]"
        if vary.key in keys[:k]:
            first = keys.index(vary.key)
            faults.append(
                Fault(
                    where=f"{where}.key",
                    what=f"'{vary.key}' is varied already in series.vary[{first}]; leave one out",
                )
            )
        _check_key(vary.key, base, f"{where}.key", faults)
        name = vary.key if ends.count(ends[k]) > 1 else ends[k]
        values = _values(vary, where, faults)
        if values is not None:
            axes.append(_axis(vary.key, name, values, where, faults))
    lengths = {len(axis.values) for axis in axes}
    if table.combine == "step" and len(lengths) > 1:
        listed = ", ".join(f"{axis.name} {len(axis.values)}" for axis in axes)
        faults.append(
            Fault(
                where="series.combine",
                what=f"expected lists of equal length to go in step, got {listed} values",
            )
        )
    if table.most_replicas < table.replicas and table.diameter_within is not None:
        faults.append(
            Fault(
                where="series.most_replicas",
                what=f"expected at least the {table.replicas} of replicas, "
                f"got {table.most_replicas}",
            )
        )
    if table.diameter_within == 0:
        faults.append(
            Fault(where="series.diameter_within", what="expected a share above 0 such as '2 %'")
        )
    if len(faults) > before:
        return None
    return Series(
        title=_title(base),
        base=base,
        axes=tuple(axes),
        combine=table.combine,
        replicas=table.replicas,
        diameter_within=table.diameter_within,
        most_replicas=table.most_replicas,
        half_time_at=table.half_time_at,
        neat_peak=table.neat_peak,
        self_seeded_peak=table.self_seeded_peak,
    )


def _aim(table: AimTable, base: Mapping[str, Any], faults: list[Fault]) -> Aim | None:
    before = len(faults)
    _check_key(table.key, base, "aim.key", faults)
    ends = _ends(table.from_, table.to, "aim", faults)
    _, unit = QUANTITIES[table.quantity]
    try:
        target = to_si(table.target, unit)
    except UnitError as fault:
        faults.append(Fault(where="aim.target", what=str(fault)))
    if not 0 < table.confidence < 1:
        faults.append(
            Fault(
                where="aim.confidence",
                what=f"expected a share between 0 and 1 such as '95 %', got {table.confidence:g}",
            )
        )
    if ends is None or len(faults) > before:
        return None
    low, high, unit_text = ends
    scale = table.scale or ("logarithmic" if low > 0 and unit_text != "degC" else "linear")
    if scale == "logarithmic" and low <= 0:
        faults.append(_above_zero("aim.from", table.from_))
    if low >= high:
        faults.append(
            Fault(
                where="aim.to",
                what=f"expected a value above {table.from_}, got {shown(table.to)}",
            )
        )
    if len(faults) > before:
        return None
    return Aim(
        title=_title(base),
        base=base,
        key=table.key,
        name=table.key.split(".")[-1],
        unit=unit_text,
        low=low,
        high=high,
        scale=scale,
        quantity=table.quantity,
        target=target,
        confidence=table.confidence,
        replicas=table.replicas,
        pick=table.pick,
    )


def _title(base: Mapping[str, Any]) -> str:
    title = base.get("title")
    return title if isinstance(title, str) else "untitled"


def _check_key(key: str, base: Mapping[str, Any], where: str, faults: list[Fault]) -> None:
    """See whether a dotted key leads somewhere; what its last part means is seen later."""
    if key.split(".", maxsplit=1)[0].split("[", maxsplit=1)[0] == "title":
        faults.append(Fault(where=where, what="a title is not varied"))
        return
    try:
        with_value(base, key, None)
    except UnknownNameError:
        known = list(key_paths(base))
        close = nearest(key, known)
        hint = f"did you mean '{close}'?" if close else f"known are {', '.join(known)}"
        faults.append(Fault(where=where, what=f"'{key}' leads nowhere in this file; {hint}"))


def _values(vary: Vary, where: str, faults: list[Fault]) -> tuple[Any, ...] | None:
    """Return the values of a key that is varied, as they would stand in the file."""
    ranged = {"from": vary.from_, "to": vary.to, "steps": vary.steps}
    given = [name for name, value in ranged.items() if value is not None]
    if vary.values is not None:
        faults.extend(
            Fault(where=f"{where}.{name}", what="stands beside values; leave one of them out")
            for name in (*given, *(["scale"] if vary.scale else []))
        )
        return None if given else _once(vary.values, where, faults)
    if len(given) < len(ranged):
        absent = [name for name in ranged if name not in given]
        what = (
            f"is missing; a range needs {' and '.join(absent)}"
            if given
            else "is missing; expected values = [...], or from, to and steps"
        )
        faults.append(Fault(where=f"{where}.{absent[0] if given else 'values'}", what=what))
        return None
    ends = _ends(vary.from_, vary.to, where, faults)
    if ends is None or vary.steps is None:
        return None
    low, high, unit = ends
    if low == high:
        faults.append(
            Fault(where=f"{where}.to", what=f"expected another value than from, got {vary.to!r}")
        )
        return None
    if vary.scale == "logarithmic":
        if min(low, high) <= 0:
            faults.append(_above_zero(f"{where}.from", vary.from_ if low <= 0 else vary.to))
            return None
        numbers = np.geomspace(low, high, vary.steps)
    else:
        numbers = np.linspace(low, high, vary.steps)
    inner = [
        format_si(number, unit, _DIGITS) if unit else float(f"{number:.{_DIGITS}g}")
        for number in numbers[1:-1].tolist()
    ]
    if all(isinstance(value, int) for value in (vary.from_, vary.to)):
        inner = [int(value) if float(value).is_integer() else value for value in inner]
    return vary.from_, *inner, vary.to


def _once(values: Sequence[Any], where: str, faults: list[Fault]) -> tuple[Any, ...]:
    """Return the values of a list; each may stand in it only once."""
    seen: list[str] = []
    for k, value in enumerate(values):
        text = json.dumps(value, sort_keys=True, default=str)
        if text in seen:
            faults.append(
                Fault(
                    where=f"{where}.values[{k}]",
                    what=f"{shown(value)} is there already; for more runs of it write replicas",
                )
            )
        seen.append(text)
    return tuple(values)


def _ends(
    first: Any, last: Any, where: str, faults: list[Fault]
) -> tuple[float, float, str] | None:
    """Return the ends of a range in SI units and the unit to write, empty for plain numbers."""
    plain = [
        isinstance(value, int | float) and not isinstance(value, bool) for value in (first, last)
    ]
    if all(plain):
        return float(first), float(last), ""
    if any(plain) or not (isinstance(first, str) and isinstance(last, str)):
        what = f"expected a number or a quantity like from, got {shown(last)}"
        faults.append(Fault(where=f"{where}.to", what=what))
        return None
    unit = unit_of(first)
    numbers = []
    for name, text in (("from", first), ("to", last)):
        try:
            numbers.append(to_si(text, unit or "1"))
        except InputFault as fault:
            faults.append(Fault(where=f"{where}.{name}", what=str(fault)))
    return (numbers[0], numbers[1], unit) if len(numbers) == 2 else None


def _is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool)


def _above_zero(where: str, given: Any) -> Fault:
    return Fault(
        where=where,
        what=f"expected a value above 0, since the scale is logarithmic, got {shown(given)}",
    )


def _axis(key: str, name: str, values: Sequence[Any], where: str, faults: list[Fault]) -> Axis:
    """Return a key that is varied, with its values as numbers where they are."""
    if all(map(_is_number, values)):
        return Axis(key=key, name=name, values=tuple(values), numbers=tuple(map(float, values)))
    texts = [value for value in values if isinstance(value, str)]
    unit = unit_of(texts[0]) if len(texts) == len(values) else ""
    try:
        to_si(texts[0], unit)
    except (IndexError, InputFault):  # names, tables or mixtures: shown as they stand
        words = tuple(value if isinstance(value, str) else json.dumps(value) for value in values)
        return Axis(key=key, name=name, values=tuple(values), words=words)
    numbers = []
    for k, text in enumerate(texts):
        try:
            numbers.append(float(f"{from_si(to_si(text, unit), unit):.12g}"))
        except InputFault as fault:
            faults.append(Fault(where=f"{where}.values[{k}]", what=str(fault)))
    return Axis(key=key, name=name, values=tuple(values), unit=unit, numbers=tuple(numbers))


def _trials(found: Series | Aim) -> Mapping[str, Mapping[str, Any]]:
    """Return documents that show every value of every key once, by what is special in them."""
    if isinstance(found, Aim):
        return {point.label: point.document for point in map(found.point, (found.low, found.high))}
    start = [0] * len(found.axes)
    places = [start]
    for axis, varied in enumerate(found.axes):
        for k in range(1, len(varied.values)):
            places.append([k] * len(start) if found.combine == "step" else [*start])
            places[-1][axis] = k
    return {point.label: point.document for point in map(found.point, places)}


def _check_documents(
    documents: Mapping[str, Mapping[str, Any]], make: Make, faults: list[Fault]
) -> None:
    """Add the faults of settings, each once, with the point that first shows it."""
    seen: set[str] = set()
    hidden = 0
    for k, (label, document) in enumerate(documents.items()):
        try:
            make(document)
        except ConfigError as refused:
            for fault in refused.faults:
                if str(fault) in seen:
                    continue
                seen.add(str(fault))
                if len(seen) > _MOST_SHOWN:
                    hidden += 1
                    continue
                note = f" (with {label})" if k and label else ""
                faults.append(Fault(where=fault.where, what=fault.what + note))
    if hidden:
        faults.append(Fault(where="series", what=f"{hidden} more faults of its points"))
