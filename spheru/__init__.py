"""Monte Carlo maps of spherulites in semi-crystalline polymers.

How the data flow, room by room::

    material + thermal -> nuclei -> growth -> image -> measure -> run -> output
    (what, how it cools)  (births)  (labels)           (numbers)         (files)

`theory` predicts the same numbers without a random number; `config` turns a settings file into
frozen settings in SI units. The public names are imported when they are first used.
"""

from __future__ import annotations

import importlib
import logging
from typing import TYPE_CHECKING, Any, Final

__version__ = "0.1.0"

_HOME: Final = {
    "Births": "spheru.births",
    "Frame": "spheru.image.frame",
    "LabelImage": "spheru.image.label_image",
    "SpheruError": "spheru.errors",
}

__all__ = ["__version__", *_HOME]  # noqa: PLE0604 (all are strings)

logging.getLogger("spheru").addHandler(logging.NullHandler())


def __getattr__(name: str) -> Any:
    home = _HOME.get(name)
    if home is None:
        raise AttributeError(f"module 'spheru' has no attribute '{name}'")
    return getattr(importlib.import_module(home), name)


def __dir__() -> list[str]:
    return sorted(__all__)
