"""What settings ask for, in the words and units of the trade.

The values stand as the user wrote them; what became of them is not told here.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any, Final

from spheru.constants import ZERO_CELSIUS
from spheru.output.report import written

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from spheru.run.settings import Settings

__all__ = ["VIEWS", "describe_settings", "spelled"]

VIEWS: Final = {
    "section": "Plane section of a bulk sample",
    "block": "Block",
    "film": "Film between two faces",
    "plane": "Growth in the plane of a thin layer",
}
_LAWS: Final = {
    "material": "The record's own sites",
    "fixed": "Nuclei that are there from the start",
    "exponential": "Sites exp(a ΔT + b) up to a ceiling",
    "table": "Sites from a table over undercooling",
    "classical": "Homogeneous nucleation, classical theory",
    "substrate": "Nucleation on substrates, classical theory",
    "surface": "Nuclei on faces of the sample",
    "agent": "Nucleating agent",
}
_KEYS: Final = {
    "d50_volume": "median diameter by volume",
    "d50_number": "median diameter by number",
    "active": "active share",
    "loss": "share lost to agglomeration",
    "cluster": "agglomerates",
    "activation": "activation at an undercooling of",
    "factor": "number of sites times",
}
_SIGNS: Final = (
    (r"\bdeg_?C\b", "°C"),
    (r"\bum\b", "µm"),
    (r"\^3\b", "³"),
    (r"\^2\b", "²"),
    (r"^-(?=\d)", "−"),
)


def describe_settings(settings: Settings, *, replica: int = 0) -> list[tuple[str, list[str]]]:
    """Return what settings ask for: material, cooling, nuclei, sample.

    Parameters
    ----------
    settings : Settings
        Settings that were read from a file or mapping.
    replica : int, optional
        Number of the replica.

    Returns
    -------
    asked : list of (str, list of str)
        Lines by heading.

    Examples
    --------
    >>> from spheru.config.read import settings_from_mapping
    >>> settings = settings_from_mapping({
    ...     "material": {"name": "isotactic-polypropylene-alpha"},
    ...     "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "40 degC"}]},
    ...     "sample": {"view": "block", "size": ["1 mm"] * 3, "pixel": "2 um"},
    ... })
    >>> for heading, lines in describe_settings(settings):
    ...     print(heading, lines)
    Material ['Isotactic polypropylene, alpha form']
    Cooling ['From 205 °C, at 10 K/min to 40 °C']
    Nuclei ["The record's own sites"]
    Sample ['Block', 'window 1 mm × 1 mm × 1 mm, pixel 2 µm', 'edges periodic', 'seed 0']
    """
    return [
        ("Material", list(_material(settings))),
        ("Cooling", [_cooling(settings)]),
        ("Nuclei", list(_nuclei(settings))),
        ("Sample", list(_sample(settings, replica))),
    ]


def spelled(text: str) -> str:
    """Return text with the signs that a file spells out.

    Examples
    --------
    >>> spelled("2 um, 60 to 130 degC, 3e13 1/m^3")
    '2 µm, 60 to 130 °C, 3e13 1/m³'
    """
    for sign, better in _SIGNS:
        text = re.sub(sign, better, text)
    return text


def _material(settings: Settings) -> Iterator[str]:
    table = settings.document["material"]
    yield settings.material.title
    if "pressure" in table:
        yield f"at {_value(table['pressure'])}"
    plain = {"name", "file", "title", "pressure", "background"}
    changed = {key: value for key, value in table.items() if key not in plain}
    if changed:
        yield f"changed from the record: {_words(changed)}"


def _cooling(settings: Settings) -> str:
    table = settings.document["cooling"]
    if "trace" in table:
        history = settings.history
        return (
            f"Measured trace {table['trace']}: {written(history.duration)} s, from "
            f"{written(history.start_temperature - ZERO_CELSIUS)} °C to "
            f"{written(history.end_temperature - ZERO_CELSIUS)} °C"
        )
    return f"From {_value(table['start'])}, " + ", then ".join(map(_step, table["steps"]))


def _step(step: Mapping[str, Any]) -> str:
    lasts = f" for {_value(step['for'])}" if "for" in step else ""
    if "hold" in step:
        return f"hold for {_value(step['hold'])}"
    if "quench" in step:
        bath, constant = _value(step["quench"]), _value(step["time_constant"])
        return f"quench to {bath} with a time constant of {constant}{lasts}"
    until = f" to {_value(step['until'])}" if "until" in step else ""
    return f"at {_value(step['rate'])}{until}{lasts}"


def _nuclei(settings: Settings) -> Iterator[str]:
    tables = settings.document.get("nuclei", [])
    own = settings.document["material"].get("background", True)
    listed = any(table["law"] == "material" for table in tables)
    if own and not listed and settings.material.sites is not None:
        yield _LAWS["material"]
    for table in tables:
        rest = _words({key: value for key, value in table.items() if key != "law"})
        yield _LAWS.get(table["law"], table["law"]) + (f": {rest}" if rest else "")
    for key, name in (("memory", "Melt memory"), ("induction", "Induction time")):
        if key in settings.document:
            yield f"{name}: {_words(settings.document[key])}"


def _sample(settings: Settings, replica: int) -> Iterator[str]:
    table = settings.document["sample"]
    thickness = f", {_value(table['thickness'])} thick" if "thickness" in table else ""
    yield f"{VIEWS.get(table['view'], table['view'])}{thickness}"
    size = " × ".join(map(_value, table.get("size", [])))
    yield f"window {size}, pixel {_value(table.get('pixel', ''))}"
    edges = table.get("edges", "periodic")
    yield f"edges {edges if isinstance(edges, str) else _words(edges)}"
    if "sight" in table:
        yield f"picture: {table['sight']}"
    yield f"seed {settings.seed}" + (f", replica {replica}" if replica else "")


def _words(table: Mapping[str, Any]) -> str:
    """Return a table of settings as one line: names and values, nested ones in brackets."""
    parts = []
    for key, value in table.items():
        name = _KEYS.get(key, key.replace("_", " "))
        nested = isinstance(value, dict)
        parts.append(f"{name} ({_words(value)})" if nested else f"{name} {_value(value)}")
    return ", ".join(parts)


def _value(given: Any) -> str:
    """Return a value of a settings file as a reader writes it."""
    if isinstance(given, list):
        values = [f"({_words(v)})" if isinstance(v, dict) else _value(v) for v in given]
        if len(values) <= 4:
            return ", ".join(values)
        return f"{values[0]} to {values[-1]} ({len(values)} values)"
    return spelled(str(given))
