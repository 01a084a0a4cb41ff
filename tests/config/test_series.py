"""The tables [series] and [aim]: what they give, and every fault of them."""

from __future__ import annotations

import pickle

import pytest

from spheru.config.read import read_settings, settings_from_mapping
from spheru.config.schema import settings_schema
from spheru.config.series import read_series, series_from_mapping
from spheru.errors import ConfigError
from tests.run.series_parts import SMALL

RATE = "cooling.steps[0].rate"


def series(*vary, **table):
    return series_from_mapping(SMALL | {"series": {"vary": list(vary), **table}})[0]


def labels(*vary, **table):
    return [point.label for point in series(*vary, **table).points()]


def test_a_product_runs_the_last_key_quickest():
    found = labels(
        {"key": RATE, "values": ["1 K/min", "2 K/min"]}, {"key": "seed", "values": [5, 6]}
    )
    assert found == [
        "rate = 1 K/min, seed = 5", "rate = 1 K/min, seed = 6",
        "rate = 2 K/min, seed = 5", "rate = 2 K/min, seed = 6",
    ]  # fmt: skip


def test_keys_in_step_go_together():
    found = labels(
        {"key": RATE, "values": ["1 K/min", "2 K/min"]},
        {"key": "seed", "values": [5, 6]},
        combine="step",
    )
    assert found == ["rate = 1 K/min, seed = 5", "rate = 2 K/min, seed = 6"]


@pytest.mark.parametrize(
    ("vary", "values"),
    [
        ({"from": "1 K/min", "to": "100 K/min", "scale": "logarithmic"},
         ["1 K/min", "10 K/min", "100 K/min"]),
        ({"from": "1 K/min", "to": "2 K/min"}, ["1 K/min", "1.5 K/min", "2 K/min"]),
        ({"from": "60 K/min", "to": "1 K/s", "steps": 2}, None),
        ({"from": "60 K/min", "to": "2 K/s"}, ["60 K/min", "90 K/min", "2 K/s"]),
    ],
    ids=["logarithmic", "linear", "no range", "two units"],
)  # fmt: skip
def test_a_range_becomes_values(vary, values):
    table = {"key": RATE, "steps": 3} | vary
    if values is None:
        with pytest.raises(ConfigError, match=r"vary\[0\]\.to: expected another value than from"):
            series(table)
    else:
        assert series(table).axes[0].values == tuple(values)


def test_a_range_of_temperatures_counts_in_degrees():
    table = {"key": "cooling.start", "from": "200 degC", "to": "210 degC", "steps": 3}
    assert series(table).axes[0].values == ("200 degC", "205 degC", "210 degC")


def test_a_range_of_plain_numbers_stays_plain():
    table = {"key": "sample.pixels_across", "from": 8, "to": 10, "steps": 3}
    assert series(table).axes[0].values == (8, 9, 10)


def test_numbers_of_a_column_are_in_the_unit_of_its_first_value():
    axis = series({"key": RATE, "values": ["30 K/min", "1 K/s"]}).axes[0]
    assert (axis.column, axis.numbers) == ("rate_K_per_min", (30.0, 60.0))


def test_names_and_tables_are_varied_as_they_stand():
    axis = series({"key": "sample.edges", "values": ["cut", {"x": "cut"}]}).axes[0]
    assert axis.numbers is None
    assert [axis.shown(k) for k in (0, 1)] == ["cut", '{"x": "cut"}']


def test_the_maker_travels_to_other_processes(tmp_path):
    (tmp_path / "t.csv").write_text("time_s,temperature_C\n0,205\n800,60\n")
    document = SMALL | {
        "cooling": {"trace": "t.csv"},
        "series": {"vary": [{"key": "seed", "values": [1, 2]}]},
    }
    found, make = series_from_mapping(document, folder=tmp_path)
    settings = pickle.loads(pickle.dumps(make))(next(found.points()).document)  # noqa: S301 (our own)
    assert settings.history.duration == 800.0


