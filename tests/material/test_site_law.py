import math

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import ndtr

from spheru.errors import ValidityError
from spheru.material.site_law import (
    ActivatedSites,
    ExponentialSites,
    FixedSites,
    SiteLaw,
    TableSites,
    melt_memory_factor,
)

SITES = {
    "fixed": FixedSites(number=1e12),
    "exponential": ExponentialSites(a=0.156, b=15.1, ceiling=1e16),
    "table": TableSites(undercooling=(50.0, 70.0, 75.0, 90.0), number=(1e9, 1e11, 1e11, 4e12)),
    "agent": ActivatedSites(number=1e13, activation=20.0, spread=3.0),
    "agent step": ActivatedSites(number=1e13, activation=20.0),
    "agent at once": ActivatedSites(number=1e13, activation=0.0),
}
every_site_law = pytest.mark.parametrize("law", SITES.values(), ids=SITES)


@every_site_law
def test_sites_never_fall_with_undercooling_and_keep_the_shape(law):
    grid = np.linspace(-10.0, 200.0, 2101)
    with np.errstate(all="raise", under="ignore"):
        density = law.density(grid)
    assert (np.diff(density) >= -1e-15 * density[1:]).all()
    assert law.density(10.0).shape == ()
    assert law.density(np.zeros((2, 0))).shape == (2, 0)
    assert isinstance(law, SiteLaw)


@every_site_law
def test_no_site_starts_without_undercooling_but_the_fixed_ones(law):
    at_rest = law.density([-5.0, 0.0])
    assert_allclose(at_rest, 1e12 if isinstance(law, FixedSites) else 0.0)


@every_site_law
def test_scaled_multiplies_every_number(law):
    grid = np.linspace(-10.0, 200.0, 211)
    assert_allclose(law.scaled(3.0).density(grid), 3.0 * law.density(grid), rtol=1e-12)
    with pytest.raises(ValidityError):
        law.scaled(-1.0)


@every_site_law
def test_number_is_continuous_but_at_the_stated_steps(law):
    fine = np.arange(0.005, 160.0, 0.01)
    slope = np.diff(law.density(fine)) / np.max(law.density(fine))
    jumps = fine[1:][slope > 0.05]
    assert all(min(abs(jump - step) for step in law.steps()) < 0.02 for jump in jumps)


def test_exponential_law_meets_its_ceiling_exactly_at_the_stated_undercooling():
    law = SITES["exponential"]
    start, full = law.steps()
    assert start == 0.0
    assert full == pytest.approx((16 * math.log(10) - 15.1) / 0.156)
    assert float(law.density(full - 1e-3)) < 1e16
    assert law.density([full + 1e-3, 1e6]).tolist() == [1e16, 1e16]


def test_ceiling_below_the_first_sites_leaves_one_step():
    law = ExponentialSites(a=0.1, b=15.0, ceiling=1e6)
    assert law.steps() == (0.0,)
    assert float(law.density(1.0)) == 1e6


def test_table_of_sites_is_met_at_its_rows():
    law = SITES["table"]
    assert_allclose(law.density(law.undercooling), law.number, rtol=1e-12)
    assert law.fitted_range == (50.0, 90.0)


def test_activation_is_the_normal_distribution():
    grid = np.linspace(0.5, 60.0, 120)
    expected = 1e13 * ndtr((grid - 20.0) / 3.0)
    assert_allclose(SITES["agent"].density(grid), expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: FixedSites(number=-1.0), "number"),
        (lambda: ExponentialSites(a=0.0, b=15.0, ceiling=1e14), "a finite"),
        (lambda: ExponentialSites(a=0.1, b=math.inf, ceiling=1e14), "finite b"),
        (lambda: ExponentialSites(a=0.1, b=15.0, ceiling=0.0), "ceiling"),
        (lambda: ExponentialSites(a=0.1, b=1.0, ceiling=1.0, fitted_range=(9.0, 5.0)), "range"),
        (lambda: TableSites(undercooling=(1.0, 2.0), number=(1e9, 1e8)), "never fall"),
        (lambda: TableSites(undercooling=(0.0, 2.0), number=(1e9, 1e9)), "above 0"),
        (lambda: TableSites(undercooling=(1.0,), number=(1e9,)), "2 rows"),
        (lambda: ActivatedSites(number=1.0, activation=-1.0), "activation"),
        (lambda: ActivatedSites(number=1.0, activation=1.0, spread=math.nan), "spread"),
        (lambda: FixedSites(number=1.0).density(math.nan), "undercooling"),
        (lambda: SITES["exponential"].scaled(0.0), "factor"),
    ],
    ids=[
        "negative", "slope 0", "b inf", "no ceiling", "range", "falling", "row at 0", "one row",
        "activation", "spread", "undercooling", "factor",
    ],
)  # fmt: skip
def test_site_laws_refuse_numbers_out_of_bounds(make, message):
    with pytest.raises(ValidityError, match=message):
        make()


def test_memory_makes_log_sites_linear_in_the_melt_temperature_and_fades_with_the_hold():
    memory = {"slope": 0.3, "erase_temperature": 480.0, "time": 100.0}
    assert math.log(melt_memory_factor(470.0, 0.0, **memory)) == pytest.approx(3.0)
    assert math.log(melt_memory_factor(475.0, 0.0, **memory)) == pytest.approx(1.5)
    surplus = melt_memory_factor(470.0, 0.0, **memory) - 1.0
    assert melt_memory_factor(470.0, 100.0, **memory) - 1.0 == pytest.approx(surplus / math.e)
    assert melt_memory_factor(480.0, 0.0, **memory) == 1.0
