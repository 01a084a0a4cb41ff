"""The estimate's numbers against independent quadrature."""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.run.estimate import estimate
from tests.run.settings import settings_with


def test_mean_and_half_time_of_a_hold_are_those_of_kolmogorov():
    # all sites start at once on reaching 130 degC: alpha = 1 - exp(-k t^3), with half time
    # (ln 2/k)^(1/3) and mean time Gamma(4/3) k^(-1/3): a ratio of 0.8929795/0.8849970
    steps = [{"quench": "130 degC", "time_constant": "10 ms", "for": "0.3 s"}, {"hold": "50 h"}]
    numbers = estimate(settings_with(cooling={"start": "205 degC", "steps": steps})).numbers
    assert numbers["half_time_from"] == "start of the hold"
    ratio = numbers["mean_crystallisation_time_s"] / numbers["half_time_s"]
    assert ratio == pytest.approx(math.gamma(4 / 3) / math.log(2) ** (1 / 3), rel=1e-4)


def test_numbers_of_a_section_belong_together():
    numbers = estimate(settings_with()).numbers
    # S_V = (4/pi) L_A and mean intercept 2/S_V
    surface = numbers["boundary_density_per_mm"] * 4 / math.pi
    assert numbers["mean_intercept_um"] == pytest.approx(2e3 / surface)
    area = math.pi / 4 * numbers["diameter_of_mean_area_um"] ** 2
    assert numbers["section_count_per_mm2"] == pytest.approx(1e6 / area)
    # by Euler a section has a quarter as many cells as the length of triple lines, N_A = L_V/4
    lines = numbers["triple_line_density_per_mm2"]
    assert numbers["section_count_per_mm2"] == pytest.approx(lines / 4)
    volume = math.pi / 6 * numbers["diameter_of_mean_volume_um"] ** 3
    assert numbers["number_density_per_mm3"] == pytest.approx(1e9 / volume)


def test_the_kinetic_uncertainty_encloses_the_estimate():
    numbers = estimate(settings_with()).numbers
    doubt = numbers["kinetic_uncertainty"]
    typical = numbers["diameter_of_mean_area_um"]
    assert doubt["typical_diameter_low_um"] < typical < doubt["typical_diameter_high_um"]
    half = numbers["half_temperature_C"]
    assert doubt["half_temperature_low_C"] < half < doubt["half_temperature_high_C"]


def test_more_agent_raises_the_peak_and_trace_doses_enlarge_the_spherulites_a_little():
    def run(density):
        nuclei = [{"law": "fixed", "density": f"{density} 1/m^3"}] if density else []
        return estimate(settings_with(nuclei=nuclei)).numbers

    found = [run(density) for density in (0, 1e12, 1e13, 1e14)]
    peaks = [numbers["peak_temperature_C"] for numbers in found]
    sizes = [numbers["diameter_of_mean_volume_um"] for numbers in found]
    assert np.all(np.diff(peaks) > 0)
    # computed series for the Koscher & Fulchiron set at 10 K/min: 51.6, 52.3, 48.1, 26.5 um
    assert sizes == pytest.approx([51.6, 52.3, 48.1, 26.5], rel=0.01)