# key, what is wrong with it
FAULTS = {
    "unknown key": (
        {"vary": [{"key": "cooling.steps[0].rtae", "values": ["1 K/min"]}]},
        "cooling.steps[0].rtae: unknown key; did you mean 'rate'?",
    ),
    "key that leads nowhere": (
        {"vary": [{"key": "cooling.stps[0].rate", "values": ["1 K/min"]}]},
        ("series.vary[0].key: 'cooling.stps[0].rate' leads nowhere in this file; "
        "did you mean 'cooling.steps[0].rate'?"),
    ),
    "empty list": (
        {"vary": [{"key": RATE, "values": []}]},
        "series.vary[0].values: expected a list of at least 1, got 0",
    ),
    "nothing varied": ({"vary": []}, "series.vary: expected a list of at least 1, got 0"),
    "a key twice": (
        {"vary": [{"key": RATE, "values": ["1 K/min"]}, {"key": RATE, "values": ["2 K/min"]}]},
        ("series.vary[1].key: 'cooling.steps[0].rate' is varied already in series.vary[0]; "
        "leave one out"),
    ),
    "a value twice": (
        {"vary": [{"key": RATE, "values": ["1 K/min", "1 K/min"]}]},
        "series.vary[0].values[1]: '1 K/min' is there already; for more runs of it write replicas",
    ),
    "wrong unit": (
        {"vary": [{"key": RATE, "values": ["1 K/min", "2 K"]}]},
        "series.vary[0].values[1]: expected a quantity in K/min like '1 K/min', got '2 K'",
    ),
    "a bad value": (
        {"vary": [{"key": "seed", "values": [1, -1]}]},
        "seed: expected a number of at least 0, got -1 (with seed = -1)",
    ),
    "values and a range": (
        {"vary": [{"key": RATE, "values": ["1 K/min"], "to": "2 K/min"}]},
        "series.vary[0].to: stands beside values; leave one of them out",
    ),
    "half a range": (
        {"vary": [{"key": RATE, "from": "1 K/min", "to": "2 K/min"}]},
        "series.vary[0].steps: is missing; a range needs steps",
    ),
    "no values": (
        {"vary": [{"key": RATE}]},
        "series.vary[0].values: is missing; expected values = [...], or from, to and steps",
    ),
    "logarithm of zero": (
        {"vary": [{"key": RATE, "from": "0 K/min", "to": "2 K/min", "steps": 3,
                   "scale": "logarithmic"}]},
        ("series.vary[0].from: expected a value above 0, since the scale is logarithmic, "
        "got '0 K/min'"),
    ),
    "unequal steps": (
        {"combine": "step", "vary": [{"key": RATE, "values": ["1 K/min"]},
                                     {"key": "seed", "values": [1, 2]}]},
        "series.combine: expected lists of equal length to go in step, got rate 1, seed 2 values",
    ),
    "unknown table key": (
        {"vary": [{"key": RATE, "values": ["1 K/min"]}], "replicates": 3},
        "series.replicates: unknown key; did you mean 'replicas'?",
    ),
    "an interval of nothing": (
        {"vary": [{"key": RATE, "values": ["1 K/min"]}], "diameter_within": "0 %"},
        "series.diameter_within: expected a share above 0 such as '2 %'",
    ),
    "a title": (
        {"vary": [{"key": "title", "values": ["a"]}]},
        "series.vary[0].key: a title is not varied",
    ),
}  # fmt: skip


@pytest.mark.parametrize(("table", "message"), FAULTS.values(), ids=FAULTS)
def test_a_fault_of_a_series_is_named(table, message):
    with pytest.raises(ConfigError) as refused:
        series_from_mapping(SMALL | {"series": table})
    assert message in [str(fault) for fault in refused.value.faults]


