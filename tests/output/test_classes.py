"""Round numbers and classes of size."""

from __future__ import annotations

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.measure.sizes import measure_sizes
from spheru.output.classes import class_edges, round_down
from tests.output.reference import voronoi_map


@pytest.mark.parametrize(
    ("value", "rounded"),
    [
        pytest.param(1.0, 1.0, id="itself"),
        pytest.param(0.99, 0.5, id="just below"),
        pytest.param(1e-3, 1e-3, id="power of ten"),
        pytest.param(3e5, 2e5, id="large"),
        pytest.param(0.1 + 0.2 - 0.1, 0.2, id="rounding of floats"),
    ],
)
def test_round_numbers_are_1_2_5_and_not_above(value, rounded):
    assert round_down(value) == rounded


@pytest.mark.parametrize("value", [0.0, -1.0, np.nan, np.inf])
def test_numbers_that_cannot_be_rounded_are_refused(value):
    with pytest.raises(ValidityError, match="above 0"):
        round_down(value)


@pytest.mark.parametrize("count", [1, 2, 60, 400])
def test_every_spherulite_lies_in_a_class(count):
    sizes = measure_sizes(voronoi_map((120, 120), count, periodic=True))
    edges = class_edges(sizes)
    assert np.histogram(sizes.diameter * 1e6, edges)[0].sum() == count
    assert 2 <= edges.size <= 65
    width = np.diff(edges)
    np.testing.assert_allclose(width, width[0])
    assert round_down(width[0]) == pytest.approx(width[0])
