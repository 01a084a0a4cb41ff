"""A settings file becomes frozen settings in SI units; every fault of it is reported at once.

What a key means stands in `spheru.config.models`; what must hold between keys is checked here.
"""

from __future__ import annotations

import copy
from pathlib import Path
from typing import TYPE_CHECKING, Any

import tomli_w

from spheru.config import models
from spheru.config.cooling import build_history
from spheru.config.faults import Collecting, check, refusal
from spheru.config.models import Document
from spheru.config.records import build_record, load_record, overridden, parse_toml, record_names
from spheru.config.sample import STAND_INS, build_sample
from spheru.config.sources import build_sources, has_background
from spheru.config.tables import GROWTH_COLUMNS, NUCLEI_COLUMNS, SITE_COLUMNS, with_columns
from spheru.errors import Fault, nearest
from spheru.files import read_text
from spheru.material.site_law import melt_memory_factor
from spheru.run.settings import Induction, Settings

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.material.record import MaterialRecord
    from spheru.run.settings import Sample
    from spheru.thermal.history import History

__all__ = ["read_settings", "settings_from_mapping"]

_CONTROL = {"name", "file", "pressure", "background"}  # the rest of [material] overrides the record
_OF_A_SERIES = ("series", "aim")  # tables that `spheru.config.series` reads
_AT_TOP = 0.5  # K below the highest temperature that still counts as the hold of the melt
_RECORD, _TRACE = "material.toml", "trace.csv"


def read_settings(path: str | Path) -> Settings:
    """Read a settings file.

    Parameters
    ----------
    path : path-like
        A file in TOML; paths in it count from its folder.

    Returns
    -------
    settings : Settings
        The settings in SI units.

    Raises
    ------
    DataError
        If the file is not there, is a folder or is not UTF-8.
    ConfigError
        If it is no TOML, or its content is at fault; every fault is listed with its dotted key.
    """
    source = Path(path)
    document = parse_toml(read_text(source), str(path))
    document.setdefault("title", source.stem)
    return settings_from_mapping(document, folder=source.parent, source=str(path))


def settings_from_mapping(
    mapping: Mapping[str, Any], *, folder: str | Path = Path(), source: str = "settings"
) -> Settings:
    """Build settings from what a settings file would say.

    Parameters
    ----------
    mapping : mapping
        Tables, lists, text and numbers as in the file.
    folder : path-like, optional
        From where paths in it count.
    source : str, optional
        What the mapping is called in a message.

    Returns
    -------
    settings : Settings
        The settings in SI units.

    Raises
    ------
    ConfigError
        Every fault, with its dotted key.

    Examples
    --------
    >>> settings = settings_from_mapping({
    ...     "material": {"name": "isotactic-polypropylene-alpha"},
    ...     "cooling": {"start": "205 degC", "steps": [{"rate": "10 K/min", "until": "40 degC"}]},
    ...     "sample": {"view": "section", "size": ["1 mm", "2 mm"], "pixel": "2 um"},
    ... })
    >>> settings.sample.size, [source.name for source in settings.sources]
    ((0.002, 0.001), ['background'])
    """
    return _Reader(mapping, Path(folder), source).settings()


