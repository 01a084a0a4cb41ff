"""Whatever stands in a settings file, the answer is settings or a list of faults."""

from __future__ import annotations

import copy
import tomllib
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spheru.config.read import settings_from_mapping
from spheru.errors import ConfigError

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.toml"))
DOCUMENTS = [tomllib.loads(path.read_text(encoding="utf-8")) for path in CONFIGS]

LEAVES = st.one_of(
    st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=8),
    st.sampled_from(["1 um", "10 K/min", "130 degC", "20 K", "1e12 1/m^3", "0 s", "-1 K", "table",
                     "fixed", "material", "surface", "none.csv", "x.toml", "periodic", "film"]),
)  # fmt: skip
KEYS = st.sampled_from(
    ["law", "value", "mark", "source", "file", "branches", "rate", "for", "until", "hold", "quench",
     "size", "pixel", "name", "growth", "sites", "x", "z", "density", "on", "steps", "factor"]
)  # fmt: skip
VALUES = st.recursive(
    LEAVES,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=3),
    max_leaves=6,
)


def places(value, place=()):
    """Yield every place in a document."""
    yield place
    if isinstance(value, dict | list):
        for key in value if isinstance(value, dict) else range(len(value)):
            yield from places(value[key], (*place, key))


@st.composite
def spoilt(draw):
    document = copy.deepcopy(draw(st.sampled_from(DOCUMENTS)))
    *parents, last = draw(st.sampled_from([place for place in places(document) if place]))
    holder = document
    for key in parents:
        holder = holder[key]
    if isinstance(holder, dict) and draw(st.booleans()):
        last = draw(KEYS)
    holder[last] = draw(VALUES)
    if draw(st.booleans()):
        document["material"] = {"name": "poly-l-lactide", draw(KEYS): draw(VALUES)}
    return document


@given(document=spoilt())
@settings(max_examples=250, deadline=None)
def test_any_document_gives_settings_or_a_list_of_faults(document):
    before = copy.deepcopy(document)
    found = []
    try:
        settings_from_mapping(document, source="spoilt")
    except ConfigError as fault:
        found = [fault]
    assert all(len(str(f).splitlines()) == 1 + len(f.faults) >= 2 for f in found)
    assert repr(document) == repr(before)


@given(
    size=st.lists(st.integers(1, 500), min_size=2, max_size=2),
    pixel=st.integers(1, 500),
    rate=st.floats(0.01, 1e4),
)
@settings(max_examples=60, deadline=None)
def test_numbers_keep_their_value_and_their_order(size, pixel, rate):
    document = copy.deepcopy(DOCUMENTS[0])
    document["sample"] = {
        "view": "section", "size": [f"{edge} um" for edge in size], "pixel": f"{pixel} um",
    }  # fmt: skip
    document["cooling"]["steps"] = [{"rate": f"{rate!r} K/min", "until": "40 degC"}]
    if pixel > min(size):
        with pytest.raises(ConfigError, match="no larger than"):
            settings_from_mapping(document)
        return
    found = settings_from_mapping(document)
    assert found.sample.size == pytest.approx([1e-6 * edge for edge in reversed(size)])
    assert found.history.duration == pytest.approx(165 / rate * 60)
