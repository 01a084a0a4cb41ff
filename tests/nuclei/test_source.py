from __future__ import annotations

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.material.site_law import ActivatedSites
from spheru.nuclei.activation import Athermal
from spheru.nuclei.placement import Uniform
from spheru.nuclei.source import Source
from tests.nuclei import reference

CLOCK = reference.clock([0.0, 1.0, 2.0])


def given(*numbers):
    return Source(name="given", activation=reference.Given(numbers=numbers))


def test_a_source_stands_anywhere_unless_told_otherwise():
    assert given(0.0, 1.0, 2.0).placement == Uniform()


def test_a_delayed_source_keeps_all_but_its_start():
    law = ActivatedSites(number=1e3, activation=1.0)
    source = Source(name="agent", activation=Athermal(law=law, t_m0=400.0))
    late = source.delayed(2.0)
    assert (late.name, late.placement) == (source.name, source.placement)
    assert source.density(CLOCK).tolist() == [0.0, 1e3, 1e3]
    assert late.density(CLOCK).tolist() == [0.0, 0.0, 1e3]
    assert late.temperatures() == source.temperatures()


def test_what_falls_by_rounding_only_is_held():
    density = given(1.0, 2.0, np.nextafter(2.0, 1.0)).density(CLOCK)
    assert density.tolist() == [1.0, 2.0, 2.0]


@pytest.mark.parametrize(
    "numbers",
    [(1.0, 2.0, 1.9), (-1.0, 0.0, 1.0), (0.0, np.nan, 1.0), (0.0, 1.0, np.inf)],
    ids=["falls", "negative", "nan", "inf"],
)
def test_numbers_that_make_no_sense_are_refused(numbers):
    with pytest.raises(ValidityError, match="nuclei of 'given': expected a finite number"):
        given(*numbers).density(CLOCK)
