"""Material records: the shipped library, files of the user's own, and overrides.

Text becomes laws and numbers here; what the laws say stands in `spheru.material`.
"""

from __future__ import annotations

import copy
import math
import tomllib
from pathlib import Path
from typing import TYPE_CHECKING, Any

import spheru
from spheru.config.faults import Collecting, check, dotted, refusal, shown
from spheru.config.models import (
    BellTable,
    ExponentialSitesTable,
    FixedSitesTable,
    LauritzenHoffmanTable,
    Record,
    SitesTable,
)
from spheru.config.tables import GROWTH_COLUMNS, SITE_COLUMNS, with_columns
from spheru.errors import ConfigError, Fault, UnknownNameError
from spheru.files import read_text
from spheru.material.growth_law import (
    BellGrowth,
    Branch,
    LauritzenHoffmanGrowth,
    TableGrowth,
    molar_mass_factor,
)
from spheru.material.record import MaterialRecord, Provenance
from spheru.material.site_law import ExponentialSites, FixedSites, TableSites

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping, Sequence

    from spheru.config.models import DecadesTable, GrowthRateTable
    from spheru.material.growth_law import GrowthLaw
    from spheru.material.site_law import SiteLaw

__all__ = [
    "PLAIN",
    "build_record",
    "load_record",
    "overridden",
    "parse_toml",
    "read_record",
    "record_names",
]

_LIBRARY = Path(spheru.__file__).parent / "material" / "library"
PLAIN = {"name", "title", "note", "law", "includes", "file"}  # these carry no mark and no source
_QUANTITY = {"value", "mark", "source"}


def record_names() -> list[str]:
    """Return the names of the shipped records.

    Returns
    -------
    names : list of str
        In alphabetical order.

    Examples
    --------
    >>> "isotactic-polypropylene-alpha" in record_names()
    True
    """
    return sorted(path.stem for path in _LIBRARY.glob("*.toml"))


def read_record(name_or_path: str | Path) -> MaterialRecord:
    """Read a material record.

    Parameters
    ----------
    name_or_path : str or path-like
        Name of a shipped record, or a file that ends in ``.toml``.

    Returns
    -------
    record : MaterialRecord
        The record in SI units.

    Raises
    ------
    UnknownNameError
        If there is no shipped record of that name; the nearest one is named.
    DataError
        If the file cannot be read.
    ConfigError
        If the record is at fault; every fault is listed.

    Examples
    --------
    >>> round(read_record("isotactic-polypropylene-alpha").t_m0, 2)
    483.15
    """
    document, path = load_record(name_or_path)
    faults: list[Fault] = []
    record = build_record(document, folder=path.parent, faults=faults)
    if record is None or faults:
        raise refusal(str(name_or_path), faults)
    return record


def load_record(name_or_path: str | Path) -> tuple[dict[str, Any], Path]:
    """Return the document of a record and the file in which it stands.

    Parameters
    ----------
    name_or_path : str or path-like
        Name of a shipped record, or a file that ends in ``.toml``.

    Returns
    -------
    document : dict
        What the file says.
    path : Path
        The file.

    Raises
    ------
    UnknownNameError, DataError, ConfigError
        As `read_record`, the last for text that is no TOML.
    """
    path = Path(name_or_path)
    if path.suffix != ".toml":
        names = record_names()
        if str(name_or_path) not in names:
            raise UnknownNameError("material", str(name_or_path), names)
        path = _LIBRARY / f"{name_or_path}.toml"
    return parse_toml(read_text(path), str(name_or_path)), path


def parse_toml(text: str, source: str) -> dict[str, Any]:
    """Return the document that a text in TOML stands for.

    Parameters
    ----------
    text : str
        The text.
    source : str
        Name of the file, for the message.

    Returns
    -------
    document : dict
        Tables, lists, text, numbers.

    Raises
    ------
    ConfigError
        If the text is no TOML, with line and column.
    """
    try:
        return tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as fault:
        raise ConfigError(source, [Fault(where="", what=f"no valid TOML: {fault}")]) from None


