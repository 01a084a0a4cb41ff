from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.nuclei.region import Region


def test_measure_and_faces():
    box = Region(low=(0, 1, 2), high=(2, 4, 7))
    assert box.measure == 30.0
    assert [box.face_area(axis) for axis in range(3)] == [15.0, 10.0, 6.0]
    assert box.periodic == box.closed == (False, False, False)


def test_margins_stand_only_where_the_region_is_cut():
    box = Region(low=(0, 0, 0), high=(1, 1, 1), periodic=(1, 0, 0), closed=(0, 1, 0))
    wider = box.padded(0.25)
    assert wider.low == (0.0, 0.0, -0.25)
    assert wider.high == (1.0, 1.0, 1.25)
    assert (wider.periodic, wider.closed) == (box.periodic, box.closed)


def test_both_ends_belong_to_the_region():
    box = Region(low=(0, 0), high=(1, 1))
    points = np.array([[0, 0], [1, 1], [1.1, 0.5], [0.5, -0.1]])
    assert box.holds(points).tolist() == [True, True, False, False]


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ({"low": (0,), "high": (1,)}, "2 or 3 axes"),
        ({"low": (0, 0), "high": (1, 1, 1)}, "2 or 3 axes"),
        ({"low": (0, 0), "high": (1, 0)}, "low < high"),
        ({"low": (0, 0), "high": (1, math.inf)}, "finite corners"),
        ({"low": (0, 0), "high": (1, 1), "periodic": (True,) * 3}, "1 or 2 values of periodic"),
        ({"low": (0, 0), "high": (1, 1), "periodic": True, "closed": True}, "both periodic"),
        ({"low": (0, 0, 0), "high": (1, 1, 1), "thickness": 1.0}, "only for two axes"),
        ({"low": (0, 0), "high": (1, 1), "thickness": 0.0}, "thickness above 0 m"),
    ],
    ids=["one axis", "axes differ", "flat", "infinite", "edges", "both", "volume", "no thickness"],
)
def test_regions_that_make_no_sense_are_refused(given, words):
    with pytest.raises(ValidityError, match=words):
        Region(**given)