class _Reader:
    """One reading of one document: its parts, its attachments, its faults."""

    def __init__(self, mapping: Mapping[str, Any], folder: Path, source: str) -> None:
        self.document: dict[str, Any] = copy.deepcopy(dict(mapping))
        self.folder, self.source = folder, source
        self.faults: list[Fault] = []
        self.attachments: dict[str, bytes] = {}
        for name in _OF_A_SERIES:
            if self.document.pop(name, None) is not None:
                self._fault(name, f"makes this a series of runs; use spheru series {source}")
        self._take_in_tables()
        self.good, found = check(Document, self.document)
        self.faults.extend(found)
        self._go_on_after_faults()

    def settings(self) -> Settings:
        """Put the parts together, or raise with every fault."""
        record = self._record()
        history = self._history()
        factor = self._memory(record, history)
        sources = None
        if record is not None and "nuclei" in self.good:
            sources = build_sources(
                self.good["nuclei"],
                record,
                background=self.good["material"].background,
                memory=factor,
                faults=self.faults,
            )
        sample = self._sample()
        if self.faults or record is None or history is None or sources is None or sample is None:
            raise refusal(self.source, self.faults)
        induction = self.good["induction"]
        return Settings(
            title=self.good["title"] or "untitled",
            seed=self.good["seed"],
            material=record,
            history=history,
            sources=sources,
            sample=sample,
            induction=induction and Induction(time=induction.time, exponent=induction.exponent),
            clustered=tuple(
                found.name for found in sources if hasattr(found.placement, "mean_number")
            ),
            document=self.document,
            attachments=self.attachments,
        )

    def _fault(self, where: str, what: str) -> None:
        self.faults.append(Fault(where=where, what=what))

    def _go_on_after_faults(self) -> None:
        """Fill in what could not be read, so that the rest can still be checked."""
        cooling, sample = (self.document.get(key) for key in ("cooling", "sample"))
        if "nuclei" not in self.good and isinstance(self.document["nuclei"], list):
            self.good["nuclei"] = _items(Document, "nuclei", self.document["nuclei"])
        if "cooling" not in self.good and isinstance(cooling, dict):
            good, _ = check(models.Cooling, cooling)
            if "steps" not in good and cooling["steps"] and isinstance(cooling["steps"], list):
                good["steps"] = _items(models.Cooling, "steps", cooling["steps"])
            if good.keys() == models.Cooling.model_fields.keys():
                self.good["cooling"] = models.Cooling.model_construct(**good)
        if "sample" not in self.good and isinstance(sample, dict):
            good, _ = check(models.Sample, sample)
            misspelt = {nearest(key, STAND_INS) for key in sample if key not in STAND_INS}
            for key, value in STAND_INS.items():
                if key not in good or (key in misspelt and key not in sample):
                    good[key] = value
            if "view" in good:
                self.good["sample"] = models.Sample.model_construct(**good)

    def _take_in_tables(self) -> None:
        """Put the columns of files into the laws that name them."""
        nuclei, material = self.document.get("nuclei"), self.document.get("material")
        for k, table in enumerate(nuclei if isinstance(nuclei, list) else ()):
            self.document["nuclei"][k] = self._with_columns(table, NUCLEI_COLUMNS, f"nuclei[{k}]")
        for key, columns in (("growth", GROWTH_COLUMNS), ("sites", SITE_COLUMNS)):
            if isinstance(material, dict) and key in material:
                before = len(self.faults)
                material[key] = self._with_columns(material[key], columns, f"material.{key}")
                if len(self.faults) > before:  # go on with the record's own law
                    del material[key]

    def _with_columns(self, table: Any, columns: Mapping[str, tuple[str, str]], where: str) -> Any:
        return with_columns(table, columns, folder=self.folder, where=where, faults=self.faults)

    def _record(self) -> MaterialRecord | None:
        """Return the material with overrides and pressure in it."""
        table: models.Material | None = self.good.get("material")
        found = None if table is None else self._base(table)
        if table is None or found is None:
            return None
        base, path = found
        key = "material.name" if table.file is None else "material.file"
        changes = {k: v for k, v in self.document["material"].items() if k not in _CONTROL}
        faults: list[Fault] = []
        record = build_record(
            overridden(base, changes), folder=path.parent, faults=faults, also=sorted(_CONTROL)
        )
        self.faults.extend(_located(fault, changes, key, path.name) for fault in faults)
        if table.file is not None:
            self._attach_record(base, path)
        if record is None or table.pressure is None:
            return record
        with Collecting(self.faults, "material.pressure"):
            return record.at_pressure(table.pressure)
        return None

    def _base(self, table: models.Material) -> tuple[dict[str, Any], Path] | None:
        """Return the document of the record before any override, and its file."""
        name, file = table.name, table.file
        if name is not None and file is not None:
            self._fault(
                "material.name", "stands beside file; expected a shipped record or one of your own"
            )
        elif name is not None and name.endswith(".toml"):
            self._fault("material.name", f"expected a shipped record; write file = '{name}'")
        elif name is not None:
            with Collecting(self.faults, "material.name"):
                return load_record(name)
        elif file is not None and not file.endswith(".toml"):
            self._fault("material.file", f"expected a file that ends in .toml, got '{file}'")
        elif file is not None:
            with Collecting(self.faults, "material.file"):
                return load_record(self.folder / file)
        else:
            self._fault(
                "material.name",
                'is missing; expected a shipped record, or file = "my-grade.toml"; '
                f"shipped are {', '.join(record_names())}",
            )
        return None

    def _attach_record(self, base: dict[str, Any], path: Path) -> None:
        """Keep the user's record with the settings, whatever it was called."""
        whole = dict(base)
        for key, columns in (("growth", GROWTH_COLUMNS), ("sites", SITE_COLUMNS)):
            if key in whole:
                whole[key] = with_columns(
                    whole[key], columns, folder=path.parent, where=key, faults=[]
                )
        self.document["material"]["file"] = _RECORD
        self.attachments[_RECORD] = (
            path.read_bytes() if whole == base else tomli_w.dumps(whole).encode()
        )

    def _history(self) -> History | None:
        table: models.Cooling | None = self.good.get("cooling")
        if table is None:
            return None
        history = build_history(table, folder=self.folder, faults=self.faults)
        if history is not None and table.trace is not None:
            self.attachments[_TRACE] = (self.folder / table.trace).read_bytes()
            self.document["cooling"]["trace"] = _TRACE
        return history

    def _sample(self) -> Sample | None:
        table: models.Sample | None = self.good.get("sample")
        if table is None:
            return None
        return build_sample(table, self.good.get("nuclei", ()), faults=self.faults)

    def _memory(self, record: MaterialRecord | None, history: History | None) -> float:
        """Return the factor of the melt memory; refuse what the record's sites contain already."""
        memory: models.Memory | None = self.good.get("memory")
        if (
            record is not None
            and "nuclei" in self.good
            and has_background(self.good["nuclei"], self.good["material"].background)
        ):
            for key, effect in (("memory", "melt memory"), ("induction", "induction")):
                if self.good.get(key) is not None and effect in record.site_includes:
                    self._fault(
                        key,
                        f"the site law of '{record.name}' was fitted to data with {effect} in "
                        "them, which would count twice; leave this table out, or write "
                        "background = false in [material] and give a site law of your own",
                    )
        if memory is None or history is None:
            return 1.0
        highest = memory.melt_temperature or history.highest_temperature
        with Collecting(self.faults, "memory"):
            return melt_memory_factor(
                highest,
                _time_at_top(history) if memory.hold is None else memory.hold,
                slope=memory.slope,
                erase_temperature=memory.erase_temperature,
                time=memory.time,
            )
        return 1.0


def _items(model: type[models.Table], key: str, given: list[Any]) -> list[Any]:
    """Read the items of a list one by one; None for one at fault."""
    return [(check(model, {key: [item]})[0].get(key) or [None])[0] for item in given]


def _located(fault: Fault, changes: Mapping[str, Any], key: str, name: str) -> Fault:
    """Say whether a fault of a record stands in the settings or in the record's own file."""
    first = fault.where.replace("[", ".").split(".")[0]
    if first in changes:
        return Fault(where=f"material.{fault.where}", what=fault.what)
    if not fault.where:
        return Fault(where="material", what=fault.what)
    return Fault(where=f"{key} ({name}): {fault.where}", what=fault.what)


def _time_at_top(history: History) -> float:
    """Return how long the history stays at its highest temperature [s]."""
    low = history.highest_temperature - _AT_TOP
    return sum(s.duration for s in history.segments if s.start >= low and s.end >= low)
