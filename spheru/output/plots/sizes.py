"""The distribution of sizes: by number and by area or volume, with the means.

The classes are those of sizes.csv; how sizes are measured is `spheru.measure`'s business.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from spheru.output.classes import class_edges
from spheru.output.plots.canvas import BLUE, ORANGE, add_caption, add_title, new_axes

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.measure.intervals import Statistic
    from spheru.measure.sizes import Sizes

__all__ = ["describe_sizes", "draw_sizes", "plot_sizes"]


def describe_sizes(sizes: Sizes) -> str:
    """Return in words what the sizes are of: section or volume, number, edge rule.

    Parameters
    ----------
    sizes : Sizes
        The spherulites of an image.

    Returns
    -------
    words : str
        One sentence or two.
    """
    kind = (
        "Diameters of spheres of equal volume (3D)"
        if sizes.dimension == 3
        else "Diameters of circles of equal area (2D)"
    )
    guard = f", guard {sizes.guard * 1e6:.3g} µm"
    rule = {
        "none": "every piece counts as it is",
        "exclude": "pieces at the edge left out, so large ones are missed",
        "miles-lantuejoul": "pieces at the edge left out, the others weighted (Miles-Lantuéjoul)",
        "counting-frame": f"counting frame{guard}",
        "guard-frame": f"centres within a guard frame{guard}",
    }.get(sizes.edge_rule, sizes.edge_rule)
    floor = f", from {sizes.floor * 1e6:.3g} µm up" if sizes.floor > 0 else ""
    pieces = ", each connected patch by itself" if sizes.kind == "patch" else ""
    return f"{kind}{pieces}, n = {sizes.count}{floor}. Edge rule: {rule}."


def plot_sizes(sizes: Sizes, *, ax: Axes | None = None, title: str = "", caption: str = "") -> Axes:
    """Draw the distribution of equivalent diameters, number- and size-weighted.

    Parameters
    ----------
    sizes : Sizes
        The spherulites of an image.
    ax : Axes, optional
        Where to draw; on a figure of its own without it.
    title, caption : str, optional
        What to write above, and below after what `describe_sizes` says.

    Returns
    -------
    ax : Axes
        Densities per µm, so that each distribution has an area of 1; a line at each mean and a
        band over its 95 % interval.
    """
    ax = draw_sizes(sizes, new_axes(ax))
    ax.set_xlabel("equivalent diameter (µm)")
    add_title(ax, title)
    band = (
        "Lines: means; bands: their 95 % intervals."
        if np.isfinite(sizes.statistics.number_mean_diameter.low)
        else "Too few spherulites for intervals of the means."
    )
    add_caption(ax, f"{describe_sizes(sizes)} {band} {caption}".strip())
    return ax


def draw_sizes(sizes: Sizes, ax: Axes) -> Axes:
    """Draw the densities of the distribution alone, without a title or a caption.

    Parameters
    ----------
    sizes : Sizes
        The spherulites of an image.
    ax : Axes
        Where to draw.

    Returns
    -------
    ax : Axes
        As in `plot_sizes`.
    """
    edges = class_edges(sizes)
    kind = "volume" if sizes.dimension == 3 else "area"
    if edges.size:
        shares, width = sizes.histogram(edges * 1e-6), np.diff(edges)
        means = sizes.statistics
        _draw(ax, edges, shares.number / width, means.number_mean_diameter, "number", BLUE)
        _draw(ax, edges, shares.size / width, means.size_weighted_mean_diameter, kind, ORANGE)
        ax.set_ylim(0, 1.4 * max(shares.number.max(), shares.size.max()) / width[0])
        ax.legend(frameon=False, fontsize=9, loc="upper left")
    else:
        ax.text(0.5, 0.5, "no spherulite", transform=ax.transAxes, ha="center")
    ax.set_xlim(left=0)
    ax.set_ylabel("density of the distribution (1/µm)")
    ax.spines[["top", "right"]].set_visible(False)
    return ax


def _draw(
    ax: Axes,
    edges: NDArray[np.float64],
    density: NDArray[np.float64],
    mean: Statistic,
    weighting: str,
    colour: str,
) -> None:
    value, low, high = (1e6 * number for number in (mean.value, mean.low, mean.high))
    known = np.isfinite([low, high]).all()
    interval = f" (95 %: {low:.3g} to {high:.3g})" if known else ""
    ax.stairs(
        density,
        edges,
        color=colour,
        linewidth=1.6,
        label=f"by {weighting}: mean {value:.3g} µm{interval}",
    )
    ax.stairs(density, edges, fill=True, color=colour, alpha=0.15)
    top = 1.08 * density.max()
    ax.plot([value, value], [0, top], color=colour, linewidth=1.2, gid=f"mean by {weighting}")
    if known:
        ax.fill_between([low, high], top, color=colour, alpha=0.2, linewidth=0)
