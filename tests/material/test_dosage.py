import math

import numpy as np
import pytest
from scipy.stats import lognorm

from spheru.errors import ValidityError
from spheru.material.dosage import active_sites, dissolved_sites, particle_density
from tests.material.reference import sampled_particle_density

TALC = {"particle_density": 2750.0, "polymer_density": 905.0}


@pytest.mark.parametrize(
    ("diameter", "density", "particles"),
    [(1e-6, 2750.0, 6.29e14), (5e-6, 2750.0, 5.03e12), (1e-7, 1000.0, 1.73e18)],
    ids=["talc 1 um", "talc 5 um", "0.1 um"],
)
@pytest.mark.parametrize("basis", ["volume", "number"])
def test_equal_spheres_are_counted_as_by_hand(diameter, density, particles, basis):
    found = particle_density(
        1e-3, d50=diameter, spread=1.0, basis=basis, particle_density=density, polymer_density=905.0
    )
    assert float(f"{found:.2e}") == particles


@pytest.mark.parametrize(
    ("number", "diameter"),
    [(6.29e14, 14.5e-6), (5.03e12, 72e-6), (1.73e18, 1.0e-6)],
    ids=["1 um", "5 um", "0.1 um"],
)
def test_one_spherulite_a_particle_gives_the_mean_size(number, diameter):
    assert (6 / (math.pi * number)) ** (1 / 3) == pytest.approx(diameter, rel=0.035)


def test_number_median_counts_like_a_weighed_sample():
    rng = np.random.default_rng(3)
    spread = 1.4
    diameters = np.exp(rng.normal(math.log(2e-6), math.log(spread), 400_000))
    sampled = sampled_particle_density(1e-3, diameters, *TALC.values())
    exact = particle_density(1e-3, d50=2e-6, spread=spread, basis="number", **TALC)
    error = np.std(diameters**3) / np.mean(diameters**3) / math.sqrt(diameters.size)
    assert sampled == pytest.approx(exact, rel=4 * error)


def test_volume_median_halves_the_volume_of_a_sample_and_counts_the_same():
    rng = np.random.default_rng(4)
    spread = 1.4
    diameters = np.sort(np.exp(rng.normal(math.log(2e-6), math.log(spread), 400_000)))
    volume = np.cumsum(diameters**3)
    median = float(diameters[np.searchsorted(volume, volume[-1] / 2)])
    by_volume = particle_density(1e-3, d50=median, spread=spread, basis="volume", **TALC)
    by_number = particle_density(1e-3, d50=2e-6, spread=spread, basis="number", **TALC)
    assert by_volume == pytest.approx(by_number, rel=0.03)


def test_moments_agree_with_scipy():
    mean_cube = lognorm(s=math.log(1.8), scale=3e-6).moment(3)
    expected = 2e-3 * 905.0 / (2750.0 * math.pi / 6 * mean_cube)
    found = particle_density(2e-3, d50=3e-6, spread=1.8, basis="number", **TALC)
    assert found == pytest.approx(expected, rel=1e-9)


def test_no_dose_gives_no_particle():
    assert particle_density(0.0, d50=1e-6, spread=1.5, basis="volume", **TALC) == 0.0
    assert active_sites(0.0, active=0.1) == 0.0


@pytest.mark.parametrize(
    ("dose", "sites"),
    [(0.0, 0.0), (1199.0, 0.0), (1200.0, 0.0), (1201.0, 1e12), (2000.0, 8e14)],
    ids=["none", "below", "at", "above", "usual"],
)
def test_dissolved_agent_starts_nothing_up_to_its_threshold(dose, sites):
    assert dissolved_sites(dose, sites_per_ppm=1e12, threshold_ppm=1200.0) == sites


@pytest.mark.parametrize(
    "change",
    [
        {"mass_fraction": 1.0},
        {"mass_fraction": -1e-3},
        {"d50": 0.0},
        {"spread": 0.9},
        {"basis": "mass"},
        {"particle_density": 0.0},
        {"polymer_density": math.nan},
    ],
    ids=lambda change: next(iter(change)) + str(next(iter(change.values()))),
)
def test_powders_out_of_bounds_are_refused(change):
    good = {"mass_fraction": 1e-3, "d50": 1e-6, "spread": 1.5, "basis": "volume", **TALC}
    arguments = good | change
    with pytest.raises(ValidityError, match="particle density: expected"):
        particle_density(arguments.pop("mass_fraction"), **arguments)


@pytest.mark.parametrize(
    "call",
    [
        lambda: active_sites(1e12, active=1.1),
        lambda: active_sites(1e12, active=0.5, loss=1.5),
        lambda: active_sites(-1.0, active=0.5),
        lambda: dissolved_sites(-1.0, sites_per_ppm=1.0, threshold_ppm=1.0),
    ],
    ids=["active", "loss", "particles", "dose"],
)
def test_shares_out_of_bounds_are_refused(call):
    with pytest.raises(ValidityError, match="expected"):
        call()
