"""What all figures share: axes of their own or of the caller, captions, PNG bytes.

Only `matplotlib.figure.Figure`: no pyplot, no window, no global style.
"""

from __future__ import annotations

import io
import textwrap
from typing import TYPE_CHECKING, Final

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from PIL import Image

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from numpy.typing import NDArray

__all__ = [
    "BLUE",
    "DPI",
    "GREY",
    "ORANGE",
    "WIDTH",
    "add_caption",
    "add_title",
    "caption_width",
    "new_axes",
    "png",
    "root_figure",
]

WIDTH: Final = 6.5  # inches: the text width of a page, so that 10 pt reads as 10 pt there
DPI: Final = 150
# Blue and orange stay apart in every common kind of colour blindness, and in grey print.
BLUE: Final = "#1f5a96"
ORANGE: Final = "#d9772b"
GREY: Final = "#555555"
_TITLE: Final = 60  # characters
_COLOURS: Final = 256  # that a palette PNG can hold


def new_axes(ax: Axes | None, *, height: float = 4.0) -> Axes:
    """Return the axes to draw on: those given, or new ones on a figure of their own.

    Parameters
    ----------
    ax : Axes or None
        Axes of the caller.
    height : float, optional
        Height of a new figure [inch].

    Returns
    -------
    ax : Axes
        Where to draw.
    """
    if ax is not None:
        return ax
    return Figure(figsize=(WIDTH, height), dpi=DPI, layout="constrained").subplots()


def add_title(ax: Axes, title: str) -> None:
    """Write a title of one line above the left corner of the axes, cut short where it is long."""
    ax.set_title(textwrap.shorten(title, _TITLE, placeholder=" ..."), loc="left", fontsize=10)


def caption_width(inches: float) -> int:
    """Return how many characters of a caption stand in a line of a width [inch]."""
    return max(int(15 * inches), 20)


def add_caption(ax: Axes, text: str, *, below: float = 6.0) -> None:
    """Write a caption under the label of the horizontal axis, as wide as the figure or axes.

    Parameters
    ----------
    ax : Axes
        The axes it belongs to.
    text : str
        What it says; wrapped here.
    below : float, optional
        Distance from the label, or from the axes where there is none [pt].
    """
    if text:
        figure = root_figure(ax)
        alone = len(figure.axes) == 1
        inches = figure.get_figwidth() - 0.3 if alone else ax.bbox.width / figure.dpi
        ax.annotate(
            textwrap.fill(text, caption_width(inches)),
            xy=(0, 0),
            xycoords=("axes fraction", ax.xaxis.label if ax.get_xlabel() else "axes fraction"),
            xytext=(0, -below),
            textcoords="offset points",
            va="top",
            fontsize=8,
            color=GREY,
            annotation_clip=False,
            gid="caption",
        )


def root_figure(ax: Axes) -> Figure:
    """Return the whole figure that axes stand on."""
    return ax.figure.canvas.figure


def png(ax: Axes) -> bytes:
    """Return the figure of axes as PNG: a palette of 256 colours, no date, no name of a program.

    Parameters
    ----------
    ax : Axes
        Any axes of the figure.

    Returns
    -------
    content : bytes
        The same for the same figure. Colours beyond the 256 commonest (edges of letters) turn
        into the nearest of those.
    """
    canvas = FigureCanvasAgg(root_figure(ax))
    canvas.draw()  # type: ignore[no-untyped-call] # matplotlib has no types here
    pixels = canvas.buffer_rgba()  # type: ignore[no-untyped-call] # nor here
    index, colours = _palette(np.asarray(pixels))
    picture = Image.fromarray(index)
    picture.putpalette(colours.tobytes())
    stream = io.BytesIO()
    picture.save(stream, "PNG", compress_level=6)
    return stream.getvalue()


def _palette(rgba: NDArray[np.uint8]) -> tuple[NDArray[np.uint8], NDArray[np.uint8]]:
    """Return a picture as indices into a palette, and the palette, commonest colours first."""
    packed = np.ascontiguousarray(rgba).view(np.uint32).ravel()
    # runs of one colour instead of pixels: a tenth of the work in a large map
    start = np.concatenate([[0], np.flatnonzero(packed[1:] != packed[:-1]) + 1])
    length = np.diff(start, append=packed.size)
    values, inverse = np.unique(packed[start], return_inverse=True)
    found = values.view(np.uint8).reshape(-1, 4)[:, :3].astype(np.int32)
    count = np.bincount(inverse, weights=length)
    kept = found[np.argsort(-count, kind="stable")[:_COLOURS]]
    nearest = np.array([((kept - c) ** 2).sum(axis=1).argmin() for c in found], dtype=np.uint8)
    return np.repeat(nearest[inverse], length).reshape(rgba.shape[:2]), kept.astype(np.uint8)
