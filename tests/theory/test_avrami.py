from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import quad

from spheru.errors import ValidityError
from spheru.theory.avrami import avrami_extended, avrami_half_time, avrami_mean_time
from spheru.theory.conversion import mean_field

CASES = [
    pytest.param(d, kind, id=f"{d}D-{next(iter(kind))}")
    for d in (1, 2, 3)
    for kind in ({"density": 2.5}, {"rate": 0.7})
]


@pytest.mark.parametrize(("dimension", "kind"), CASES)
def test_half_and_mean_time_follow_from_the_extended_fraction(dimension, kind):
    law = {"growth_rate": 1.3, "dimension": dimension, **kind}
    half = avrami_half_time(**law)
    assert float(avrami_extended(half, **law)) == pytest.approx(math.log(2))
    mean = quad(lambda t: math.exp(-float(avrami_extended(t, **law))), 0, 60 * half)[0]
    assert avrami_mean_time(**law) == pytest.approx(mean, rel=1e-7)


@pytest.mark.parametrize(("dimension", "kind"), CASES[2:])
def test_closed_forms_agree_with_the_mean_field(dimension, kind):
    time = np.linspace(0, 3, 31)
    born = np.full(31, kind["density"]) if "density" in kind else kind["rate"] * time
    field = mean_field(1.3 * time, born, dimension=dimension)
    law = {"growth_rate": 1.3, "dimension": dimension, **kind}
    np.testing.assert_allclose(field.extended, avrami_extended(time, **law), rtol=1e-12)
    assert field.grown_length_at(0.5) / 1.3 == pytest.approx(avrami_half_time(**law), rel=1e-12)
    assert field.average(time) == pytest.approx(avrami_mean_time(**law), rel=1e-6)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        pytest.param({"dimension": 4}, "1, 2 or 3", id="dimension"),
        pytest.param({"growth_rate": 0.0}, "growth rate above 0", id="still"),
        pytest.param({"rate": 1.0}, "either a density or", id="both"),
        pytest.param({"density": 0.0}, "either a density or", id="neither"),
        pytest.param({"density": math.nan}, "either a density or", id="nan"),
    ],
)
def test_faults_are_named(change, said):
    law = {"growth_rate": 1.0, "dimension": 3, "density": 1.0, **change}
    with pytest.raises(ValidityError, match=said):
        avrami_half_time(**law)


def test_negative_time_is_refused():
    with pytest.raises(ValidityError, match="times >= 0"):
        avrami_extended(-1.0, growth_rate=1.0, dimension=2, density=1.0)