def overridden(base: Mapping[str, Any], changes: Mapping[str, Any]) -> dict[str, Any]:
    """Return a record with some of its values replaced, marked as the user's.

    A table of another law replaces the whole table; other tables are merged key by key.

    Parameters
    ----------
    base : mapping
        The record's document.
    changes : mapping
        The same shape, with the changed keys only.

    Returns
    -------
    document : dict
        The merged document.

    Examples
    --------
    >>> base = {"body": {"crystallinity": {"value": 0.5, "mark": "memory", "source": "-"}}}
    >>> overridden(base, {"body": {"crystallinity": 0.6}})["body"]["crystallinity"]["mark"]
    'user'
    """
    merged = copy.deepcopy(dict(base))
    for key, value in changes.items():
        old = merged.get(key)
        if isinstance(value, dict) and not _is_quantity(value):
            kept = old if isinstance(old, dict) and not _is_quantity(old) else {}
            if value.get("law", kept.get("law")) != kept.get("law"):
                kept = {}
            merged[key] = overridden(kept, value)
        elif key in PLAIN or _is_quantity(value) or _is_tables(value):
            merged[key] = value
        else:
            merged[key] = {"value": value, "mark": "user", "source": "given with the settings"}
    return merged


def build_record(
    document: Mapping[str, Any],
    *,
    folder: Path,
    faults: list[Fault],
    also: Collection[str] = (),
) -> MaterialRecord | None:
    """Build the record that a document describes.

    Parameters
    ----------
    document : mapping
        What stands in the file: values as ``{ value, mark, source }`` or plainly.
    folder : Path
        Where files stand that the record names.
    faults : list of Fault
        Where faults are added, with dotted keys.
    also : collection of str, optional
        Names beside those of a record, for the advice on a misspelt one.

    Returns
    -------
    record : MaterialRecord or None
        None where there was a fault.
    """
    before = len(faults)
    provenance: dict[str, Provenance] = {}
    whole = dict(document)
    for key, columns in (("growth", GROWTH_COLUMNS), ("sites", SITE_COLUMNS)):
        if key in whole:
            whole[key] = with_columns(whole[key], columns, folder=folder, where=key, faults=faults)
    plain = {key: _plain(value, (key,), provenance, faults) for key, value in whole.items()}
    good, found = check(Record, plain, also=also)
    faults.extend(found)
    if len(faults) > before:
        return None
    transitions, body, uncertainty = good["transitions"], good["body"], good["uncertainty"]
    growth = sites = None
    with Collecting(faults, "growth"):
        growth = _growth(good["growth"], transitions.equilibrium_melting)
    with Collecting(faults, "sites"):
        sites = _sites(good["sites"])
    if growth is None or len(faults) > before:
        return None
    with Collecting(faults, ""):
        return MaterialRecord(
            name=good["name"],
            title=good["title"],
            note=good["note"],
            t_m0=transitions.equilibrium_melting,
            t_m_observed=transitions.observed_melting,
            t_g=transitions.glass,
            tm0_per_pressure=transitions.melting_per_pressure,
            tg_per_pressure=transitions.glass_per_pressure,
            growth=growth,
            sites=sites,
            site_decades=_pair(getattr(good["sites"], "decades", None)),
            site_includes=frozenset(getattr(good["sites"], "includes", ())),
            density_crystal=body.density_crystal,
            density_amorphous=body.density_amorphous,
            density_melt=body.density_melt,
            heat_of_fusion=body.heat_of_fusion,
            crystallinity=body.crystallinity,
            birefringence=body.birefringence,
            lateral_surface_energy=body.lateral_surface_energy,
            fold_surface_energy=body.fold_surface_energy,
            growth_factor=uncertainty.growth_factor,
            site_factor=uncertainty.site_factor,
            provenance=provenance,
        )
    return None


