from __future__ import annotations

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.theory.moments import Moments

LENGTH = np.array([0.0, 0.5, 0.5, 1.25, 3.0])
DENSITY = np.array([2.0, 2.5, 4.5, 4.5, 8.0])


def by_summing(length, k, pieces=200_000):
    """Moment of single nuclei: the start, the jump at 0.5, and births spread over the slopes."""
    total = 2.0 * length**k + (2.0 * (length - 0.5) ** k if length >= 0.5 else 0.0)
    for a, b, rate in ((0.0, 0.5, 1.0), (1.25, 3.0, 2.0)):
        born = a + (b - a) * (np.arange(pieces) + 0.5) / pieces
        radius = (length - born)[born < length]
        total += rate * (b - a) / pieces * (radius**k).sum()
    return total


@pytest.mark.parametrize("k", [1, 2, 3])
@pytest.mark.parametrize("length", [0.0, 0.3, 0.5, 0.9, 2.2, 3.0])
def test_moments_are_those_of_single_nuclei(length, k):
    moments = Moments(grown_length=LENGTH, density=DENSITY, order=3)
    got = moments.within(*moments.locate(np.array([length])), k)
    np.testing.assert_allclose(got, by_summing(length, k), rtol=1e-5, atol=1e-12)


def test_more_nodes_on_the_same_lines_change_nothing():
    coarse = Moments(grown_length=LENGTH, density=DENSITY, order=3)
    more = np.sort(np.concatenate((LENGTH, np.linspace(0.01, 2.99, 500))))
    after = more > 0.5
    density = np.where(
        after,
        np.interp(more, LENGTH[2:], DENSITY[2:]),
        np.interp(more, LENGTH[:2], DENSITY[:2]),
    )
    density[np.flatnonzero(more == 0.5)[-1]] = DENSITY[2]
    fine = Moments(grown_length=more, density=density, order=3)
    for k in (1, 2, 3):
        assert fine.nodes[k][-1] == pytest.approx(coarse.nodes[k][-1], rel=1e-13)


@pytest.mark.parametrize(
    ("length", "density", "said"),
    [
        pytest.param([0.0, 1.0], [1.0], "as many densities", id="shapes"),
        pytest.param([0.0], [1.0], "at least 2", id="one-node"),
        pytest.param([0.0, 2.0, 1.0], [1.0] * 3, "grown lengths", id="length-falls"),
        pytest.param([0.0, 1.0], [2.0, 1.0], "densities", id="density-falls"),
        pytest.param([0.0, 1.0], [-1.0, 1.0], "densities", id="negative"),
        pytest.param([0.0, np.nan], [1.0, 1.0], "grown lengths", id="nan"),
        pytest.param([0.0, 1.0], [1.0, np.inf], "densities", id="inf"),
    ],
)
def test_faults_are_named(length, density, said):
    with pytest.raises(ValidityError, match=said):
        Moments(grown_length=length, density=density, order=3)
