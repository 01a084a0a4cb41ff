"""The map of a label image: one colour a spherulite, neighbours differ, a scale bar.

Pictures of light are another matter; this one shows who owns which pixel.
"""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING, Final

import numpy as np
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.transforms import offset_copy

from spheru.errors import ValidityError
from spheru.output.classes import round_down
from spheru.output.plots.canvas import WIDTH, add_caption, add_title, caption_width, root_figure
from spheru.output.plots.colouring import COLOURS, colour_codes, neighbour_pairs, palette

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage

__all__ = [
    "boundary_lines",
    "describe_edges",
    "map_colours",
    "plot_map",
    "reduction",
    "shown_labels",
    "swatch",
]

_LARGEST: Final = 4096  # pixels along an edge of the picture
_SMALLEST: Final = 800  # to which a small map is blown up by a whole number
_NOTHING: Final = (236, 236, 236)  # where nothing has crystallised
_SHADE: Final = 0.35  # brightness left in the colour of a boundary
_ROOM: Final = 6.0  # pixels across a spherulite below which boundaries would cover the map
_STRIP: Final = 512  # rows drawn at a time: matplotlib takes 100 bytes for each pixel meanwhile
_LINE: Final = 0.135  # inch, a line of the caption
_NARROWEST: Final = 4.0  # inch, so that the texts under a narrow map have room


