from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest

from spheru.config.schema import settings_schema

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.toml"))
KINDS = {
    "object": dict, "array": list, "string": str, "integer": int, "number": (int, float),
    "boolean": bool,
}  # fmt: skip


def fits(value, shape, whole):  # noqa: PLR0911 (one line a keyword of the draft)
    """Tell whether a value fits a schema: the part of the draft that ours uses."""
    if "$ref" in shape:
        return fits(value, whole["$defs"][shape["$ref"].rsplit("/", 1)[1]], whole)
    if "anyOf" in shape:
        return any(fits(value, part, whole) for part in shape["anyOf"])
    if "oneOf" in shape:
        return sum(fits(value, part, whole) for part in shape["oneOf"]) == 1
    if "const" in shape:
        return value == shape["const"]
    if "enum" in shape:
        return value in shape["enum"]
    kind = shape["type"]
    if not isinstance(value, KINDS[kind]) or (isinstance(value, bool) and kind != "boolean"):
        return False
    if kind == "string":
        return re.search(shape.get("pattern", ""), value) is not None
    if kind == "array":
        return all(fits(item, shape["items"], whole) for item in value)
    if kind == "object":
        known = shape["properties"]
        return (
            set(shape.get("required", ())) <= set(value)
            and set(value) <= set(known)
            and all(fits(item, known[key], whole) for key, item in value.items())
        )
    return shape.get("minimum", value) <= value <= shape.get("maximum", value)


@pytest.fixture(scope="module")
def schema():
    return settings_schema()


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_shipped_settings_fit_the_schema(path, schema):
    assert fits(tomllib.loads(path.read_text(encoding="utf-8")), schema, schema)


CHANGES = [
    pytest.param(lambda d: d.update(titel="x"), id="unknown-key"),
    pytest.param(lambda d: d["sample"].update(pixel=2), id="bare-number"),
    pytest.param(lambda d: d["sample"].update(pixel="2"), id="no-unit"),
    pytest.param(lambda d: d["sample"].update(pixel="2,5 um"), id="decimal-comma"),
    pytest.param(lambda d: d["sample"].update(view="sektion"), id="view"),
    pytest.param(lambda d: d.pop("cooling"), id="missing"),
    pytest.param(lambda d: d["material"].update(nam="x"), id="unknown-override"),
    pytest.param(lambda d: d.update(nuclei=[{"law": "agnt"}]), id="law"),
    pytest.param(
        lambda d: d["cooling"]["steps"].append({"hold": "1 s", "until": "9 K"}), id="step"
    ),
]


@pytest.mark.parametrize("change", CHANGES)
def test_faults_do_not_fit_the_schema(change, schema):
    document = tomllib.loads((CONFIGS[0].parent / "first-map.toml").read_text(encoding="utf-8"))
    change(document)
    assert not fits(document, schema, schema)


def test_overrides_fit_plainly_or_with_their_source(schema):
    document = tomllib.loads((CONFIGS[0].parent / "first-map.toml").read_text(encoding="utf-8"))
    document["material"]["growth"] = {"mobility_energy": "6 kJ/mol"}
    document["material"]["body"] = {"crystallinity": {"value": 0.5, "mark": "seen", "source": "x"}}
    assert fits(document, schema, schema)


def test_every_key_has_its_meaning(schema):
    record_too = [shape for shape in schema["$defs"].values() if "properties" in shape]
    for shape in [schema, *record_too]:
        for key, value in shape["properties"].items():
            assert key == "law" or value.get("description"), (shape["title"], key)


def test_quantities_show_an_example(schema):
    pixel = schema["$defs"]["Sample"]["properties"]["pixel"]
    assert (pixel["type"], pixel["examples"]) == ("string", ["1 um"])


@pytest.mark.parametrize(
    ("text", "good"),
    [("10 K/min", True), ("-1.5e-3 1/K", True), ("5um", True), ("1e12 1/m^3", True), ("5 %", True),
     ("10", False), ("1e5", False), ("1,5 um", False), ("um", False), ("1 5", False)],
)  # fmt: skip
def test_pattern_asks_for_a_number_and_a_unit(text, good, schema):
    pattern = schema["$defs"]["Sample"]["properties"]["pixel"]["pattern"]
    assert (re.search(pattern, text) is not None) is good
