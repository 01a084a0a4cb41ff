"""Settings written back as TOML, runnable as they stand.

The document is kept as the user wrote it; only what was settled or made explicit is filled in.
"""

from __future__ import annotations

import copy
from typing import TYPE_CHECKING, Any

import tomli_w

from spheru.config.models import Document
from spheru.units import format_si, to_si, unit_of

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.run.settings import Settings

__all__ = ["resolved_document", "write_settings"]


def resolved_document(
    settings: Settings,
    size: tuple[float, ...] | None = None,
    pixel: float | None = None,
    *,
    seed: int | None = None,
) -> dict[str, Any]:
    """Return the document of settings with what was settled in it.

    Parameters
    ----------
    settings : Settings
        What was run; `settings.attachments` holds the files that the document names.
    size : tuple of float, optional
        Edges of the window [m] in the axis order z, y, x (or y, x); those of the settings if None.
    pixel : float, optional
        Edge of a pixel [m]; that of the settings if None.
    seed : int, optional
        Seed; that of the settings if None.

    Returns
    -------
    document : dict
        Title, seed, window and pixel are explicit, `spherulites` and `pixels_across` are out.

    Examples
    --------
    >>> from spheru.config.read import settings_from_mapping
    >>> settings = settings_from_mapping({
    ...     "material": {"name": "isotactic-polypropylene-alpha"},
    ...     "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "40 degC"}]},
    ...     "sample": {"view": "section", "spherulites": 1000},
    ... })
    >>> resolved_document(settings, size=(0.001, 0.002), pixel=2e-6)["sample"]
    {'view': 'section', 'size': ['2000 um', '1000 um'], 'pixel': '2 um'}
    """
    document = copy.deepcopy(dict(settings.document))
    document["title"] = settings.title
    document["seed"] = settings.seed if seed is None else seed
    sample = document["sample"]
    edges = settings.sample.size if size is None else size
    if edges is not None:
        sample.pop("spherulites", None)
        given = sample.get("size", [])
        axes = 3 if settings.sample.view == "block" else 2
        sample["size"] = [
            _written(edge, given[k] if k < len(given) else "1 um")
            for k, edge in enumerate(edges[::-1][:axes])
        ]
    edge = settings.sample.pixel if pixel is None else pixel
    if edge is not None:
        sample.pop("pixels_across", None)
        sample["pixel"] = _written(edge, sample.get("pixel", "1 um"))
    return document


def write_settings(document: Mapping[str, Any]) -> str:
    """Return a document as TOML, its tables always in the same order.

    Parameters
    ----------
    document : mapping
        Tables, lists, text and numbers of a settings file.

    Returns
    -------
    text : str
        The file's text.

    Examples
    --------
    >>> print(write_settings({"sample": {"view": "block"}, "title": "A block", "seed": 7}), end="")
    title = "A block"
    seed = 7
    <BLANKLINE>
    [sample]
    view = "block"
    """
    known = [key for key in Document.model_fields if key in document]
    rest = [key for key in document if key not in known]
    return tomli_w.dumps({key: document[key] for key in (*known, *rest)})


def _written(value: float, like: str) -> str:
    """Return a length as text: as it was given if that still holds, else in the same unit."""
    if to_si(like, "m") == value:
        return like
    return format_si(value, unit_of(like), digits=12)
