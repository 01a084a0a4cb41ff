from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spheru.theory.conversion import mean_field
from spheru.theory.film import film_mean_field
from spheru.thermal.clock import Clock
from spheru.thermal.history import History

few = settings(max_examples=30, derandomize=True, deadline=None, database=None)
steps = st.floats(0.0, 1.0, allow_subnormal=False)
dimensions = st.sampled_from([2, 3])


@st.composite
def births(draw):
    """Nodes of grown length and the nuclei born by them, with plateaus and jumps."""
    rows = draw(st.lists(st.tuples(steps, steps), min_size=1, max_size=12))
    start = draw(st.floats(0.0, 3.0))
    length = np.concatenate(([0.0], np.cumsum([r[0] for r in rows])))
    return length, start + np.concatenate(([0.0], np.cumsum([r[1] for r in rows])))


@few
@given(births(), dimensions)
def test_conversion_never_falls(case, dimension):
    field = mean_field(*case, dimension=dimension)
    assert (np.diff(field.fraction) >= 0).all()
    assert field.fraction[0] == 0
    assert field.fraction_final <= 1
    assert (np.diff(field.survivors) >= 0).all()
    assert field.number_density <= case[1][-1] * (1 + 1e-12)


@few
@given(births(), dimensions, st.floats(1e-6, 1e3))
def test_longer_lengths_and_fewer_nuclei_give_the_same_fraction(case, dimension, scale):
    length, born = case
    one = mean_field(length, born, dimension=dimension)
    two = mean_field(length * scale, born * scale**-dimension, dimension=dimension)
    np.testing.assert_allclose(two.fraction, one.fraction, rtol=1e-9, atol=1e-12)
    assert two.boundary_density * scale == pytest.approx(one.boundary_density, rel=1e-7, abs=1e-9)


@few
@given(births(), dimensions, st.floats(0.0, 2.0), st.floats(0.0, 1.0))
def test_more_nuclei_never_lower_the_fraction(case, dimension, seeds, more):
    length, born = case
    one = mean_field(length, born, dimension=dimension)
    two = mean_field(length, born * (1 + more) + seeds, dimension=dimension)
    assert (two.fraction >= one.fraction - 1e-12).all()


@few
@given(births(), st.floats(0.05, 20.0))
def test_film_lags_behind_the_bulk(case, thickness):
    length, born = case
    bulk = mean_field(length, born, dimension=3)
    film = film_mean_field(length, born, thickness=thickness)
    assert (film.fraction <= bulk.fraction + 1e-9).all()
    assert (np.diff(film.fraction) >= -1e-9).all()


@few
@given(
    st.lists(st.tuples(st.floats(0.1, 50.0), st.floats(350.0, 450.0)), min_size=2, max_size=15),
    st.floats(0.05, 20.0),
)
def test_clock_and_its_inverse_agree_for_any_trace(rows, step):
    history = History.from_trace(np.cumsum([r[0] for r in rows]), [r[1] for r in rows])
    clock = Clock.from_history(
        history, lambda kelvins: np.exp((kelvins - 400) / 10), temperature_step=step
    )
    assert (np.diff(clock.grown_length) > 0).all()
    length = np.linspace(0, clock.grown_length[-1], 50)
    times = clock.time_at(length)
    assert (np.diff(times) >= 0).all()
    np.testing.assert_allclose(clock.grown_length_at(times), length, atol=1e-10 * length[-1])