def reduction(frame: Frame) -> int:
    """Return k where a picture of the frame shows every k-th pixel only.

    Parameters
    ----------
    frame : Frame
        The grid of a map.

    Returns
    -------
    step : int
        1 up to 4096 pixels along the longer edge.
    """
    return -(-max(frame.shape) // _LARGEST)


def describe_edges(frame: Frame) -> str:
    """Return what happens at the edges of a frame, in words.

    Parameters
    ----------
    frame : Frame
        The grid of a map.

    Returns
    -------
    words : str
        Such as ``"periodic edges"``.

    Examples
    --------
    >>> from spheru.image.frame import Frame
    >>> describe_edges(Frame(shape=(2, 2), pixel=1.0, periodic=True))
    'periodic edges'
    >>> describe_edges(Frame(shape=(2, 2), pixel=1.0, periodic=(False, True)))
    'edges: x periodic, y cut'
    """
    names = [
        "periodic" if periodic else "closed" if closed else "cut"
        for periodic, closed in zip(frame.periodic, frame.closed, strict=True)
    ][::-1]
    if len(set(names)) == 1:
        return f"{names[0]} edges"
    return "edges: " + ", ".join(f"{axis} {name}" for axis, name in zip("xyz", names, strict=False))


def map_colours(image: LabelImage) -> NDArray[np.uint8]:
    """Return the map as colours, before any letter or bar is added.

    Parameters
    ----------
    image : LabelImage
        A map of two axes.

    Returns
    -------
    colours : ndarray of uint8, shape (rows, columns, 3)
        sRGB: every k-th pixel of a large map (see `reduction`), each pixel of a small one as a
        square of whole pixels. Boundaries are one pixel wide, and left out where spherulites are
        less than 6 pixels across.

    Raises
    ------
    ValidityError
        If the image has three axes.
    """
    labels, blow_up = _reduced(image)
    shown = np.zeros(int(labels.max()) + 1, dtype=bool)
    shown[labels] = True
    shown[0] = False
    numbered = np.cumsum(shown, dtype=np.int32)[labels]  # 1 and up without a gap
    numbered[labels == 0] = 0
    count = int(np.count_nonzero(shown))
    codes = colour_codes(neighbour_pairs(numbered, periodic=image.frame.periodic), count)
    table = np.concatenate([palette(max(COLOURS, int(codes.max()) + 1)), [_NOTHING]])
    colours = table[codes].astype(np.uint8)  # code -1, of label 0, is the last row
    if blow_up > 1:
        numbered = numbered.repeat(blow_up, axis=0).repeat(blow_up, axis=1)
    picture = colours[numbered]
    line = boundary_lines(numbered, count)
    picture[line] = (picture[line] * _SHADE).astype(np.uint8)
    return picture


def shown_labels(image: LabelImage) -> NDArray[np.uint32]:
    """Return the labels as they are shown: every k-th pixel, or each one as a square of pixels.

    Parameters
    ----------
    image : LabelImage
        A map of two axes.

    Returns
    -------
    labels : ndarray of uint32, shape (rows, columns)
        One label for each pixel of the picture that `map_colours` makes.

    Raises
    ------
    ValidityError
        If the image has three axes.
    """
    labels, blow_up = _reduced(image)
    return labels.repeat(blow_up, axis=0).repeat(blow_up, axis=1) if blow_up > 1 else labels


def boundary_lines(labels: NDArray[np.integer], count: int) -> NDArray[np.bool_]:
    """Return the pixels of a picture on which boundaries are drawn.

    Parameters
    ----------
    labels : ndarray of int, shape (rows, columns)
        Labels of the pixels of the picture.
    count : int
        Number of spherulites in it.

    Returns
    -------
    line : ndarray of bool, shape (rows, columns)
        Lines one pixel wide; none where spherulites are less than 6 pixels across.
    """
    line = np.zeros(labels.shape, dtype=np.bool_)
    if count and labels.size >= count * _ROOM**2:
        line[:-1] |= labels[:-1] != labels[1:]
        line[:, :-1] |= labels[:, :-1] != labels[:, 1:]
    return line


def _reduced(image: LabelImage) -> tuple[NDArray[np.uint32], int]:
    """Return the labels that are shown, and how many pixels wide each of them is."""
    if image.frame.dimension != 2:
        raise ValidityError("map: expected an image of two axes; give a plane of the volume")
    step = reduction(image.frame)
    labels = image.labels[::step, ::step]
    small = max(labels.shape) < _SMALLEST
    return labels, -(-_SMALLEST // max(labels.shape)) if small else 1


def plot_map(
    image: LabelImage,
    *,
    ax: Axes | None = None,
    title: str = "",
    caption: str = "",
    colours: NDArray[np.uint8] | None = None,
    legend: Sequence[Artist] | None = None,
) -> Axes:
    """Draw a label image with a scale bar below it.

    Parameters
    ----------
    image : LabelImage
        A map of two axes.
    ax : Axes, optional
        Where to draw. Without it a figure is made on which each pixel of `map_colours` is one
        pixel of the picture.
    title, caption : str, optional
        What to write above and below.
    colours : ndarray of uint8, shape (rows, columns, 3), optional
        Colours instead of those of `map_colours`, as large.
    legend : sequence of Artist, optional
        What the legend shows; what has not crystallised without it.

    Returns
    -------
    ax : Axes
        The map; its data coordinates are µm from the upper left corner.

    Raises
    ------
    ValidityError
        If the image has three axes.
    """
    colours = map_colours(image) if colours is None else colours
    step = reduction(image.frame)
    if step > 1:
        which = {2: "second", 3: "third"}.get(step, f"{step}th")
        caption = f"{caption} Shown is every {which} pixel.".strip()
    height, width = (edge * 1e6 for edge in image.frame.extent)
    if legend is None:
        legend = [] if image.labels.all() else [swatch(_NOTHING, "not crystallised")]
    below = 38.0 if legend else 22.0  # pt, of the caption: under the bar and the legend
    strip = _STRIP if ax is None else len(colours)
    ax = _exact_axes(colours.shape, title, caption, below) if ax is None else ax
    scale = height / len(colours)
    for row in range(0, len(colours), strip):
        part = colours[row : row + strip]
        extent = (0, width, (row + len(part)) * scale, row * scale)
        ax.imshow(part, interpolation="nearest", extent=extent)
    ax.set_ylim(height, 0)
    ax.set_axis_off()
    add_title(ax, title)
    length = round_down(0.3 * max(width, height))
    place = offset_copy(ax.get_xaxis_transform(), root_figure(ax), y=-10, units="points")
    ax.add_line(
        Line2D(
            [0, length],
            [0, 0],
            transform=place,
            color="black",
            linewidth=3,
            solid_capstyle="butt",
            clip_on=False,
            snap=False,  # else both ends move by half a pixel
        )
    )
    ax.text(length, 0, f"  {length:g} µm", transform=place, va="center_baseline", fontsize=10)
    if legend:
        ax.legend(
            handles=list(legend),
            loc="upper left",
            bbox_to_anchor=(0, 0),
            bbox_transform=offset_copy(ax.transAxes, root_figure(ax), y=-20, units="points"),
            borderaxespad=0,
            borderpad=0,
            handlelength=1.4,
            ncols=len(legend),
            columnspacing=1.2,
            fontsize=9,
            frameon=False,
        )
    add_caption(ax, caption, below=below)
    return ax


def swatch(colour: Sequence[int], label: str) -> Patch:
    """Return a box of a colour for a legend.

    Parameters
    ----------
    colour : sequence of int, length 3
        sRGB, 0 to 255.
    label : str
        What it means.

    Returns
    -------
    patch : Patch
        The box.
    """
    return Patch(
        facecolor="#{:02x}{:02x}{:02x}".format(*colour),
        edgecolor="black",
        linewidth=0.5,
        label=label,
    )


def _exact_axes(shape: tuple[int, ...], title: str, caption: str, below: float) -> Axes:
    """Return axes of as many pixels as the picture has, on a figure with room for the texts.

    The layout is by hand: matplotlib's would blow up the picture by a broken number.
    """
    rows, columns = shape[:2]
    dpi = max(rows, columns) / WIDTH
    margin = round(0.15 * dpi)
    wide = max(columns, round(_NARROWEST * dpi))
    lines = len(textwrap.wrap(caption, caption_width(wide / dpi)))
    under = round((below / 72 + _LINE * lines + 0.1) * dpi)
    over = round(0.32 * dpi) if title else margin
    size = (wide + 2 * margin, rows + under + over)
    # A hundredth of a pixel more: the canvas cuts 999.9999 down to 999.
    figure = Figure(figsize=((size[0] + 0.01) / dpi, (size[1] + 0.01) / dpi), dpi=dpi)
    return figure.add_axes((margin / size[0], under / size[1], columns / size[0], rows / size[1]))
