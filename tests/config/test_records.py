from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from spheru.config.records import load_record, overridden, read_record, record_names
from spheru.errors import ConfigError, DataError, UnknownNameError
from spheru.material.growth_law import BellGrowth, TableGrowth, molar_mass_factor
from spheru.material.site_law import FixedSites, TableSites

# A record as a user would write it: plain values, no marks.
PLAIN = """
name = "our-grade"
title = "Our grade"
[transitions]
equilibrium_melting = "210 degC"
observed_melting = "165 degC"
glass = "-4 degC"
[growth]
law = "bell"
mobility_temperature = "-34 degC"
maximum = "2.97 um/s"
maximum_temperature = "90 degC"
curvature = "1.536e-3 1/K^2"
[sites]
law = "fixed"
number = "1e12 1/m^3"
[body]
density_crystal = "0.936 g/cm^3"
density_amorphous = "855 kg/m^3"
density_melt = "765 kg/m^3"
heat_of_fusion = "207 J/g"
crystallinity = 0.5
[uncertainty]
growth_factor = 1.3
site_factor = 3
"""


@pytest.fixture
def write(tmp_path):
    def make(text):
        path = tmp_path / "our-grade.toml"
        path.write_text(text)
        return path

    return make


def test_plain_record_is_marked_as_the_users(write):
    record = read_record(write(PLAIN))
    assert record.growth == BellGrowth(
        g_max=2.97e-6, t_max=363.15, curvature=1.536e-3, t_inf=239.15, t_m0=483.15
    )
    assert record.sites == FixedSites(number=1e12)
    assert (record.density_crystal, record.heat_of_fusion) == (936.0, 207e3)
    assert {source.mark for source in record.provenance.values()} == {"user"}
    assert record.provenance["growth.maximum"].value == "2.97 um/s"


@pytest.mark.parametrize("name", record_names())
def test_every_shipped_record_reads_and_marks_every_value(name):
    record = read_record(name)
    assert record.name == name
    marks = {source.mark for source in record.provenance.values()}
    assert "user" not in marks
    assert all(source.source for source in record.provenance.values())


@pytest.mark.parametrize("name", record_names())
def test_shipped_numbers_are_those_of_the_text(name):
    document, _ = load_record(name)
    record = read_record(name)
    for key in ("crystallinity", "birefringence"):
        if key in document["body"]:
            assert getattr(record, key) == document["body"][key]["value"]


def test_growth_table_comes_from_a_file_beside_the_record(write, tmp_path):
    (tmp_path / "growth.csv").write_text("temperature_C,growth_rate [um/min]\n120,24\n130,6\n")
    law = 'law = "table"\nmobility_temperature = "-34 degC"\nfile = "growth.csv"'
    start, end = PLAIN.index('law = "bell"'), PLAIN.index("[sites]")
    record = read_record(write(f"{PLAIN[:start]}{law}\n{PLAIN[end:]}"))
    assert isinstance(record.growth, TableGrowth)
    assert record.growth.temperature == (393.15, 403.15)
    assert record.growth.growth_rate == pytest.approx((4e-7, 1e-7))


def test_site_table_comes_from_lists(write):
    text = PLAIN.replace('law = "fixed"\nnumber = "1e12 1/m^3"', (
        'law = "table"\nundercooling = ["60 K", "80 K"]\nnumber = ["1e10 1/m^3", "1e12 1/m^3"]'
    ))  # fmt: skip
    assert read_record(write(text)).sites == TableSites(
        undercooling=(60.0, 80.0), number=(1e10, 1e12)
    )


def test_molar_mass_scales_the_growth(write):
    text = PLAIN.replace(
        "[sites]",
        '[growth.molar_mass]\nvalue = "400 kg/mol"\nreference = "100 kg/mol"\nexponent = 0.5\n'
        "[sites]",
    )
    factor = molar_mass_factor(400.0, reference=100.0, exponent=0.5)
    assert read_record(write(text)).growth.g_max == pytest.approx(2.97e-6 * factor)


def test_override_keeps_what_is_not_named():
    base, _ = load_record("isotactic-polypropylene-alpha")
    merged = overridden(base, {"sites": {"intercept": 17.0}})
    assert merged["sites"]["intercept"] == {
        "value": 17.0, "mark": "user", "source": "given with the settings",
    }  # fmt: skip
    assert merged["sites"]["slope"] == base["sites"]["slope"]
    assert base["sites"]["intercept"]["value"] == 15.1  # the record itself is untouched


MAXIMUM = '"2.97 um/s"'
FAULTS = [
    pytest.param('"165 degC"', '"165"', "transitions.observed_melting: expected a temp", id="bare"),
    pytest.param(
        "glass =", "glas =", "transitions.glas: unknown key; did you mean 'glass'?", id="key"
    ),
    pytest.param(
        "crystallinity = 0.5", "", "body.crystallinity: is missing; expected a number", id="missing"
    ),
    pytest.param(
        "crystallinity = 0.5",
        "crystallinity = 50",
        "body.crystallinity: expected a number of at most 1, got 50",
        id="percent",
    ),
    pytest.param(
        'law = "bell"',
        'law = "bel"',
        "growth.law: expected one of lauritzen-hoffman, bell, table, got 'bel'; did you mean",
        id="law",
    ),
    pytest.param(
        MAXIMUM,
        f'{{ value = {MAXIMUM}, mark = "sen", source = "" }}',
        "growth.maximum.mark: unknown mark 'sen'; did you mean 'seen'?",
        id="mark",
    ),
    pytest.param(
        MAXIMUM,
        f'{{ value = {MAXIMUM}, mark = "seen", sorce = "" }}',
        "growth.maximum.sorce: unknown key",
        id="source",
    ),
    pytest.param(
        MAXIMUM,
        f"{{ value = {MAXIMUM}, mark = 5 }}",
        "growth.maximum: expected mark and source as text, got 5",
        id="mark-as-number",
    ),
    pytest.param(
        '"90 degC"', '"300 degC"', "growth: bell growth: expected the maximum between", id="range"
    ),
    pytest.param(
        '"165 degC"',
        '"230 degC"',
        "record our-grade: expected glass transition < observed",
        id="order",
    ),
    pytest.param(
        "site_factor = 3",
        "site_factor = 0.3",
        "uncertainty.site_factor: expected a number of at least 1, got 0.3",
        id="factor",
    ),
]


@pytest.mark.parametrize(("old", "new", "message"), FAULTS)
def test_fault_of_a_record_names_the_key(write, old, new, message):
    assert old in PLAIN
    with pytest.raises(ConfigError) as fault:
        read_record(write(PLAIN.replace(old, new)))
    assert len(fault.value.faults) == 1
    assert str(fault.value.faults[0]).startswith(message)


def test_unknown_record_is_answered_with_the_nearest_and_all():
    with pytest.raises(UnknownNameError, match="did you mean 'poly-l-lactide'") as fault:
        read_record("poly-lactide")
    assert fault.value.known == tuple(record_names())


def test_missing_file_is_one_line(tmp_path):
    with pytest.raises(DataError, match="there is no such file"):
        read_record(tmp_path / "none.toml")


def test_text_that_is_no_toml_names_its_line(write):
    with pytest.raises(ConfigError, match=r"no valid TOML: .*line 2"):
        read_record(write('name = "a"\ntitle\n'))


def test_library_holds_what_its_names_say():
    for name in record_names():
        path = load_record(name)[1]
        assert tomllib.loads(Path(path).read_text(encoding="utf-8"))["name"] == name
