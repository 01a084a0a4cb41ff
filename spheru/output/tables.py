"""The tables of a run as text: one row a spherulite, conversion over time, classes of size.

Every column name carries its unit. Where the text goes is decided in `spheru.output.folder`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.constants import ZERO_CELSIUS
from spheru.files import table_text
from spheru.output.classes import class_edges

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.measure.sizes import Sizes
    from spheru.run.result import Conversion

__all__ = ["conversion_table", "size_table", "spherulite_lines", "spherulite_table"]

_ROWS: Final = 50_000  # that are text at the same time


def spherulite_table(sizes: Sizes, births: Births | None) -> str:
    """Return the table of the spherulites that own a pixel.

    Parameters
    ----------
    sizes : Sizes
        The spherulites of an image.
    births : Births or None
        Births of the same image, row i owning label i + 1; None for a picture that was not
        simulated: what is not known of the nuclei stays empty.

    Returns
    -------
    text : str
        CSV with the columns label, nucleus_x_um, nucleus_y_um, nucleus_z_um, birth_time_s,
        birth_temperature_C, origin, form, area_um2 (or volume_um3), diameter_um, centre_x_um,
        centre_y_um (centre_z_um), touches_edge, pixels, weight_per_mm2 (weight_per_mm3): what
        the spherulite stands for by the edge rule, 0 where it is not used.
    """
    return "".join(spherulite_lines(sizes, births))


def spherulite_lines(sizes: Sizes, births: Births | None) -> Iterator[str]:
    """Yield the table of the spherulites piece by piece, for millions of them.

    Parameters
    ----------
    sizes, births
        As for `spherulite_table`.

    Yields
    ------
    text : str
        The next rows; the header stands before the first ones.
    """
    for first in range(0, max(len(sizes), 1), _ROWS):
        text = _spherulite_rows(sizes, births, slice(first, first + _ROWS))
        yield text if first == 0 else text.partition("\n")[2]


def _spherulite_rows(sizes: Sizes, births: Births | None, part: slice) -> str:
    rows = np.asarray(sizes.label[part], dtype=np.intp) - 1
    empty: list[object] = [None] * rows.size
    columns: dict[str, Sequence[object]] = {"label": sizes.label[part].tolist()}
    place = [empty] * 3 if births is None else _by_axis(births.position[rows])
    columns |= {f"nucleus_{axis}_um": values for axis, values in zip("xyz", place, strict=False)}
    columns.setdefault("nucleus_z_um", empty)
    time = temperature = origin = form = empty
    if births is not None:
        time = _rows(births.time, rows)
        temperature = _rows(births.temperature, rows, shift=-ZERO_CELSIUS)
        origin = _names(births.origin, births.origin_names, rows)
        form = _names(births.form, births.form_names, rows)
    columns |= {"birth_time_s": time, "birth_temperature_C": temperature}
    columns |= {"origin": origin, "form": form}
    kind, axes = ("volume", 3) if sizes.dimension == 3 else ("area", 2)
    columns[f"{kind}_um{axes}"] = (sizes.size[part] * 10.0 ** (6 * axes)).tolist()
    columns["diameter_um"] = (sizes.diameter[part] * 1e6).tolist()
    centre = _by_axis(sizes.centre[part])
    columns |= {f"centre_{axis}_um": values for axis, values in zip("xyz", centre, strict=False)}
    columns["touches_edge"] = sizes.touches_edge[part].tolist()
    columns["pixels"] = sizes.pixels[part].tolist()
    columns[f"weight_per_mm{axes}"] = (sizes.weight[part] * 10.0 ** (-3 * axes)).tolist()
    return table_text(columns)


def conversion_table(conversion: Conversion) -> str:
    """Return the table of conversion and heat flow over time.

    Parameters
    ----------
    conversion : Conversion
        The curves of a run.

    Returns
    -------
    text : str
        CSV with the columns time_s, temperature_C, fraction_simulated, fraction_mean_field,
        heat_flow_W_per_g, heat_flow_mean_field_W_per_g.
    """
    columns = {
        "time_s": conversion.time,
        "temperature_C": conversion.temperature - ZERO_CELSIUS,
        "fraction_simulated": conversion.fraction,
        "fraction_mean_field": conversion.fraction_estimate,
        "heat_flow_W_per_g": conversion.heat_flow * 1e-3,
        "heat_flow_mean_field_W_per_g": conversion.heat_flow_estimate * 1e-3,
    }
    return table_text({name: values.tolist() for name, values in columns.items()})


def size_table(sizes: Sizes) -> str:
    """Return the table of the distribution of equivalent diameters.

    Parameters
    ----------
    sizes : Sizes
        The spherulites of an image.

    Returns
    -------
    text : str
        CSV with the columns diameter_from_um, diameter_to_um, spherulites (as counted),
        number_share, number_share_cumulative, and area_share, area_share_cumulative (or
        volume_...); shares carry the weights of the edge rule.
    """
    edges = class_edges(sizes)
    shares = sizes.histogram(edges * 1e-6) if edges.size else None
    number, size = (np.zeros(0),) * 2 if shares is None else (shares.number, shares.size)
    count = np.histogram(sizes.diameter[sizes.weight > 0] * 1e6, edges)[0] if edges.size else number
    kind = "volume" if sizes.dimension == 3 else "area"
    return table_text(
        {
            "diameter_from_um": edges[:-1].tolist(),
            "diameter_to_um": edges[1:].tolist(),
            "spherulites": count.tolist(),
            "number_share": number.tolist(),
            "number_share_cumulative": np.cumsum(number).tolist(),
            f"{kind}_share": size.tolist(),
            f"{kind}_share_cumulative": np.cumsum(size).tolist(),
        }
    )


def _by_axis(points: NDArray[np.float64]) -> list[list[object]]:
    """Return the columns x, y(, z) [µm] of points [m] in the axis order z, y, x."""
    return [(column * 1e6).tolist() for column in points.T[::-1]]


def _rows(
    values: NDArray[np.float64] | None, rows: NDArray[np.intp], *, shift: float = 0.0
) -> list[object]:
    return [None] * rows.size if values is None else (values[rows] + shift).tolist()


def _names(
    codes: NDArray[np.uint8] | None, names: tuple[str, ...], rows: NDArray[np.intp]
) -> list[object]:
    if codes is None or not names:
        return [None] * rows.size
    return [names[code] for code in codes[rows].tolist()]
