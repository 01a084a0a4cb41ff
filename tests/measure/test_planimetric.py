from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.births import Births
from spheru.errors import UnknownNameError, ValidityError
from spheru.growth.exact import tessellate
from spheru.image.frame import Frame
from spheru.measure.planimetric import count_grains
from tests.measure.reference import image_of, voronoi


def counted(labels, mask, cut):
    """Return by brute force how many labels lie in a mask only, and how many on both sides."""
    inside = set(labels[mask]) - {0}
    outside = set(labels[~mask]) if cut else set()
    return len(inside - outside), len(inside & outside)


def test_a_rectangle_within_a_picture_counts_what_lies_on_both_sides():
    image = voronoi(1, side=12.0, across=12, cut=True)
    found = count_grains(image, area="rectangle", split=1).fields[0]
    mask = np.zeros(image.labels.shape, dtype=bool)
    mask[1:-1, 1:-1] = True
    assert (found.inside, found.cut) == counted(image.labels, mask, cut=True)
    assert found.measure == pytest.approx(mask.sum() / 144)
    assert found.correction == 1.0


def test_a_circle_counts_what_lies_on_both_sides():
    image = voronoi(2, side=12.0, across=12)
    found = count_grains(image, area="circle", split=1).fields[0]
    y, x = np.mgrid[:144, :144] + 0.5
    mask = (y - 72) ** 2 + (x - 72) ** 2 <= 72**2
    assert (found.inside, found.cut) == counted(image.labels, mask, cut=True)
    assert found.equivalent == found.inside + found.cut / 2 - 1
    assert found.size == (12.0, 12.0)


@pytest.mark.parametrize(
    ("edges", "correction"),
    [({"periodic": True}, 0.0), ({"closed": True}, 0.0), ({"closed": (True, False)}, 0.0), ({}, 1)],
    ids=["periodic", "walls", "film", "cut"],
)
def test_there_is_no_rim_at_walls_and_periodic_edges(edges, correction):
    labels = np.arange(1, 26).reshape(5, 5).repeat(8, 0).repeat(8, 1)
    field = count_grains(image_of(labels, **edges), area="rectangle").fields[0]
    assert field.correction == correction
    if edges.get("periodic") is True or edges.get("closed") is True:
        assert (field.inside, field.cut, field.equivalent) == (25, 0, 25.0)


def test_fields_at_walls_are_corrected_by_their_corners():
    labels = np.arange(1, 82).reshape(9, 9).repeat(8, 0).repeat(8, 1)
    fields = count_grains(image_of(labels, closed=(True, False)), area="rectangle", split=3).fields
    assert [f.correction for f in fields] == [0.5, 0.5, 0.5, 1, 1, 1, 0.5, 0.5, 0.5]


# Li & Zhou 2011 (abstract seen): N_inside + N_cut/2 has one too many. Fields of 49 cells in
# periodic maps of exactly 1764; standard errors of one map, measured over 40 maps.
@pytest.mark.parametrize(
    ("area", "error", "left"),
    [("circle", 0.0107, 0.0), ("rectangle", 0.0010, 0.0038)],
)
def test_the_corrected_count_is_unbiased_on_voronoi_cells(area, error, left):
    # left: cells beside a corner that both sides cut count once: a fifth of a cell a rectangle
    found, plain = [], []
    for seed in range(12):
        side, number = 840, 1764
        place = np.random.default_rng(seed).random((number, 2)) * side
        frame = Frame(shape=(side, side), pixel=1.0, periodic=True)
        image = tessellate(Births(position=place, grown_length=np.zeros(number)), frame)
        count = count_grains(image, area=area, split=6)
        found.append(count.per_area.statistic.value * side**2 / number - 1)
        plain.append(count.uncorrected.statistic.value * side**2 / number - 1)
    four = 4 * error / math.sqrt(12)
    assert np.mean(found) == pytest.approx(left, abs=four)
    holds = 49 * (math.pi / 4 if area == "circle" else 1.0)
    assert np.mean(plain) == pytest.approx(1 / holds + left, abs=four)
    assert np.mean(plain) > four  # the bias is seen


def test_the_intervals_of_both_scales_stand_about_their_values():
    count = count_grains(voronoi(3, side=24.0, across=10, cut=True))
    assert count.per_area.fields == 9
    assert count.grain_number.low < count.grain_number.value < count.grain_number.high
    assert count.grain_number.value - count.grain_number_iso.value == pytest.approx(
        0.0458, abs=1e-4
    )


def test_labels_far_apart_in_number_count_alike():
    image = voronoi(4, side=8.0, across=10, cut=True)
    far = image_of(image.labels.astype(np.uint64) * 40_000_000, pixel=0.1)
    near, wide = (count_grains(i, split=1).fields[0] for i in (image, far))
    assert (near.inside, near.cut) == (wide.inside, wide.cut)


def test_bad_input_gets_one_clear_line():
    with pytest.raises(ValidityError, match="take sections"):
        count_grains(image_of(np.ones((3, 3, 3), dtype=int)))
    with pytest.raises(ValidityError, match="shows no spherulite"):
        count_grains(image_of(np.zeros((9, 9), dtype=int)))
    with pytest.raises(ValidityError, match="too small for a test area"):
        count_grains(image_of(np.ones((4, 4), dtype=int)), split=1)
    with pytest.raises(UnknownNameError, match="circle, rectangle"):
        count_grains(image_of(np.ones((9, 9), dtype=int)), area="ellipse")


def test_one_label_only_counts_half_a_grain_and_not_less_than_nothing():
    field = count_grains(image_of(np.ones((9, 9), dtype=int))).fields[0]
    assert (field.inside, field.cut, field.equivalent) == (0, 1, 0.0)
