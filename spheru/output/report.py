"""A report as one HTML file: images inside, no script, no request to anywhere.

The frame that every kind of report shares. What stands in it is gathered elsewhere, for a run in
`spheru.output.run_report`; nothing is measured or drawn here.
"""

from __future__ import annotations

import base64
import math
from pathlib import Path
from typing import TYPE_CHECKING, Final, NamedTuple, TypedDict

from jinja2 import Environment, FileSystemLoader, StrictUndefined

from spheru.errors import ValidityError
from spheru.output.classes import round_down

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = [
    "CAUTIONS",
    "Bar",
    "Picture",
    "ReportContent",
    "Scale",
    "Table",
    "image_data",
    "render_report",
    "scale_of",
    "written",
]

CAUTIONS: Final = (
    "Before a decision hangs on a number, check it on the grade and the cooling that you use.",
    "Hot stages and melts burn, polymers and additives give off fumes when hot.",
    "Fine powders can be breathed in and can explode as dust.",
    "Data sheets, local codes and licensed practice come first.",
)
_TEMPLATES: Final = Path(__file__).parent / "templates"
_TICKS: Final = 6  # at most, on the axis of a scale
_PAD: Final = 0.06  # of a scale left free at both ends
_RAISED: Final = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


class Picture(NamedTuple):
    """A picture of a report.

    Attributes
    ----------
    data : str
        Its content as a data URI (see `image_data`).
    alt : str
        What it shows, for those who do not see it.
    caption : str
        What stands below it.
    wide_text : bool
        Whether it carries text that must not shrink with a narrow window.
    """

    data: str
    alt: str
    caption: str
    wide_text: bool = False


class Table(NamedTuple):
    """A table of a report; the first cell of every row is its heading.

    Attributes
    ----------
    name : str
        Word by which links find it.
    title : str
        What it holds.
    heads : tuple of str
        Headings of the columns.
    groups : list of (str, list of tuple of str)
        Rows under the name of their group; an empty name has no row of its own.
    numeric : bool
        Whether the cells are numbers, which stand to the right.
    """

    name: str
    title: str
    heads: tuple[str, ...]
    groups: list[tuple[str, list[tuple[str, ...]]]]
    numeric: bool = True


class Bar(NamedTuple):
    """A value with its range on a scale.

    Attributes
    ----------
    name : str
        What the value is.
    words : str
        Value and range as text.
    value, low, high : float
        Places on the scale, percent of its width.
    simulated : bool
        Whether it was simulated, else it is of the mean field.
    """

    name: str
    words: str
    value: float
    low: float
    high: float
    simulated: bool


class Scale(NamedTuple):
    """Values of one kind on one axis.

    Attributes
    ----------
    name, unit : str
        What the axis shows.
    bars : list of Bar
        The values.
    ticks : list of (float, str)
        Places [percent of the width] and numbers.
    """

    name: str
    unit: str
    bars: list[Bar]
    ticks: list[tuple[float, str]]


class ReportContent(TypedDict):
    """What a report says, in the order in which it is read; what is empty is left out.

    Attributes
    ----------
    kind, title, version : str
        What is reported (``"Run"``), its title, the version of spheru that computed it.
    asked : list of (str, list of str)
        What was asked, by heading.
    answer : list of (str, bool)
        The answer in one sentence, in pieces; True marks what must stand out.
    warnings : list of str
        What must be known before a number is used.
    pictures : list of Picture
        The first is the largest.
    scales : list of Scale
        How sure the answer is.
    scale_note : str
        How to read the scales.
    table : Table or None
        The numbers.
    notes : list of str
        How they were measured.
    scope : str
        What was assumed.
    cautions : list of str
        For those who go to the laboratory with it.
    settings : str
        The settings to copy.
    sources : Table or None
        Values whose source was not looked up again.
    provenance : list of (str, str)
        Versions, seeds, hashes.
    files : Table or None
        Files with their hashes.
    """

    kind: str
    title: str
    version: str
    asked: list[tuple[str, list[str]]]
    answer: list[tuple[str, bool]]
    warnings: list[str]
    pictures: list[Picture]
    scales: list[Scale]
    scale_note: str
    table: Table | None
    notes: list[str]
    scope: str
    cautions: list[str]
    settings: str
    sources: Table | None
    provenance: list[tuple[str, str]]
    files: Table | None


