"""The distribution of sizes with its cumulative curves.

Above, the densities of `spheru.output.plots.sizes`; below, every single diameter.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure

from spheru.output.plots.canvas import BLUE, DPI, GREY, ORANGE, WIDTH, add_caption, add_title
from spheru.output.plots.sizes import describe_sizes, draw_sizes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from spheru.measure.sizes import Sizes, Weighting

__all__ = ["plot_cumulative", "plot_distribution"]

_VIOLET = "#6b4c9a"
_SHARES = (10, 50, 90)  # percent


def plot_distribution(sizes: Sizes, *, title: str = "", caption: str = "") -> tuple[Axes, Axes]:
    """Draw the distribution of equivalent diameters above its cumulative curves.

    Parameters
    ----------
    sizes : Sizes
        The spherulites.
    title, caption : str, optional
        What to write above, and below after what `describe_sizes` says.

    Returns
    -------
    axes : tuple of Axes
        Densities by number and by size; cumulative shares by number, area and volume.
    """
    figure = Figure(figsize=(WIDTH, 6.6), dpi=DPI, layout="constrained")
    above, below = figure.subplots(2, 1, sharex=True)
    draw_sizes(sizes, above)
    above.set_xlabel("")
    add_title(above, title)
    plot_cumulative(sizes, ax=below)
    add_caption(below, f"{describe_sizes(sizes)} {caption}".strip())
    return above, below


def plot_cumulative(sizes: Sizes, *, ax: Axes) -> Axes:
    """Draw the share of spherulites up to each diameter, by number, by area and by volume.

    Parameters
    ----------
    sizes : Sizes
        The spherulites.
    ax : Axes
        Where to draw.

    Returns
    -------
    ax : Axes
        Percent over µm; dots at 10, 50 and 90 % of each curve.
    """
    used = sizes.weight > 0
    order = np.argsort(sizes.diameter[used])
    diameter = sizes.diameter[used][order] * 1e6
    curves: tuple[tuple[Weighting, str], ...] = (
        ("number", BLUE),
        ("area", ORANGE),
        ("volume", _VIOLET),
    )
    for weighting, colour in curves if diameter.size else ():
        weight = sizes.weights(weighting)[used][order]
        share = 100 * np.cumsum(weight) / weight.sum()
        marks = 1e6 * sizes.quantiles([p / 100 for p in _SHARES], weighting=weighting)
        ax.step(
            np.concatenate([diameter[:1], diameter]),
            np.concatenate([[0.0], share]),
            where="post",
            color=colour,
            linewidth=1.6,
            label=f"by {weighting}: d50 = {marks[1]:.3g} µm",
        )
        ax.plot(marks, _SHARES, "o", color=colour, markersize=4)
    for percent in _SHARES:
        ax.axhline(percent, color=GREY, linewidth=0.5, alpha=0.4)
    ax.set_ylim(0, 100)
    ax.set_yticks([0, 10, 25, 50, 75, 90, 100])
    ax.set_xlim(left=0)
    ax.set_xlabel("equivalent diameter (µm)")
    ax.set_ylabel("share up to this diameter (%)")
    ax.spines[["top", "right"]].set_visible(False)
    if diameter.size:
        ax.legend(frameon=False, fontsize=9, loc="upper left")
    return ax