AIM = {"key": RATE, "from": "1 K/min", "to": "9 K/min", "quantity": "half time", "target": "3 s"}
AIM_FAULTS = {
    "unit of the target": ({"target": "3 um"}, "aim.target: expected a time like '5 min'"),
    "an unknown quantity": (
        {"quantity": "half tim"}, "aim.quantity: expected one of mean diameter, half time, peak"
    ),
    "an empty range": ({"to": "1 K/min"}, "aim.to: expected a value above 1 K/min, got '1 K/min'"),
    "mixed ends": ({"to": 9}, "aim.to: expected a number or a quantity like from, got 9"),
    "units of the ends": ({"to": "9 um"}, "aim.to: expected a quantity in K/min like"),
    "sure": ({"confidence": "100 %"}, "aim.confidence: expected a share between 0 and 1"),
    "too few replicas": ({"replicas": 2}, "aim.replicas: expected a number of at least 3, got 2"),
    "logarithm": (
        {"from": "-1 K/min", "scale": "logarithmic"}, "aim.from: expected a value above 0"
    ),
    "a range beyond what the key takes": (
        {"key": "sample.pixels_across", "from": 0.5, "to": 9},
        "sample.pixels_across: expected a number of at least 1, got 0.5",
    ),
}  # fmt: skip


@pytest.mark.parametrize(("change", "message"), AIM_FAULTS.values(), ids=AIM_FAULTS)
def test_a_fault_of_an_aim_is_named(change, message):
    with pytest.raises(ConfigError) as refused:
        series_from_mapping(SMALL | {"aim": AIM | change})
    assert any(str(fault).startswith(message) for fault in refused.value.faults)


def test_faults_of_settings_and_series_come_together():
    document = SMALL | {
        "sample": SMALL["sample"] | {"view": "sektion"},
        "series": {"vary": [{"key": RATE, "values": []}]},
    }
    with pytest.raises(ConfigError) as refused:
        series_from_mapping(document)
    assert [fault.where for fault in refused.value.faults] == [
        "series.vary[0].values", "sample.view",
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("tables", "message"),
    [
        ({}, "series: is missing; expected a table [series] or [aim]"),
        ({"aim": AIM, "series": {"vary": [{"key": RATE, "values": ["1 K/min"]}]}},
         "aim: stands beside [series]; give each a file of its own"),
    ],
    ids=["neither", "both"],
)  # fmt: skip
def test_a_file_is_either_a_series_or_an_aim(tables, message):
    with pytest.raises(ConfigError) as refused:
        series_from_mapping(SMALL | tables)
    assert any(str(fault).startswith(message) for fault in refused.value.faults)


@pytest.mark.parametrize("name", ["series", "aim"])
def test_a_single_run_refuses_a_series_and_points_to_its_command(name):
    with pytest.raises(ConfigError, match=rf"{name}: .*use spheru series settings"):
        settings_from_mapping(SMALL | {name: {}})


def test_a_file_is_read_with_paths_from_its_own_folder(tmp_path):
    path = tmp_path / "s.toml"
    path.write_text(
        'material = { name = "isotactic-polypropylene-alpha" }\n'
        'cooling = { trace = "t.csv" }\nsample = { view = "section", spherulites = 60 }\n'
        "[[series.vary]]\nkey = 'seed'\nvalues = [1, 2]\n"
    )
    (tmp_path / "t.csv").write_text("time_s,temperature_C\n0,205\n800,60\n")
    found, make = read_series(path)
    assert found.title == "s"
    assert make(next(found.points()).document).history.duration == 800.0
    with pytest.raises(ConfigError, match="spheru series"):
        read_settings(path)


def test_the_schema_knows_series_and_aim():
    schema = settings_schema()
    vary = schema["$defs"]["Vary"]["properties"]
    assert {"series", "aim"} <= schema["properties"].keys()
    assert {"key", "values", "from", "to", "steps", "scale"} == vary.keys()
    assert schema["required"] == ["material", "cooling", "sample"]