def render_report(content: ReportContent, *, template: str = "report.html") -> str:
    """Return a report as HTML.

    Parameters
    ----------
    content : ReportContent
        What it says; all text is escaped.
    template : str, optional
        Name of a template that extends ``base.html`` or ``report.html``.

    Returns
    -------
    html : str
        One document; the same for the same content.
    """
    environment = Environment(
        loader=FileSystemLoader(_TEMPLATES),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    return environment.get_template(template).render(**content)


def image_data(png: bytes) -> str:
    """Return a PNG as a data URI.

    Examples
    --------
    >>> image_data(b"PNG")
    'data:image/png;base64,UE5H'
    """
    return "data:image/png;base64," + base64.b64encode(png).decode("ascii")


def written(value: float | None) -> str:
    r"""Return a number with four digits, nothing for None.

    Parameters
    ----------
    value : float or None
        The number; whole ones that are given as int stay as they are.

    Returns
    -------
    text : str
        Without an exponent from 1e-3 to below 1e7.

    Examples
    --------
    >>> written(112.0), written(13768.58), written(980), written(None)
    ('112.0', '13770', '980', '')
    >>> written(-0.25), written(9999.7), written(1.3768e10).replace("\N{NO-BREAK SPACE}", " ")
    ('-0.2500', '10000', '1.377 × 10¹⁰')
    """
    if value is None or (isinstance(value, int) and abs(value) < 1e7):
        return "" if value is None else str(value)
    mantissa, power = f"{value:.3e}".split("e")
    exponent = int(power)
    if value and not -3 <= exponent < 7:
        return (
            f"{mantissa}\N{NO-BREAK SPACE}×\N{NO-BREAK SPACE}10{str(exponent).translate(_RAISED)}"
        )
    return f"{float(f'{value:.3e}'):.{max(3 - exponent, 0) if value else 0}f}"


def scale_of(
    name: str, unit: str, values: Sequence[tuple[str, float, float | None, float | None, bool]]
) -> Scale:
    """Return values with their ranges as bars on one axis with round ticks.

    Parameters
    ----------
    name, unit : str
        What the axis shows.
    values : sequence of (str, float, float or None, float or None, bool)
        Name, value, ends of its range (None where there is none), whether it was simulated.

    Returns
    -------
    scale : Scale
        The axis reaches a little beyond the outermost ends.

    Raises
    ------
    ValidityError
        If all values are one number: there is no scale then.

    Examples
    --------
    By hand: 10 to 20 with 6 % of 10 free at both ends is an axis from 9.4 to 20.6, on which 15
    stands in the middle and 10 at 0.6/11.2 = 5.36 %.

    >>> scale = scale_of("size", "µm", [("mean", 15.0, 10.0, 20.0, True)])
    >>> scale.bars[0].value, scale.bars[0].low, scale.bars[0].words
    (50.0, 5.36, '15.00 µm (10.00 to 20.00 µm)')
    >>> [text for _, text in scale.ticks]
    ['10', '12', '14', '16', '18', '20']
    """
    ends = [x for _, value, low, high, _ in values for x in (value, low, high) if x is not None]
    pad = _PAD * (max(ends) - min(ends))
    if pad == 0:
        raise ValidityError(f"scale '{name}': expected values that differ, got {ends[0]} only")
    first, last = min(ends) - pad, max(ends) + pad

    def place(x: float) -> float:
        return round(100 * (x - first) / (last - first), 2)

    bars = []
    for label, value, low, high, simulated in values:
        words = f"{written(value)} {unit}"
        start, end = value, value
        if low is not None and high is not None:
            words += f" ({written(low)} to {written(high)} {unit})"
            start, end = low, high
        bars.append(Bar(label, words, place(value), place(start), place(end), simulated))
    step = 1 / round_down(_TICKS / (last - first))  # 1, 2, 5 turn into 1, 0.5, 0.2
    ticks = [
        (place(k * step), f"{k * step:.6g}")
        for k in range(math.ceil(first / step), math.floor(last / step) + 1)
    ]
    return Scale(name, unit, bars, ticks)
