"""Transformed fraction and heat flow, simulated and by mean field.

Against temperature where the material crystallises while it cools, else against time.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure

from spheru.constants import ZERO_CELSIUS
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

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.run.result import Conversion

__all__ = ["describe_conversion", "plot_conversion", "plot_fraction", "plot_heat_flow"]


def describe_conversion(conversion: Conversion) -> str:
    """Return in words how the simulated heat flow was smoothed and what it leaves out.

    Parameters
    ----------
    conversion : Conversion
        The curves of a run.

    Returns
    -------
    words : str
        One sentence or two.
    """
    window = f"{conversion.landmarks.smoothing_time:.3g} s"
    if _cools(conversion) and conversion.landmarks.smoothing_temperature is not None:
        window = f"{conversion.landmarks.smoothing_temperature:.3g} K ({window})"
    return (
        f"Heat flow per mass of sample, without a heat-capacity baseline, averaged over {window}."
    )


def plot_conversion(
    conversion: Conversion, *, figure: Figure | None = None, title: str = "", caption: str = ""
) -> tuple[Axes, Axes]:
    """Draw the transformed fraction above the heat flow.

    Parameters
    ----------
    conversion : Conversion
        The curves of a run.
    figure : Figure, optional
        Where to draw; a new one without it.
    title, caption : str, optional
        What to write above, and below after what `describe_conversion` says.

    Returns
    -------
    fraction, heat_flow : Axes
        The two panels, on one horizontal axis.
    """
    if figure is None:
        figure = Figure(figsize=(WIDTH, 5.2), dpi=DPI, layout="constrained")
    above, below = figure.subplots(2, 1, sharex=True)
    plot_fraction(conversion, ax=above)
    plot_heat_flow(conversion, ax=below)
    above.set_xlabel("")
    below.get_legend().remove()
    add_title(above, title)
    add_caption(below, f"{describe_conversion(conversion)} {caption}".strip())
    return above, below


def plot_fraction(conversion: Conversion, *, ax: Axes | None = None) -> Axes:
    """Draw the transformed fraction.

    Parameters
    ----------
    conversion : Conversion
        The curves of a run.
    ax : Axes, optional
        Where to draw; on a figure of its own without it.

    Returns
    -------
    ax : Axes
        Simulated solid, mean field dashed.
    """
    ax = new_axes(ax)
    _curves(ax, conversion, conversion.fraction, conversion.fraction_estimate)
    ax.set_ylim(-0.02, 1.02)
    ax.set_ylabel("transformed fraction (-)")
    return ax


def plot_heat_flow(conversion: Conversion, *, ax: Axes | None = None) -> Axes:
    """Draw the heat flow, and mark its simulated peaks.

    Parameters
    ----------
    conversion : Conversion
        The curves of a run.
    ax : Axes, optional
        Where to draw; on a figure of its own without it.

    Returns
    -------
    ax : Axes
        Simulated solid, mean field dashed, in W per g of sample, exothermic upwards.
    """
    ax = new_axes(ax)
    flow = conversion.heat_flow * 1e-3
    _curves(ax, conversion, flow, conversion.heat_flow_estimate * 1e-3)
    highest = float(max(flow.max(), conversion.heat_flow_estimate.max() * 1e-3))
    ax.set_ylim(0, 1.16 * highest or 1.0)
    ax.set_ylabel("heat flow, exo up (W/g)")
    x, _ = _abscissa(conversion)
    if _cools(conversion):
        marks = [temperature - ZERO_CELSIUS for temperature, _ in conversion.landmarks.peaks]
        marks, unit = marks[:3], "°C"
    else:
        marks, unit = [float(x[flow.argmax()])] if flow.any() else [], _time_unit(conversion)[1]
    order = np.argsort(x, kind="stable")
    upper = np.maximum(flow, conversion.heat_flow_estimate * 1e-3)[order]
    for mark in marks:
        height = float(np.interp(mark, x[order], upper))  # the label stands clear of both curves
        ax.plot([mark, mark], [0, height], color=GREY, linewidth=0.8, linestyle=":")
        ax.annotate(
            f"{mark:.1f} {unit}" if unit == "°C" else f"{mark:.3g} {unit}",
            (mark, height),
            xytext=(0, 5),
            textcoords="offset points",
            ha="center",
            fontsize=9,
            gid="peak",
        )
    return ax


def _curves(
    ax: Axes,
    conversion: Conversion,
    simulated: NDArray[np.float64],
    mean_field: NDArray[np.float64],
) -> None:
    x, label = _abscissa(conversion)
    ax.plot(x, simulated, color=BLUE, linewidth=1.8, label="simulated")
    ax.plot(x, mean_field, color=ORANGE, linewidth=1.5, linestyle="--", label="mean field")
    ax.set_xlabel(label)
    ax.set_xlim(*_range(conversion, x))
    ax.spines[["top", "right"]].set_visible(False)
    ax.legend(frameon=False, fontsize=9)


def _range(conversion: Conversion, x: NDArray[np.float64]) -> tuple[float, float]:
    """Return the part of the axis in which something happens, and a tenth more on each side."""
    inside = np.zeros(x.size, dtype=bool)
    for curve in (conversion.fraction, conversion.fraction_estimate):
        last = float(curve[-1])
        inside |= (curve > 1e-3 * last) & (curve < 0.999 * last)
    shown = x[inside] if inside.any() else x
    pad = 0.1 * float(np.ptp(shown)) or 1.0
    return float(shown.min()) - pad, float(shown.max()) + pad


def _cools(conversion: Conversion) -> bool:
    return conversion.landmarks.peak_temperature is not None


def _abscissa(conversion: Conversion) -> tuple[NDArray[np.float64], str]:
    if _cools(conversion):
        return conversion.temperature - ZERO_CELSIUS, "temperature, on cooling (°C)"
    seconds, unit = _time_unit(conversion)
    return conversion.time / seconds, f"time since the start ({unit})"


def _time_unit(conversion: Conversion) -> tuple[float, str]:
    longest = float(conversion.time.max())
    units = ((3 * 3600.0, 3600.0, "h"), (180.0, 60.0, "min"), (-1.0, 1.0, "s"))
    return next((seconds, unit) for above, seconds, unit in units if longest > above)
