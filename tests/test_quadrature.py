from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from spheru.quadrature import GAUSS_POINTS, GAUSS_WEIGHTS, distinct


def test_the_rule_is_that_of_numpy():
    roots, weights = np.polynomial.legendre.leggauss(5)
    assert_allclose(GAUSS_POINTS, (roots + 1) / 2, rtol=1e-15)
    assert_allclose(GAUSS_WEIGHTS, weights / 2, rtol=1e-14)


@pytest.mark.parametrize("power", range(10))
def test_the_rule_is_exact_up_to_the_ninth_power(power):
    assert_allclose(GAUSS_WEIGHTS @ GAUSS_POINTS**power, 1 / (power + 1), rtol=1e-14)


@pytest.mark.parametrize("sizes", [(0,), (1,), (50, 0, 70)])
def test_distinct_values_are_those_of_numpy(sizes):
    random = np.random.default_rng(1)
    parts = [random.integers(0, 40, n).astype(float) for n in sizes]
    assert_array_equal(distinct(*parts), np.unique(np.concatenate(parts)))
