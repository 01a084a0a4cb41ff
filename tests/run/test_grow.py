"""The whole chain: what is simulated agrees with the mean field, whatever the view."""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import CapacityError, ValidityError
from spheru.run import plan as planning
from spheru.run.estimate import estimate
from spheru.run.grow import grow
from tests.run.settings import settings_with

Z95 = 1.96


def standard_error(summary, key):
    return (summary[f"{key}_ci95_high"] - summary[f"{key}_ci95_low"]) / (2 * Z95)


def sample(view, **keys):
    return {"view": view, "edges": "periodic"} | keys


WALLS = {"x": "periodic", "y": "periodic", "z": "closed"}
AGENT = {
    "law": "agent",
    "dose": "300 ppm",
    "active": 0.01,
    "activation": "20 K",
    "particle": {"d50_volume": "1 um", "spread": 1.6, "density": "2750 kg/m^3"},
}
FILM = {"thickness": "60 um", "size": ["400 um", "400 um"], "pixel": "4 um", "edges": WALLS}
VIEWS = {
    "section": {},
    "cut section": {
        "sample": sample("section", size=["800 um", "700 um"], pixel="3 um", edges="cut")
    },
    "block": {"sample": sample("block", spherulites=600, pixels_across=13)},
    "film": {"sample": sample("film", **FILM)},
    "plane": {"sample": sample("plane", thickness="5 um", spherulites=500, pixels_across=15)},
    "dosed": {"nuclei": [AGENT]},
}


@pytest.fixture(scope="module", params=VIEWS, ids=lambda name: name.replace(" ", "-"))
def result(request):
    return grow(settings_with(**VIEWS[request.param]))


def test_number_of_nuclei_agrees_with_the_mean_field(result):
    expected = result.estimate.numbers["number_density_per_mm3"]
    error = standard_error(result.summary, "number_density_per_mm3")
    assert abs(result.summary["number_density_per_mm3"] - expected) < 4 * error


def test_boundary_density_agrees_with_the_mean_field_less_the_loss_by_pixels(result):
    expected = result.estimate.numbers.get("boundary_density_per_mm")
    # the mean field of a film leaves it out
    assert (expected is None) == (result.settings.sample.view == "film")
    if expected is None:
        return
    error = standard_error(result.summary, "boundary_density_per_mm")
    ratio = result.summary["boundary_density_per_mm"] / expected
    # rows of pixels miss 1 to 2 % at 20 to 25 pixels per chord, in proportion to the pixel
    assert 1 - 0.04 - 4 * error / expected < ratio < 1 + 4 * error / expected


def test_conversion_follows_the_mean_field(result):
    curves, error = result.conversion, standard_error(result.summary, "half_time_s")
    rate = np.gradient(curves.fraction_estimate, curves.time).max()
    off = np.abs(curves.fraction - curves.fraction_estimate).max()
    # a shift of the half time by its error moves the fraction by the largest rate times it
    assert off < 4 * error * rate + 0.01


def test_peak_and_half_temperature_agree_with_the_mean_field(result):
    for key in ("peak_temperature_C", "half_temperature_C"):
        error = standard_error(result.summary, key)
        assert abs(result.summary[key] - result.estimate.numbers[key]) < 4 * error + 0.1


def test_all_of_the_map_has_crystallised(result):
    assert result.summary["fraction_transformed"] == 1.0
    assert result.image.labels.min() > 0
    assert result.summary["crystallinity"] == pytest.approx(0.55)


def test_every_spherulite_has_an_origin(result):
    assert sum(result.summary["spherulites_by_origin"].values()) == result.summary["spherulites"]


def test_same_seed_gives_the_same_map_on_one_and_two_threads_and_another_replica_does_not():
    settings = settings_with()
    one, two = (grow(settings, threads=n) for n in (1, 2))
    assert one.image.labels.tobytes() == two.image.labels.tobytes()
    assert one.image.arrival.tobytes() == two.image.arrival.tobytes()
    assert one.summary == two.summary
    other = grow(settings, replica=1)
    assert other.image.labels.tobytes() != one.image.labels.tobytes()


def test_a_quench_that_ends_too_early_leaves_melt_and_says_so():
    result = grow(
        settings_with(
            cooling={"start": "205 degC", "steps": [{"rate": "25 K/s", "until": "23 degC"}]},
            sample=sample("section", spherulites=300, pixels_across=12),
        )
    )
    summary = result.summary
    expected = result.estimate.numbers["fraction_transformed"]
    assert 0.2 < expected < 0.99
    error = standard_error(summary, "fraction_transformed")
    assert abs(summary["fraction_transformed"] - expected) < 4 * error
    assert (result.image.labels == 0).mean() == pytest.approx(1 - summary["fraction_transformed"])
    assert any("not fully crystallised" in w for w in result.warnings)


def test_clusters_crystallise_later_than_the_estimate_that_spreads_them_evenly():
    agent = AGENT | {"dose": "3000 ppm", "cluster": {"mean_number": 20, "radius": "1 um"}}
    result = grow(settings_with(nuclei=[agent]))
    expected = result.estimate.numbers["half_temperature_C"]
    error = standard_error(result.summary, "half_temperature_C")
    assert result.summary["half_temperature_C"] < expected - 4 * error
    assert any("clusters" in w for w in result.warnings)


def test_wanted_number_and_pixels_across_settle_window_and_pixel():
    expected = estimate(settings_with())
    assert expected.plan.spherulites == pytest.approx(400, rel=0.02)
    typical = math.sqrt(4 / (math.pi * expected.kinetics.bulk.section_count))
    assert expected.plan.frame.pixel == pytest.approx(typical / 15, rel=0.01)
    assert expected.settings.sample.size == expected.plan.frame.extent


@pytest.mark.parametrize(
    ("chosen", "says"),
    [
        pytest.param({"size": ["200 um", "200 um"], "pixel": "3 um"}, "few spherulites", id="few"),
        pytest.param({"spherulites": 300, "pixels_across": 6}, "coarse pixels", id="coarse"),
    ],
)
def test_doubtful_choices_are_said(chosen, says):
    warnings = estimate(settings_with(sample=sample("section", **chosen))).warnings
    assert any(says in warning for warning in warnings)


def test_a_window_is_rounded_to_whole_pixels_and_that_is_said():
    asked = sample("section", size=["1 mm", "1 mm"], pixel="7 um")
    made = estimate(settings_with(sample=asked)).plan
    assert made.frame.shape == (143, 143)
    assert any("whole pixels" in notice for notice in made.notices)


def test_records_from_memory_and_ranges_left_are_said():
    fast = {"start": "205 degC", "steps": [{"rate": "600 K/min", "until": "20 degC"}]}
    warnings = estimate(settings_with(cooling=fast)).warnings
    assert any("from memory" in w for w in warnings)
    assert any("outside the range in which the growth law was fitted" in w for w in warnings)


def test_too_large_a_block_is_refused_before_anything_is_allocated(monkeypatch):
    monkeypatch.setattr(planning, "free_memory", lambda: 10**9)
    block = sample("block", size=["2 mm"] * 3, pixel="1 um")
    with pytest.raises(CapacityError, match=r"needs 9\d\.\d GB of memory and 1\.0 GB are free"):
        grow(settings_with(sample=block))


def test_a_window_without_spherulites_is_refused_with_a_better_one():
    tiny = sample("section", size=["4 um", "4 um"], pixel="0.2 um")
    with pytest.raises(ValidityError, match="typical diameter is 43"):
        estimate(settings_with(sample=tiny))
