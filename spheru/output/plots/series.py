"""Figures of a series: size and temperature against what is varied, maps at one scale, curves.

What the numbers are is decided in `spheru.run.series`.
"""

from __future__ import annotations

import io
import math
import textwrap
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
from matplotlib import colormaps
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
from skimage.measure import label as connected

from spheru.constants import ZERO_CELSIUS
from spheru.output.classes import round_down
from spheru.output.plots.canvas import (
    BLUE,
    DPI,
    GREY,
    ORANGE,
    WIDTH,
    add_caption,
    add_title,
    new_axes,
)
from spheru.output.plots.colouring import COLOURS, colour_codes, neighbour_pairs, palette

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.run.points import Axis
    from spheru.run.series import Finding

__all__ = ["Picture", "plot_curves", "plot_sheet", "plot_trend", "read_picture"]

_LOGARITHMIC: Final = 8.0  # ratio of greatest to least from which an axis is logarithmic
_MOST: Final = 30  # maps on a sheet, curves in a figure
_MOST_NAMED: Final = 8  # curves that a legend names
_TILE: Final = 240  # pixels along an edge of a map on a sheet
_GAP: Final = 8  # pixels between maps


@dataclass(frozen=True, slots=True, kw_only=True)
class Picture:
    """What is kept of the first replica of a point.

    Attributes
    ----------
    labels : ndarray of int, shape (rows, columns)
        A corner of the map.
    pixel : float
        Edge of a pixel [m].
    periodic : tuple of bool
        Axes that go on at their other side.
    time, temperature, fraction, fraction_estimate : ndarray of float, shape (n,)
        The conversion [s, K, -, -].
    cools : bool
        Whether the material crystallises while it cools.
    """

    labels: NDArray[np.integer]
    pixel: float
    periodic: tuple[bool, bool]
    time: NDArray[np.float64]
    temperature: NDArray[np.float64]
    fraction: NDArray[np.float32]
    fraction_estimate: NDArray[np.float32]
    cools: bool


def read_picture(content: bytes) -> Picture:
    """Return the map and the conversion that a case has left.

    Parameters
    ----------
    content : bytes
        An npz file of the folder ``maps``.

    Returns
    -------
    picture : Picture
        What it holds.
    """
    with np.load(io.BytesIO(content)) as stored:
        down, across = stored["periodic"].tolist()
        return Picture(
            labels=stored["labels"],
            pixel=float(stored["pixel"]),
            periodic=(down, across),
            time=stored["time"],
            temperature=stored["temperature"],
            fraction=stored["fraction"],
            fraction_estimate=stored["fraction_estimate"],
            cools=bool(stored["cools"]),
        )


def plot_trend(
    points: Sequence[Finding], axis: Axis, *, title: str = "", caption: str = ""
) -> tuple[Axes, Axes]:
    """Draw size, and peak temperature or half time, against a key that was varied.

    Parameters
    ----------
    points : sequence of Finding
        The points of a series.
    axis : Axis
        The key; its values must be numbers.
    title, caption : str, optional
        What to write above and below.

    Returns
    -------
    size, course : Axes
        The two panels, on one horizontal axis. Points with 95 % intervals; dashed: mean field. One
        set of points for each combination of what else is varied.
    """
    figure = Figure(figsize=(WIDTH, 6.6), dpi=DPI, layout="constrained")
    size, course = figure.subplots(2, 1, sharex=True, height_ratios=(1.25, 1.0))
    groups = _groups(points, axis)
    cooled = any(math.isfinite(p.numbers["peak_temperature_C"].value) for p in points)
    key = "peak_temperature_C" if cooled else "half_time_s"
    colours = _colours(len(groups))
    for (name, members), colour in zip(groups.items(), colours, strict=True):
        words = f"{name}: " if name else ""
        if len(groups) == 1:
            _line(size, members, axis, "number_mean_diameter_um", ORANGE, "mean diameter", "s")
        _line(
            size, members, axis, "diameter_of_mean_volume_um", colour,
            f"{words}diameter of the mean volume" if len(groups) == 1 else name, "o",
        )  # fmt: skip
        _line(course, members, axis, key, colour, name or "simulated", "o")
    numbers = np.array([_number(p, axis) for p in points])
    _scale_x(size, numbers)
    if len(groups) == 1:
        _enlarge_turn(size, next(iter(groups.values())), axis)
    size.set_yscale("log")
    size.set_ylabel("diameter (µm)")
    course.set_ylabel("peak temperature (°C)" if cooled else "half time (s)")
    if not cooled:
        course.set_yscale("log")
    course.set_xlabel(f"{axis.name} ({axis.unit})" if axis.unit else axis.name)
    for ax in (size, course):
        ax.spines[["top", "right"]].set_visible(False)
        ax.grid(visible=True, which="major", color="0.9", linewidth=0.6)
        if ax.get_yscale() == "log":
            _plain_numbers(ax)
    size.plot([], [], color=GREY, linestyle="--", linewidth=1.2, label="mean field")
    size.legend(frameon=False, fontsize=8, ncols=1 if len(groups) < 5 else 2)
    add_title(size, title)
    add_caption(
        course,
        "Points: simulated, with 95 % intervals; dashed: mean field"
        + (" (of the mean volume). " if len(groups) == 1 else ". Diameters of the mean volume. ")
        + caption,
    )
    return size, course


