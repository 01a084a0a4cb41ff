"""The table ``[sample]`` becomes what is looked at: view, window, pixel, edges."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from spheru.config.models import Edges, SurfaceNuclei
from spheru.errors import Fault
from spheru.run.settings import Sample
from spheru.units import format_si

if TYPE_CHECKING:
    from collections.abc import Sequence

    from spheru.config import models
    from spheru.run.settings import Edge

__all__ = ["STAND_INS", "build_sample"]

# Harmless values for keys at fault, so that the other keys can still be checked.
STAND_INS: dict[str, Any] = {
    "size": [1.0, 1.0],
    "spherulites": 1,
    "pixel": 1e-12,
    "pixels_across": 1.0,
    "edges": "periodic",
    "thickness": 1.0,
    "sight": None,
}
_PIXELS_ACROSS = 25.0  # where neither pixel nor pixels_across is given


def build_sample(
    table: models.Sample, nuclei: Sequence[models.Table | None], *, faults: list[Fault]
) -> Sample | None:
    """Build the sample that a table describes.

    Parameters
    ----------
    table : Sample
        What the file says, x before y before z.
    nuclei : sequence of Table
        The tables of nuclei; those on faces need faces.
    faults : list of Fault
        Where faults are added.

    Returns
    -------
    sample : Sample or None
        The sample in the axis order z, y, x; None where there was a fault.
    """
    edges = _edges(table)
    found = [*_window(table), *_layer(table), *_across(table), *_faces(table, nuclei, edges)]
    faults.extend(Fault(where=where, what=what) for where, what in found)
    if found:
        return None
    size = None if table.size is None else tuple(reversed(table.size))
    if size is not None and table.view == "film" and table.thickness is not None:
        size = (table.thickness, *size)
    return Sample(
        view=table.view,
        size=size,
        spherulites=table.spherulites,
        pixel=table.pixel,
        pixels_across=table.pixels_across or (None if table.pixel else _PIXELS_ACROSS),
        edges=edges,
        thickness=table.thickness,
        sight=table.sight or "mid",
    )


_Found = list[tuple[str, str]]


def _window(table: models.Sample) -> _Found:
    found = []
    if (table.size is None) == (table.spherulites is None):
        what = 'is missing; expected size = ["1 mm", "1 mm"] or spherulites = 1000'
        if table.size is not None:
            what = "stands beside spherulites; the window follows from one of them"
        found.append(("sample.size", what))
    if table.pixel is not None and table.pixels_across is not None:
        found.append(("sample.pixel", "stands beside pixels_across; leave one of them out"))
    walls: dict[str, float] = {}
    if table.size is not None:
        axes = "xyz" if table.view == "block" else "xy"
        if len(table.size) != len(axes):
            why = "; the thickness stands for z" if table.view == "film" else ""
            what = f"expected {len(axes)} lengths ({', '.join(axes)}) for a {table.view}, got "
            found.append(("sample.size", f"{what}{len(table.size)}{why}"))
        walls = {f"size[{k}]": edge for k, edge in enumerate(table.size)}
    if table.view == "film" and table.thickness is not None:
        walls["thickness"] = table.thickness
    if table.pixel is not None:
        what = f"got {format_si(table.pixel, 'um')}; expected a pixel no larger than sample."
        found += [
            ("sample.pixel", f"{what}{key} of {format_si(edge, 'um')}")
            for key, edge in walls.items()
            if table.pixel > edge
        ]
    return found


def _layer(table: models.Sample) -> _Found:
    found = []
    layer = table.view in ("film", "plane")
    if layer and table.thickness is None:
        found.append(("sample.thickness", f"is missing; a {table.view} needs one like '30 um'"))
    if not layer and table.thickness is not None:
        found.append(
            ("sample.thickness", f'a {table.view} has none; leave it out, or write view = "film"')
        )
    if table.sight is not None and table.view != "film":
        found.append(("sample.sight", f"belongs to a film, not to a {table.view}; leave it out"))
    return found


def _edges(table: models.Sample) -> tuple[Edge, ...]:
    """Return the edges in the order of the axes of the picture."""
    given = table.edges
    if not isinstance(given, Edges):
        given = Edges(x=given, y=given, z=given)
    if table.view == "film":
        return ("closed", given.y, given.x)
    if table.view == "block":
        return (given.z or "periodic", given.y, given.x)
    return (given.y, given.x)


def _across(table: models.Sample) -> _Found:
    """Check what is said of the edges across z."""
    across = table.edges.z if isinstance(table.edges, Edges) else None
    if across is None or table.view == "block":
        return []
    if table.view != "film":
        return [("sample.edges.z", f"a {table.view} has the axes x and y; leave z out")]
    if across != "closed":
        return [("sample.edges.z", f"a film is closed across z, got '{across}'; leave z out")]
    return []


def _faces(
    table: models.Sample, nuclei: Sequence[models.Table | None], edges: tuple[Edge, ...]
) -> _Found:
    places = [f"nuclei[{k}].on" for k, one in enumerate(nuclei) if isinstance(one, SurfaceNuclei)]
    if not places or table.view == "film":
        return []
    if table.view == "block" and edges[0] == "closed":
        if table.size is not None:
            return []
        return [("sample.size", "is missing; nuclei on the faces of a block need a given size")]
    what = (
        'nuclei on faces need view = "film", or "block" with edges = { z = "closed" }; '
        f"a {table.view} has no wall across z here"
    )
    return [(place, what) for place in places]
