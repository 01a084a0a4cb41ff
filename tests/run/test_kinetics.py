"""The course of crystallisation by mean field, from settings."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from spheru.errors import MeltingError, NoCrystallisationError
from spheru.run.kinetics import kinetics
from tests.run.settings import settings_with


def cooling(*steps, start="205 degC"):
    return {"start": start, "steps": list(steps)}


FIXED = [{"law": "fixed", "density": "1e12 1/m^3"}]
NO_BACKGROUND = {"name": "isotactic-polypropylene-alpha", "background": False}


@pytest.mark.parametrize(
    ("celsius", "half_time"),
    # F5: N = exp(0.156 dT + 15.1), t = (3 ln 2/(4 pi N G^3))^(1/3), worked out from the constants
    # of Koscher & Fulchiron, Polymer 43 (2002) 6931 (memory): 88.4, 499 and 4597 s
    [(120, 88.4), (130, 499.0), (140, 4597.0)],
)
def test_isothermal_half_time_follows_from_number_and_rate(celsius, half_time):
    steps = ({"quench": f"{celsius} degC", "time_constant": "10 ms", "for": "0.3 s"},)
    settings = settings_with(cooling=cooling(*steps, {"hold": "40000 s"}))
    found = kinetics(settings)
    start = found.clock.time_at(found.bulk.grown_length_at(0.5)) - 0.3
    assert_allclose(float(start), half_time, rtol=3e-3)


def test_a_long_hold_is_resolved_where_everything_happens():
    steps = ({"quench": "110 degC", "time_constant": "10 ms", "for": "0.3 s"}, {"hold": "1000 h"})
    found = kinetics(settings_with(cooling=cooling(*steps)))
    assert np.diff(found.fraction).max() < 0.01
    left = 1 - found.fraction[(found.fraction > 0.5) & (found.fraction < 1 - 1e-5)]
    assert (left[:-1] / left[1:]).max() < 2
    density = math.exp(0.156 * (483.15 - 383.15) + 15.1)
    assert_allclose(found.bulk.number_density, density, rtol=1e-3)
    assert_allclose(found.bulk.boundary_density, 2.910436 * density ** (1 / 3), rtol=1e-3)


def test_plane_counts_nuclei_over_the_thickness():
    sample = {
        "view": "plane", "thickness": "5 um", "spherulites": 400, "pixels_across": 15,
        "edges": "periodic",
    }  # fmt: skip
    steps = ({"quench": "125 degC", "time_constant": "10 ms", "for": "0.3 s"}, {"hold": "5 h"})
    found = kinetics(
        settings_with(material=NO_BACKGROUND, nuclei=FIXED, cooling=cooling(*steps), sample=sample)
    )
    assert_allclose(found.bulk.number_density, 1e12 * 5e-6, rtol=1e-9)
    assert_allclose(found.bulk.boundary_density, 2 * math.sqrt(5e6), rtol=1e-6)


def test_induction_holds_everything_back_until_it_has_passed():
    steps = ({"quench": "120 degC", "time_constant": "10 ms", "for": "0.3 s"}, {"hold": "10 h"})
    free = kinetics(settings_with(cooling=cooling(*steps)))
    # the undercooling at 120 degC is 90 K: 2.7e8 s/90^3 = 370 s
    held = kinetics(
        settings_with(cooling=cooling(*steps), induction={"time": "2.7e8 s", "exponent": 3})
    )
    half_free = float(free.clock.time_at(free.bulk.grown_length_at(0.5)))
    half_held = float(held.clock.time_at(held.bulk.grown_length_at(0.5)))
    assert_allclose(half_held - half_free, 2.7e8 / 90.0**3, rtol=2e-3)
    early = held.clock.time < 360.0
    assert held.fraction[early].max() == 0.0


def test_scaled_growth_moves_only_the_kinetics_and_scaled_sites_the_count():
    found = kinetics(settings_with())
    faster = found.scaled(growth=2.0, sites=1.0)
    assert faster.bulk.number_density < found.bulk.number_density
    more = found.scaled(growth=1.0, sites=2.0)
    assert more.bulk.number_density > found.bulk.number_density
    assert more.fraction[-1] == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("steps", "start", "says"),
    [
        pytest.param(({"hold": "10 min"},), "215 degC", "never crystallises", id="above melting"),
        pytest.param(({"hold": "10 min"},), "200 degC", "less than a millionth", id="too hot"),
        pytest.param(({"hold": "10 s"},), "-40 degC", "less than a millionth", id="glass"),
        pytest.param(
            ({"rate": "5000 K/s", "until": "-60 degC"},), "205 degC", "less than a millionth",
            id="too fast",
        ),
    ],
)  # fmt: skip
def test_a_history_without_crystallisation_names_the_window(steps, start, says):
    with pytest.raises(NoCrystallisationError, match=says) as caught:
        kinetics(settings_with(cooling=cooling(*steps, start=start)))
    assert "in practice between" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_reheating_above_the_observed_melting_temperature_is_refused_with_the_time():
    steps = ({"rate": "10 K/min", "until": "110 degC"}, {"rate": "-10 K/min", "until": "180 degC"})
    with pytest.raises(MeltingError, match=r"at \S+ s .* above the observed melting"):
        kinetics(settings_with(cooling=cooling(*steps)))


def test_reheating_below_the_observed_melting_temperature_is_allowed():
    steps = ({"rate": "10 K/min", "until": "110 degC"}, {"rate": "-10 K/min", "until": "150 degC"})
    assert kinetics(settings_with(cooling=cooling(*steps))).fraction[-1] > 0.5


def test_faces_alone_fill_a_film():
    sample = {
        "view": "film", "thickness": "40 um", "size": ["200 um", "200 um"], "pixel": "2 um",
        "edges": {"x": "periodic", "y": "periodic", "z": "closed"},
    }  # fmt: skip
    nuclei = [{"law": "surface", "on": ["z-low", "z-high"], "density": "1e9 1/m^2"}]
    found = kinetics(settings_with(material=NO_BACKGROUND, nuclei=nuclei, sample=sample))
    assert found.bulk.number_density == 0.0
    assert found.film.number_per_area == pytest.approx(2e9, rel=1e-6)
    assert found.fraction[-1] == pytest.approx(1.0, abs=1e-6)