def _is_quantity(value: object) -> bool:
    return (
        isinstance(value, dict)
        and "value" in value
        and ("mark" in value or "source" in value or len(value) == 1)
    )


def _is_tables(value: object) -> bool:
    return isinstance(value, list) and any(isinstance(item, dict) for item in value)


def _plain(
    value: Any,
    place: tuple[str | int, ...],
    provenance: dict[str, Provenance],
    faults: list[Fault],
) -> Any:
    """Strip marks and sources off a document, and note them."""
    if _is_quantity(value):
        key = dotted(place)
        faults.extend(
            Fault(where=f"{key}.{unknown}", what="unknown key; beside 'value' stand mark, source")
            for unknown in value
            if unknown not in _QUANTITY
        )
        mark, source = value.get("mark", "user"), value.get("source", "")
        if not isinstance(mark, str) or not isinstance(source, str):
            wrong = mark if not isinstance(mark, str) else source
            faults.append(
                Fault(where=key, what=f"expected mark and source as text, got {shown(wrong)}")
            )
            return value["value"]
        with Collecting(faults, f"{key}.mark"):
            provenance[key] = Provenance(value=str(value["value"]), mark=mark, source=source)  # type: ignore[arg-type]  # refused there
        return value["value"]
    if isinstance(value, dict):
        return {k: _plain(v, (*place, k), provenance, faults) for k, v in value.items()}
    if _is_tables(value):
        return [_plain(v, (*place, k), provenance, faults) for k, v in enumerate(value)]
    if place[-1] not in PLAIN:
        provenance[dotted(place)] = Provenance(value=str(value), mark="user", source="")
    return value


def _pair(ends: Sequence[float] | None) -> tuple[float, float] | None:
    return None if ends is None else (ends[0], ends[1])


def _growth(table: LauritzenHoffmanTable | BellTable | GrowthRateTable, t_m0: float) -> GrowthLaw:
    law: GrowthLaw
    if isinstance(table, LauritzenHoffmanTable):
        law = LauritzenHoffmanGrowth(
            branches=tuple(
                Branch(
                    g0=branch.prefactor,
                    kg=branch.constant,
                    low=branch.from_ or 0.0,
                    high=math.inf if branch.to is None else branch.to,
                )
                for branch in table.branches
            ),
            u_star=table.mobility_energy,
            t_inf=table.mobility_temperature,
            t_m0=t_m0,
            driving_force_factor=table.driving_force_factor,
            fitted_range=_pair(table.fitted_range),
        )
    elif isinstance(table, BellTable):
        law = BellGrowth(
            g_max=table.maximum,
            t_max=table.maximum_temperature,
            curvature=table.curvature,
            t_inf=table.mobility_temperature,
            t_m0=t_m0,
            fitted_range=_pair(table.fitted_range),
        )
    else:
        law = TableGrowth(
            temperature=tuple(table.temperature),
            growth_rate=tuple(table.rate),
            t_inf=table.mobility_temperature,
            t_m0=t_m0,
        )
    mass = table.molar_mass
    if mass is None:
        return law
    return law.scaled(
        molar_mass_factor(mass.value, reference=mass.reference, exponent=mass.exponent)
    )


def _sites(
    table: ExponentialSitesTable | FixedSitesTable | SitesTable | DecadesTable | None,
) -> SiteLaw | None:
    if isinstance(table, ExponentialSitesTable):
        return ExponentialSites(
            a=table.slope,
            b=table.intercept,
            ceiling=table.ceiling,
            fitted_range=_pair(table.fitted_range),
        )
    if isinstance(table, FixedSitesTable):
        return FixedSites(number=table.number)
    if isinstance(table, SitesTable):
        return TableSites(undercooling=tuple(table.undercooling), number=tuple(table.number))
    return None
