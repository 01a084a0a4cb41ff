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
from typing import Any, Final

__version__ = "0.1.0"

_HOME: Final = {
    "Births": "spheru.births",
    "CapacityError": "spheru.errors",
    "ConfigError": "spheru.errors",
    "Conversion": "spheru.run.result",
    "DataError": "spheru.errors",
    "Estimate": "spheru.run.estimate",
    "Fault": "spheru.errors",
    "FolderError": "spheru.errors",
    "Frame": "spheru.image.frame",
    "InputFault": "spheru.errors",
    "LabelImage": "spheru.image.label_image",
    "LabelStore": "spheru.output.store",
    "MaterialRecord": "spheru.material.record",
    "MeasuredField": "spheru.run.measure",
    "Measurement": "spheru.run.measure",
    "MeltingError": "spheru.errors",
    "MissingExtraError": "spheru.errors",
    "NoCrystallisationError": "spheru.errors",
    "Result": "spheru.run.result",
    "RunError": "spheru.errors",
    "Settings": "spheru.run.settings",
    "Sizes": "spheru.measure.sizes",
    "SpheruError": "spheru.errors",
    "Statistic": "spheru.measure.intervals",
    "UnitError": "spheru.errors",
    "UnknownNameError": "spheru.errors",
    "ValidityError": "spheru.errors",
    "estimate": "spheru.run.estimate",
    "grow": "spheru.run.grow",
    "measure_images": "spheru.run.measure",
    "measure_sizes": "spheru.measure.sizes",
    "read_labels": "spheru.image.read",
    "read_record": "spheru.config.records",
    "read_settings": "spheru.config.read",
    "record_names": "spheru.config.records",
    "save_measurement": "spheru.output.measurement",
    "save_run": "spheru.output.folder",
    "settings_from_mapping": "spheru.config.read",
    "settings_schema": "spheru.config.schema",
    "store_run": "spheru.output.unfinished",
    "tessellate": "spheru.growth.exact",
    "write_labels": "spheru.image.formats",
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
