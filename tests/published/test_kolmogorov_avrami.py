"""Half times, mean times and final numbers of Kolmogorov-Avrami kinetics.

Sources: A. N. Kolmogorov, Izv. Akad. Nauk SSSR Ser. Mat. 3 (1937) 355; M. Avrami, J. Chem. Phys.
7 (1939) 1103 (formulas from memory; values by algebra, six digits as tabulated).
"""

from __future__ import annotations

import numpy as np
import pytest

from spheru.theory.avrami import avrami_half_time, avrami_mean_time
from spheru.theory.conversion import mean_field

# half time in units where density, nucleation rate and growth rate are 1
HALF_TIMES = [
    (1, "density", 0.346574),
    (1, "rate", 0.832555),
    (2, "density", 0.469719),
    (2, "rate", 0.871496),
    (3, "density", 0.549008),
    (3, "rate", 0.901985),
]
# mean crystallisation time of a point
MEAN_TIMES = [(3, "density", 0.553960), (3, "rate", 0.896012), (2, "density", 0.5)]


@pytest.mark.parametrize(("dimension", "kind", "half"), HALF_TIMES)
def test_half_time_of_closed_form(dimension, kind, half):
    law = {kind: 1.0, "growth_rate": 1.0, "dimension": dimension}
    assert avrami_half_time(**law) == pytest.approx(half, abs=5e-7)


@pytest.mark.parametrize(("dimension", "kind", "half"), HALF_TIMES[2:])
def test_half_time_of_mean_field(dimension, kind, half):
    born = [1.0, 1.0] if kind == "density" else [0.0, 9.0]
    field = mean_field([0.0, 9.0], born, dimension=dimension)
    assert float(field.grown_length_at(0.5)) == pytest.approx(half, abs=5e-7)


@pytest.mark.parametrize(("dimension", "kind", "mean"), MEAN_TIMES)
def test_mean_time(dimension, kind, mean):
    law = {kind: 1.0, "growth_rate": 1.0, "dimension": dimension}
    born = [1.0, 1.0] if kind == "density" else [0.0, 9.0]
    assert avrami_mean_time(**law) == pytest.approx(mean, abs=5e-7)
    assert mean_field([0.0, 9.0], born, dimension=dimension).mean_arrival == pytest.approx(
        mean, abs=5e-7
    )


# Koscher and Fulchiron's polypropylene, Polymer 43 (2002) 6931 (constants from memory); half time
# [3 ln 2/(4 pi N G^3)]^(1/3) for N = exp(0.156 dT + 15.1) nuclei at once (computed)
@pytest.mark.parametrize(
    ("celsius", "half"), [(120.0, 88.4), (130.0, 499.0), (140.0, 4597.0)], ids=str
)
def test_half_time_of_polypropylene_at_constant_temperature(celsius, half):
    kelvins = celsius + 273.15
    growth = 283.0 * np.exp(
        -6270.0 / (8.31446261815324 * (kelvins - 239.15)) - 5.5e5 / (kelvins * (483.15 - kelvins))
    )
    density = np.exp(0.156 * (483.15 - kelvins) + 15.1)
    found = avrami_half_time(density=density, growth_rate=growth, dimension=3)
    assert found == pytest.approx(half, rel=1e-3)