def plot_sheet(
    pictures: Sequence[tuple[str, Picture]], *, title: str = "", caption: str = ""
) -> Axes:
    """Draw the maps of a series beside one another, all at one scale.

    Parameters
    ----------
    pictures : sequence of (str, Picture)
        Names and maps; at most 30 are drawn, evenly taken.
    title, caption : str, optional
        What to write above and below.

    Returns
    -------
    ax : Axes
        The sheet. The edge of a map is ten times the geometric mean of the finest and the
        coarsest structure; a map that is smaller goes on at its other side where it is periodic.
    """
    shown = _evenly(pictures)
    grain = [
        math.sqrt(p.labels.size / max(len(np.unique(p.labels)), 1)) * p.pixel for _, p in shown
    ]
    edge = 10 * math.sqrt(min(grain) * max(grain))
    edge = min([edge, *(min(p.labels.shape) * p.pixel for _, p in shown if not all(p.periodic))])
    # as few empty places as can be, then the wider sheet
    columns = min(
        range(min(5, len(shown)), min(2, len(shown) - 1), -1), key=lambda n: -len(shown) % n
    )
    rows = -(-len(shown) // columns)
    step = _TILE + _GAP
    text = 26  # pixels of a name
    sheet = np.full((rows * (step + text), columns * step, 3), 255, dtype=np.uint8)
    places = []
    for k, (name, picture) in enumerate(shown):
        down, across = (k // columns) * (step + text) + text, (k % columns) * step
        sheet[down : down + _TILE, across : across + _TILE] = _tile(picture, edge)
        places.append((name, across, down))
    height = WIDTH * sheet.shape[0] / sheet.shape[1] + 0.9
    ax = new_axes(None, height=height)
    ax.imshow(sheet, interpolation="antialiased")
    for name, across, down in places:
        ax.text(across, down - 4, textwrap.shorten(name, 40, placeholder=" ..."), fontsize=7)
    bar = round_down(0.5 * edge * 1e6)
    length = bar / (edge * 1e6) * _TILE
    low = sheet.shape[0] + 10
    ax.plot([0, length], [low, low], color="black", linewidth=3, solid_capstyle="butt")
    ax.text(length + 10, low, f"{bar:g} µm", va="center", fontsize=9)
    ax.set_ylim(low + 12, 0)
    ax.set_xlim(0, sheet.shape[1] - _GAP)
    ax.set_axis_off()
    add_title(ax, title)
    left = "" if len(shown) == len(pictures) else f" {len(shown)} of {len(pictures)} points."
    add_caption(ax, f"All maps at one scale, {edge * 1e6:.3g} µm wide.{left} {caption}".strip())
    return ax


def plot_curves(
    pictures: Sequence[tuple[str, Picture]], *, title: str = "", caption: str = ""
) -> Axes:
    """Draw the conversion curves of a series together.

    Parameters
    ----------
    pictures : sequence of (str, Picture)
        Names and curves; at most 30 are drawn, evenly taken.
    title, caption : str, optional
        What to write above and below.

    Returns
    -------
    ax : Axes
        Simulated solid, mean field dashed; against temperature where all points crystallise while
        they cool, else against the logarithm of time.
    """
    shown = _evenly(pictures)
    cooled = all(picture.cools for _, picture in shown)
    ax = new_axes(None, height=4.2)
    for k, ((name, picture), colour) in enumerate(zip(shown, _colours(len(shown)), strict=True)):
        x = picture.temperature - ZERO_CELSIUS if cooled else picture.time
        inside = (picture.fraction > 1e-3) & (picture.fraction < 0.999 * picture.fraction[-1])
        inside = inside if inside.any() else np.ones_like(inside)
        every = -(-len(shown) // _MOST_NAMED)
        named = k % every == 0 or k == len(shown) - 1
        ax.plot(x[inside], picture.fraction[inside], color=colour, label=name if named else None)
        ax.plot(x[inside], picture.fraction_estimate[inside], "--", color=colour, linewidth=1.0)
    if not cooled:
        ax.set_xscale("log")
    ax.set_xlabel("temperature, on cooling (°C)" if cooled else "time since the start (s)")
    ax.set_ylabel("transformed fraction (-)")
    ax.set_ylim(-0.02, 1.02)
    ax.spines[["top", "right"]].set_visible(False)
    ax.legend(frameon=False, fontsize=8)
    add_title(ax, title)
    add_caption(ax, f"First replica of each point. Solid: simulated; dashed: mean field. {caption}")
    return ax


def _number(point: Finding, axis: Axis) -> float:
    return float(point.point.columns[axis.column])


def _groups(points: Sequence[Finding], axis: Axis) -> dict[str, list[Finding]]:
    """Return the points by what else is varied, each group in the order of the axis."""
    groups: dict[str, list[Finding]] = {}
    for point in points:
        rest = {key: value for key, value in point.point.columns.items() if key != axis.column}
        parts = dict(zip(point.point.columns, point.point.label.split(", "), strict=False))
        name = ", ".join(parts.get(key, str(value)) for key, value in rest.items())
        groups.setdefault(name, []).append(point)
    if all(len(members) == 1 for members in groups.values()):  # keys that go in step
        groups = {"": list(points)}
    return {
        name: sorted(members, key=lambda p: _number(p, axis)) for name, members in groups.items()
    }


def _line(
    ax: Axes,
    points: Sequence[Finding],
    axis: Axis,
    key: str,
    colour: str,
    name: str,
    marker: str,
) -> None:
    x = np.array([_number(p, axis) for p in points])
    found = [p.numbers[key] for p in points]
    value = np.array([s.value for s in found])
    error = np.abs(np.array([[s.low, s.high] for s in found]).T - value)
    error = np.where(np.isfinite(error), error, 0.0)
    ax.errorbar(
        x, value, yerr=error, color=colour, fmt=marker, markersize=4, capsize=2, linewidth=1.0,
        label=name,
    )  # fmt: skip
    if f"estimate_{key}" in points[0].numbers:
        expected = [p.numbers[f"estimate_{key}"].value for p in points]
        ax.plot(x, expected, color=colour, linestyle="--", linewidth=1.2)


def _enlarge_turn(ax: Axes, points: Sequence[Finding], axis: Axis) -> None:
    """Show in a window where the size first rises and then falls, if that is slight."""
    key = "diameter_of_mean_volume_um"
    expected = np.array([p.numbers[f"estimate_{key}"].value for p in points])
    top = int(np.argmax(expected))
    if not 0 < top < len(points) - 1 or expected[top] > 1.2 * expected[0]:
        return
    last = top + int(np.argmax(expected[top:] < 0.95 * expected[0]))
    inset = ax.inset_axes((0.1, 0.12, 0.42, 0.42))
    _line(inset, points[: max(last, top + 1)], axis, key, BLUE, "", "o")
    _scale_x(inset, np.array([_number(p, axis) for p in points[: max(last, top + 1)]]))
    inset.tick_params(labelsize=7)
    inset.set_title("enlarged", fontsize=7, loc="left")


def _scale_x(ax: Axes, numbers: NDArray[np.float64]) -> None:
    """Make the horizontal axis logarithmic where that serves, with a place for 0."""
    positive = numbers[numbers > 0]
    if positive.size == 0 or numbers.min() < 0 or np.ptp(numbers) == 0:
        return
    if positive.max() < _LOGARITHMIC * positive.min():
        return
    if positive.size == numbers.size:
        ax.set_xscale("log")
        ax.xaxis.set_major_formatter(FuncFormatter(lambda x, _: f"{x:g}"))
        return
    least = float(positive.min())
    ax.set_xscale("symlog", linthresh=least, linscale=0.5)
    decades = 10.0 ** np.arange(math.ceil(math.log10(least)), math.log10(positive.max()) + 1e-9)
    ax.set_xticks([0.0, *decades.tolist()], minor=False)
    ax.xaxis.set_major_formatter(FuncFormatter(lambda x, _: f"{x:g}"))


def _plain_numbers(ax: Axes) -> None:
    """Write 20 and 50 on a logarithmic axis, not powers of ten."""
    ax.yaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    ax.yaxis.set_major_formatter(FuncFormatter(lambda y, _: f"{y:g}"))
    ax.yaxis.set_minor_formatter(NullFormatter())


def _colours(count: int) -> list[str]:
    """Return colours that rise in lightness, dark to light; blue alone."""
    if count == 1:
        return [BLUE]
    ramp = colormaps["viridis"](np.linspace(0.0, 0.88, count))
    return ["#{:02x}{:02x}{:02x}".format(*(int(255 * c) for c in rgb[:3])) for rgb in ramp]


def _evenly(pictures: Sequence[tuple[str, Picture]]) -> list[tuple[str, Picture]]:
    if len(pictures) <= _MOST:
        return list(pictures)
    return [pictures[k] for k in np.linspace(0, len(pictures) - 1, _MOST).round().astype(int)]


def _tile(picture: Picture, edge: float) -> NDArray[np.uint8]:
    """Return a window of a map as colours; white where there is no map."""
    centre = (np.arange(_TILE) + 0.5) / _TILE * edge
    places = []
    for length, periodic in zip(picture.labels.shape, picture.periodic, strict=True):
        place = (centre / picture.pixel).astype(np.int64)
        places.append(place % length if periodic else np.minimum(place, length - 1))
    labels = picture.labels[np.ix_(*places)]
    # a label may come in several times, in places far apart
    pieces = connected(labels, background=0, connectivity=1)  # type: ignore[no-untyped-call] # skimage has no types here
    codes = colour_codes(neighbour_pairs(pieces), int(pieces.max()))
    table = np.concatenate([palette(max(COLOURS, int(codes.max()) + 1)), [(236, 236, 236)]])
    return np.asarray(table[codes].astype(np.uint8)[pieces])
