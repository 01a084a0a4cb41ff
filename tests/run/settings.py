"""Settings that the tests of the chain share: small, quick, and changed key by key."""

from __future__ import annotations

import copy
from typing import Any

from spheru.config.read import settings_from_mapping

# polypropylene at 10 K/min, a periodic section
BASE: dict[str, Any] = {
    "title": "test",
    "seed": 3,
    "material": {"name": "isotactic-polypropylene-alpha"},
    "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "60 degC"}]},
    "sample": {"view": "section", "spherulites": 400, "pixels_across": 15, "edges": "periodic"},
}


def settings_with(**tables: Any):
    """Return the base settings with whole tables replaced (None takes a table out)."""
    document = copy.deepcopy(BASE)
    for name, table in tables.items():
        if table is None:
            document.pop(name)
        else:
            document[name] = table
    return settings_from_mapping(document)
