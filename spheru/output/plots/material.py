"""The laws of a material record: growth rate and sites against temperature.

Dotted where the laws reach beyond the range of the data that they were fitted to.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
from matplotlib.figure import Figure

from spheru.constants import ZERO_CELSIUS
from spheru.errors import FolderError
from spheru.files import write_atomic
from spheru.output.plots.canvas import BLUE, DPI, GREY, WIDTH, add_caption, add_title, new_axes, png

if TYPE_CHECKING:
    from pathlib import Path

    from matplotlib.axes import Axes
    from numpy.typing import NDArray

    from spheru.material.record import MaterialRecord

__all__ = ["plot_growth", "plot_material", "plot_sites", "save_material"]

_POINTS: Final = 2001
_DECADES: Final = 6.0  # of growth rate that are shown
_NUDGE: Final = 1e-6  # K, to both sides of a jump


def plot_material(record: MaterialRecord, *, figure: Figure | None = None) -> tuple[Axes, Axes]:
    """Draw growth rate and density of sites of a record against temperature.

    Parameters
    ----------
    record : MaterialRecord
        The material.
    figure : Figure, optional
        Where to draw; a new one without it.

    Returns
    -------
    growth, sites : Axes
        The two panels, on one horizontal axis.
    """
    if figure is None:
        figure = Figure(figsize=(WIDTH, 5.6), dpi=DPI, layout="constrained")
    above, below = figure.subplots(2, 1, sharex=True)
    plot_growth(record, ax=above)
    plot_sites(record, ax=below)
    above.set_xlabel("")
    add_title(above, record.title)
    add_caption(
        below,
        "Solid: within the range of the data; dotted: beyond it, or where that is not known. Grey "
        f"lines: Tg {_celsius(record.t_g)} and equilibrium melting temperature "
        f"{_celsius(record.t_m0)}. Uncertain by a factor of {record.growth_factor:g} (growth) and "
        f"{record.site_factor:g} (sites).",
    )
    return above, below


def save_material(record: MaterialRecord, path: str | Path) -> None:
    """Write the figure of a record as PNG.

    Parameters
    ----------
    record : MaterialRecord
        The material.
    path : path-like
        The file; replaced where it is there.

    Raises
    ------
    FolderError
        If the disk or the folder refuses; nothing half written is left then.
    """
    ax, _ = plot_material(record)
    try:
        write_atomic(path, png(ax))
    except OSError as fault:
        raise FolderError(
            f"{path}: the figure cannot be written ({fault.strerror or fault}); choose another "
            "folder"
        ) from fault


def plot_growth(record: MaterialRecord, *, ax: Axes | None = None) -> Axes:
    """Draw the growth rate against temperature.

    Parameters
    ----------
    record : MaterialRecord
        The material.
    ax : Axes, optional
        Where to draw; on a figure of its own without it.

    Returns
    -------
    ax : Axes
        Logarithmic, in µm/s, or in µm/min where the rate stays below 1 µm/s.
    """
    ax = new_axes(ax)
    temperature = _temperatures(record, record.growth.breakpoints())
    rate = record.growth.rate(temperature) * 1e6
    scale, unit = (1.0, "µm/s") if rate.max() >= 1 else (60.0, "µm/min")
    rate = rate * scale
    _law(ax, record, temperature, rate, record.growth.fitted_range)
    ax.set_ylim(rate.max() * 10**-_DECADES, rate.max() * 3)
    ax.set_ylabel(f"growth rate ({unit})")
    return ax


def plot_sites(record: MaterialRecord, *, ax: Axes | None = None) -> Axes:
    """Draw the density of sites that are active on cooling to a temperature.

    Parameters
    ----------
    record : MaterialRecord
        The material.
    ax : Axes, optional
        Where to draw; on a figure of its own without it.

    Returns
    -------
    ax : Axes
        Logarithmic, in 1/mm³; without a curve where the record has no law of its own: a
        band over the numbers that are usual then.
    """
    ax = new_axes(ax)
    law = record.sites
    temperature = _temperatures(record, [record.t_m0 - step for step in law.steps()] if law else [])
    if law is None:
        _law(ax, record, temperature, np.full(temperature.size, np.nan), None)
        text = "no site law in the record"
        if record.site_decades is None:
            ax.tick_params(axis="y", which="both", left=False, labelleft=False)
        else:
            low, high = (10.0 ** (decade - 9) for decade in record.site_decades)
            ax.axhspan(low, high, color=GREY, alpha=0.15, linewidth=0)
            ax.set_ylim(low / 10, high * 10)
            text += "\n(band: usual numbers)"
        ax.text(0.5, 0.5, text, transform=ax.transAxes, ha="center", va="center")
    else:
        density = law.density(record.t_m0 - temperature) * 1e-9
        fitted = law.fitted_range
        span = None if fitted is None else (record.t_m0 - fitted[1], record.t_m0 - fitted[0])
        _law(ax, record, temperature, density, span)
    ax.set_ylabel("sites active by then (1/mm³)")
    return ax


def _law(
    ax: Axes,
    record: MaterialRecord,
    temperature: NDArray[np.float64],
    value: NDArray[np.float64],
    fitted: tuple[float, float] | None,
) -> None:
    celsius = temperature - ZERO_CELSIUS
    shown = np.where(value > 0, value, np.nan)
    known = (
        np.zeros(temperature.size, dtype=bool)
        if fitted is None
        else (temperature >= fitted[0]) & (temperature <= fitted[1])
    )
    ax.set_yscale("log")
    ax.plot(celsius, shown, color=BLUE, linewidth=1.2, linestyle=":", label="extrapolated")
    ax.plot(celsius, np.where(known, shown, np.nan), color=BLUE, linewidth=1.8, label="fitted")
    for mark in (record.t_g, record.t_m0):
        ax.axvline(mark - ZERO_CELSIUS, color=GREY, linewidth=0.8, alpha=0.6)
    ax.set_xlabel("temperature (°C)")
    ax.spines[["top", "right"]].set_visible(False)


def _temperatures(
    record: MaterialRecord, breakpoints: tuple[float, ...] | list[float]
) -> NDArray[np.float64]:
    """Return temperatures from below Tg to above Tm0 [K], with both sides of every jump."""
    low, high = record.t_g - 5, record.t_m0 + 5
    jumps = np.array([p for p in breakpoints if low < p < high], dtype=np.float64)
    return np.unique(
        np.concatenate([np.linspace(low, high, _POINTS), jumps - _NUDGE, jumps + _NUDGE])
    )


def _celsius(temperature: float) -> str:
    return f"{temperature - ZERO_CELSIUS:.0f} °C"
