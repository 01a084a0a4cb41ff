"""What was measured, drawn on the picture: outlines, what counts and what does not, test lines.

Colours tell the part that each piece plays; those of a map tell neighbours apart.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
from matplotlib.collections import LineCollection
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle

from spheru.measure.labels import cut_axes
from spheru.output.plots.canvas import BLUE, ORANGE
from spheru.output.plots.map import boundary_lines, plot_map, shown_labels, swatch

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.measure.intercepts import TestLine
    from spheru.run.measure import MeasuredField

__all__ = ["plot_outlines", "plot_test_lines"]

_USED: Final = (221, 233, 245)
_UNUSED: Final = (190, 190, 190)
_SMALL: Final = (244, 205, 168)
_NOTHING: Final = (246, 246, 246)
_LINE: Final = (22, 60, 102)
_FEW: Final = 12  # test lines of a direction that can be told apart on a page
_HUES: Final = (BLUE, ORANGE, "#6b4c9a", "#2f7f5f")


def plot_outlines(field: MeasuredField, *, title: str = "", caption: str = "") -> Axes:
    """Draw a picture with the outlines of its spherulites, and say by colour which ones count.

    Parameters
    ----------
    field : MeasuredField
        A measured picture of two axes.
    title, caption : str, optional
        What to write above and below.

    Returns
    -------
    ax : Axes
        The picture; data coordinates are µm from the upper left corner.

    Raises
    ------
    ValidityError
        If the image has three axes.
    """
    sizes, labels = field.sizes, shown_labels(field.image)
    small = sizes.diameter < sizes.floor
    part = np.where(sizes.weight > 0, 1, np.where(small, 3, 2))
    known = np.concatenate([[0], sizes.label])
    codes = np.concatenate([[0], part])[np.searchsorted(known, labels)]
    table = np.array([_NOTHING, _USED, _UNUSED, _SMALL], dtype=np.uint8)
    colours = table[codes]
    colours[boundary_lines(labels, len(sizes))] = _LINE
    names = {1: "counts", 2: "not used: edge rule", 3: "not used: below the floor", 0: "no label"}
    seen = set(np.unique(codes).tolist())
    legend = [swatch(table[k].tolist(), name) for k, name in names.items() if k in seen]
    if sizes.guard > 0:
        caption = f"{caption} Dashed: the frame within the guard.".strip()
    ax = plot_map(field.image, title=title, caption=caption, colours=colours, legend=legend)
    if sizes.guard > 0:
        frame = field.image.frame
        margin = np.where(cut_axes(frame), sizes.guard, 0.0) * 1e6
        height, width = np.array(frame.extent) * 1e6 - 2 * margin
        ax.add_patch(
            Rectangle(
                (margin[1], margin[0]),
                width,
                height,
                fill=False,
                edgecolor=ORANGE,
                linewidth=1.5,
                linestyle="--",
                gid="guard",
            )
        )
    return ax


def plot_test_lines(
    field: MeasuredField, lines: Sequence[TestLine], *, title: str = "", caption: str = ""
) -> Axes:
    """Draw test lines on a picture, with their intersections.

    Parameters
    ----------
    field : MeasuredField
        The picture of two axes.
    lines : sequence of TestLine
        The lines in it; of those of one direction, 12 at most are drawn, evenly chosen.
    title, caption : str, optional
        What to write above, and below after how many lines are shown.

    Returns
    -------
    ax : Axes
        The picture; data coordinates are µm from the upper left corner.

    Raises
    ------
    ValidityError
        If the image has three axes.
    """
    labels = shown_labels(field.image)
    colours = np.full((*labels.shape, 3), 255, dtype=np.uint8)
    colours[labels == 0] = (225, 225, 225)
    colours[boundary_lines(labels, len(field.sizes))] = (120, 120, 120)
    directions = sorted({-1.0 if one.direction is None else one.direction for one in lines})
    drawn = []
    for direction in directions:
        along = [one for one in lines if (one.direction if one.radius == 0 else -1.0) == direction]
        step = -(-len(along) // _FEW)
        drawn.append(along[step // 2 :: step])
    shown = sum(map(len, drawn))
    said = f"Shown: {shown} of {len(lines)} test lines; dots are intersections."
    legend = [
        Line2D([], [], color=_HUES[k % len(_HUES)], linewidth=1.2, label=_named(direction))
        for k, direction in enumerate(directions)
    ]
    ax = plot_map(
        field.image,
        title=title,
        caption=f"{said} {caption}".strip(),
        colours=colours,
        legend=legend,
    )
    origin = np.array(field.image.frame.origin)
    for k, along in enumerate(drawn):
        hue = _HUES[k % len(_HUES)]
        paths = [_on_page(one.points(2 if one.radius == 0 else 200), origin) for one in along]
        ax.add_collection(
            LineCollection(paths, colors=hue, linewidths=0.8, gid="test lines"), autolim=False
        )
        dots = np.concatenate([_on_page(one.crossings, origin) for one in along])
        ax.plot(dots[:, 0], dots[:, 1], ".", color=hue, markersize=3, gid="intersections")
    return ax


def _on_page(points: NDArray[np.float64], origin: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return points (y, x) [m] as (x, y) [µm] from the corner of the picture."""
    return np.asarray((points.reshape(-1, 2) - origin)[:, ::-1] * 1e6)


def _named(direction: float) -> str:
    return "circles" if direction < 0 else f"{np.degrees(direction):.0f}°"
