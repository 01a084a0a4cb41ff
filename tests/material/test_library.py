from typing import get_args

import pytest

from spheru.config.records import read_record
from spheru.material.growth_law import nucleation_constant
from spheru.material.record import Mark
from tests.material.reference import library, quantities, si

LIBRARY = library()
every_record = pytest.mark.parametrize("name", sorted(LIBRARY))


def test_shipped_names_are_trade_words():
    assert sorted(LIBRARY) == [
        "isotactic-polypropylene-alpha",
        "isotactic-polystyrene",
        "poly-3-hydroxybutyrate",
        "poly-ethylene-terephthalate",
        "poly-l-lactide",
    ]


@every_record
def test_every_value_says_where_it_comes_from(name):
    record = LIBRARY[name]
    assert record["name"] == name
    entries = dict(quantities(record))
    assert len(entries) >= 20
    for key, entry in entries.items():
        assert set(entry) == {"value", "mark", "source"}, key
        assert entry["mark"] in get_args(Mark), key
        assert len(entry["source"]) > 5, key


@every_record
def test_numbers_with_a_unit_are_texts_and_without_one_numbers(name):
    bare = {"crystallinity", "birefringence", "intercept", "growth_factor", "site_factor"}
    for key, entry in quantities(LIBRARY[name]):
        value = entry["value"]
        if key.endswith(("driving_force_factor", "decades")):
            continue
        values = value if isinstance(value, list) else [value]
        wanted = (int, float) if key.rsplit(".", 1)[-1] in bare else str
        assert all(isinstance(item, wanted) for item in values), key


@every_record
def test_temperatures_stand_in_their_order(name):
    record = LIBRARY[name]
    transitions, growth = record["transitions"], record["growth"]
    low, high = si(growth["fitted_range"])
    assert (
        si(growth["mobility_temperature"])
        < si(transitions["glass"])
        < low
        < high
        < si(transitions["observed_melting"])
        < si(transitions["equilibrium_melting"])
    )
    assert si(growth["mobility_temperature"]) == pytest.approx(si(transitions["glass"]) - 30.0)


@every_record
def test_record_in_memory_says_what_its_file_says(name):
    file, record = LIBRARY[name], read_record(name)
    transitions, growth = file["transitions"], file["growth"]
    assert record.t_m0 == pytest.approx(si(transitions["equilibrium_melting"]))
    assert record.t_m_observed == pytest.approx(si(transitions["observed_melting"]))
    assert record.t_g == pytest.approx(si(transitions["glass"]))
    assert record.growth.t_inf == pytest.approx(si(growth["mobility_temperature"]))
    assert record.growth.driving_force_factor is si(growth["driving_force_factor"])
    assert [(b.g0, b.kg) for b in record.growth.branches] == [
        pytest.approx((si(b["prefactor"]), si(b["constant"]))) for b in growth["branches"]
    ]
    for key in ("density_melt", "heat_of_fusion", "fold_surface_energy"):
        assert getattr(record, key) == pytest.approx(si(file["body"][key])), key
    assert set(record.provenance) == set(dict(quantities(file)))


@every_record
def test_densities_and_shares_are_those_of_polymers(name):
    body = LIBRARY[name]["body"]
    assert si(body["density_melt"]) < si(body["density_amorphous"]) < si(body["density_crystal"])
    assert 0.2 < si(body["crystallinity"]) < 0.8
    assert 5e4 < si(body["heat_of_fusion"]) < 3e5


def test_a_record_has_a_site_law_only_where_one_is_published():
    laws = {name: record.get("sites", {}).get("law") for name, record in LIBRARY.items()}
    assert laws.pop("isotactic-polypropylene-alpha") == "exponential"
    assert set(laws.values()) == {None}


@pytest.mark.parametrize(
    ("name", "branch", "n", "layer", "heat"),
    [
        ("isotactic-polystyrene", 0, 2, 5.51e-10, 9.11e7),
        ("poly-l-lactide", 0, 4, 5.17e-10, 1.111e8),
        ("poly-l-lactide", 1, 2, 5.17e-10, 1.111e8),
    ],
    ids=["polystyrene", "lactide below", "lactide above"],
)
def test_constant_follows_from_the_surface_energies_of_its_record(name, branch, n, layer, heat):
    record = LIBRARY[name]
    kg = nucleation_constant(
        n=n,
        b0=layer,
        sigma=si(record["body"]["lateral_surface_energy"]),
        sigma_e=si(record["body"]["fold_surface_energy"]),
        t_m0=si(record["transitions"]["equilibrium_melting"]),
        heat_of_fusion_volume=heat,
    )
    assert si(record["growth"]["branches"][branch]["constant"]) == pytest.approx(kg, rel=2e-3)


@pytest.mark.parametrize(
    "name",
    ["isotactic-polystyrene", "poly-ethylene-terephthalate", "poly-3-hydroxybutyrate"],
)
def test_computed_shift_with_pressure_is_that_of_clapeyron(name):
    record = LIBRARY[name]
    body, transitions = record["body"], record["transitions"]
    expansion = 1 / si(body["density_amorphous"]) - 1 / si(body["density_crystal"])
    shift = si(transitions["equilibrium_melting"]) * expansion / si(body["heat_of_fusion"])
    assert si(transitions["melting_per_pressure"]) == pytest.approx(shift, rel=5e-3)


def test_branches_of_the_lactide_meet():
    below, above = LIBRARY["poly-l-lactide"]["growth"]["branches"]
    assert below["to"]["value"] == above["from"]["value"] == "120 degC"
