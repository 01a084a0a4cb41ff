"""Edge rules on windows: which are unbiased, which read low, what they refuse."""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import UnknownNameError, ValidityError
from spheru.measure.edges import weigh_edges
from spheru.measure.labels import sum_labels
from spheru.measure.sizes import measure_sizes
from tests.measure.reference import image_of, johnson_mehl, voronoi


def weigh(labels, rule, guard=None, **edges):
    image = image_of(labels, **edges)
    return weigh_edges(image, sum_labels(image), rule=rule, guard=guard)


@pytest.mark.kernel
@pytest.mark.parametrize("shape", [(3, 2), (1, 4), (2, 2)], ids=str)
@pytest.mark.parametrize("rule", ["counting-frame", "guard-frame", "miles-lantuejoul"])
def test_the_weights_average_to_the_true_density_over_all_places_of_the_window(rule, shape):
    # exact on the lattice: one grain per 14 x 14 pixels, all 196 shifts, a window of 13 x 12
    pattern = np.zeros((14, 14), dtype=int)
    pattern[4 : 4 + shape[0], 5 : 5 + shape[1]] = 1
    pattern[4, 5 + shape[1]] = 1  # and no rectangle
    guard = None if rule == "miles-lantuejoul" else 5.0
    sums = [
        weigh(np.roll(pattern, (i, j), (0, 1))[:13, :12], rule, guard).weight.sum()
        for i in range(14)
        for j in range(14)
    ]
    assert np.mean(sums) == pytest.approx(1 / 196)


@pytest.mark.kernel
def test_each_grain_of_a_body_belongs_to_one_counting_frame_of_a_tiling():
    pattern = np.zeros((9, 9, 9), dtype=int)
    pattern[3:5, 3, 3] = pattern[4, 3:5, 3] = pattern[4, 4, 3:6] = 1
    sums = [
        weigh(
            np.roll(pattern, (i, j, k), (0, 1, 2))[:8, :9, :8], "counting-frame", 3.0
        ).weight.sum()
        for i in range(9)
        for j in range(9)
        for k in range(9)
    ]
    assert np.mean(sums) == pytest.approx(1 / 729)


@pytest.mark.kernel
def test_the_counting_frame_takes_what_hangs_out_above_and_leaves_what_hangs_out_below():
    labels = np.zeros((12, 12), dtype=int)
    labels[5, 2:6] = 1  # over the left edge of the frame (4 to 8)
    labels[6, 6:10] = 2  # over the right edge
    labels[2:6, 7] = 3  # over the edge at lower y
    labels[7:10, 5] = 4  # over the edge at higher y
    labels[4, 8] = 5  # just outside
    weights = weigh(labels, "counting-frame", 4.0)
    assert (weights.weight > 0).tolist() == [False, True, False, True, False]
    assert weights.weight.max() == pytest.approx(1 / 16)
    assert weights.window == (4.0, 4.0)
    assert weights.lost == 0


@pytest.mark.kernel
def test_a_grain_of_the_frame_that_reaches_the_edge_is_lost_and_said():
    labels = np.zeros((10, 10), dtype=int)
    labels[5, 4:10] = 1
    labels[4, 4] = 2
    for rule in ("counting-frame", "guard-frame"):
        weights = weigh(labels, rule, 2.0)
        assert weights.lost == 1
        assert (weights.weight > 0).tolist() == [False, True]


@pytest.mark.kernel
def test_closed_and_periodic_axes_have_no_guard():
    labels = np.zeros((4, 20), dtype=int)
    labels[:, 8:11] = 1
    weights = weigh(labels, "guard-frame", closed=(True, False))
    assert weights.window[0] == 4.0
    assert weights.window[1] < 20.0
    assert weights.weight.tolist() == pytest.approx([1 / math.prod(weights.window)])


@pytest.mark.kernel
@pytest.mark.parametrize(
    ("rule", "guard", "fault", "message"),
    [
        ("frame", None, UnknownNameError, "Known: auto, counting-frame, exclude"),
        ("none", 1.0, ValidityError, "'none' has none"),
        ("guard-frame", 0.0, ValidityError, "above 0"),
        ("guard-frame", math.nan, ValidityError, "above 0"),
        ("counting-frame", 5.0, ValidityError, "leaves nothing of a window"),
    ],
)
def test_faults_of_rule_and_guard_are_named(rule, guard, fault, message):
    with pytest.raises(fault, match=message):
        weigh(np.ones((8, 8), dtype=int), rule, guard)


# At 1 nucleus per area number and mean area are 1 (Miles-Lantuejoul with polygons: 0.998, 1.003 at
# 6 mean spacings, 1.006, 0.996 at 10). Pixels, 8 across, move both by far less than the scatter.
@pytest.mark.parametrize("side", [6, 10])
def test_unbiased_rules_agree_with_the_truth_where_naive_ones_do_not(side):
    rules = ("none", "exclude", "miles-lantuejoul", "counting-frame", "guard-frame")
    totals = {rule: [] for rule in rules}
    for seed in range(80):
        image = voronoi(seed, side=side, across=8, cut=True)
        for rule, rows in totals.items():
            try:
                sizes = measure_sizes(image, edges=rule)
            except ValidityError:  # a grain as wide as a third of the window leaves no frame
                continue
            rows.append((sizes.weight.sum(), (sizes.weight * sizes.size).sum()))
    area = {}
    for rule in rules:
        number, total = np.array(totals[rule]).T
        assert len(number) >= 75
        area[rule] = total.sum() / number.sum()
        if rule in ("none", "exclude"):
            continue
        error = number.std(ddof=1) / math.sqrt(len(number))
        assert number.mean() == pytest.approx(1.0, abs=4 * error)
        spread = (total - number * area[rule]).std(ddof=1) / math.sqrt(len(number)) / number.mean()
        assert area[rule] == pytest.approx(1.0, abs=4 * spread)
    assert area["none"] < 0.85
    assert area["exclude"] < area["miles-lantuejoul"] - 0.02


def test_frames_count_grains_that_fall_apart_once():
    # curved grains of a Johnson-Mehl map: number 0.879357 per area (Meijering 1953, memory)
    rows = [
        measure_sizes(johnson_mehl(seed, side=9, across=10, cut=True), edges="counting-frame")
        for seed in range(12)
    ]
    number = np.array([sizes.weight.sum() for sizes in rows])
    error = number.std(ddof=1) / math.sqrt(len(number))
    assert number.mean() == pytest.approx(0.879357, abs=4 * error)
    assert error < 0.1
