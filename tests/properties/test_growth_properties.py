"""What must hold for any births: shifts of a periodic grid and changes of scale."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from spheru.births import Births
from spheru.growth.exact import tessellate
from spheru.image.frame import Frame

pytestmark = pytest.mark.kernel

few = settings(derandomize=True, max_examples=15, deadline=None)


@st.composite
def grids(draw, periodic):
    """Frames and births whose coordinates are whole 64ths of a pixel, so that shifts are exact."""
    dimension = draw(st.sampled_from([2, 3]))
    shape = tuple(draw(st.integers(1, 12)) for _ in range(dimension))
    n = draw(st.integers(1, 12))
    rng = np.random.default_rng(draw(st.integers(0, 2**32)))
    position = rng.integers(0, 64 * np.array(shape), (n, dimension)) / 64
    late = draw(st.sampled_from([0, 1, 64, 256]))
    births = Births(position=position, grown_length=rng.integers(0, late + 1, n) / 64)
    return births, Frame(shape=shape, pixel=1.0, periodic=periodic)


@few
@given(grids(periodic=True), st.lists(st.integers(-20, 20), min_size=3, max_size=3))
def test_shifted_births_shift_the_labels_of_a_periodic_grid(case, steps):
    births, frame = case
    steps = steps[: frame.dimension]
    moved = Births(position=births.position + steps, grown_length=births.grown_length)
    axes = tuple(range(frame.dimension))
    np.testing.assert_array_equal(
        tessellate(moved, frame).labels, np.roll(tessellate(births, frame).labels, steps, axes)
    )


@few
@given(grids(periodic=False), st.integers(-30, 30))
def test_scaled_lengths_leave_the_labels_as_they_are(case, power):
    births, frame = case
    factor = 2.0**power
    scaled = Births(position=births.position * factor, grown_length=births.grown_length * factor)
    small = tessellate(births, frame, arrival=True)
    large = tessellate(scaled, Frame(shape=frame.shape, pixel=factor), arrival=True)
    np.testing.assert_array_equal(large.labels, small.labels)
    np.testing.assert_allclose(large.arrival, small.arrival * factor, rtol=1e-6)


@few
@given(grids(periodic=True), st.integers(0, 11))
def test_later_birth_of_one_nucleus_never_gains_pixels(case, row):
    births, frame = case
    row %= len(births)
    later = births.grown_length.copy()
    later[row] += 1.0
    before = tessellate(births, frame).labels == row + 1
    after = (
        tessellate(Births(position=births.position, grown_length=later), frame).labels == row + 1
    )
    assert not (after & ~before).any()
