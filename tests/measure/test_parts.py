"""Sums put together from parts equal those of one pass over the whole, however it is cut."""

from __future__ import annotations

import itertools
from dataclasses import fields

import numpy as np
import pytest

from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage
from spheru.measure.labels import sum_labels
from spheru.measure.parts import merge_parts, sum_part

pytestmark = pytest.mark.kernel


def voronoi(shape, periodic, count, seed, *, melt=0.2):
    """Return labels of the nearest of some random points, some of them melt."""
    generator = np.random.default_rng(seed)
    points = generator.random((count, 3)) * shape
    distance = 0.0
    for axis, n in enumerate(shape):
        along = np.abs(np.arange(n)[:, None] + 0.5 - points[:, axis])
        along = np.minimum(along, n - along) if periodic[axis] else along
        view = [None, None, None, slice(None)]
        view[axis] = slice(None)
        distance = distance + along[tuple(view)] ** 2
    number = generator.permutation(count) + 1
    number[generator.random(count) < melt] = 0
    return number[distance.argmin(axis=-1)].astype(np.uint32)


def windows(shape, chunk):
    axes = [[slice(a, min(a + chunk, n)) for a in range(0, n, chunk)] for n in shape]
    return list(itertools.product(*axes))


def put_together(labels, frame, chunk, *, order=None, rows=None):
    def part(window):
        def below(axis):
            layer = list(window)
            layer[axis] = (window[axis].start - 1) % frame.shape[axis]
            return labels[tuple(layer)]

        own = np.ascontiguousarray(labels[window])
        own.setflags(write=False)
        return sum_part(own, frame, [w.start for w in window], below)

    def bands():
        if rows is not None:
            rows.append(True)
        for z, y in itertools.product(
            range(0, frame.shape[0], chunk), range(0, frame.shape[1], chunk)
        ):
            yield (z, y, 0), labels[z : z + chunk, y : y + chunk]

    parts = [part(window) for window in windows(frame.shape, chunk)]
    if order is not None:
        parts = [parts[k] for k in order.permutation(len(parts))]
    return merge_parts(parts, frame, int(labels.max()) + 3, bands)


def assert_same(found, expected):
    for field in fields(expected):
        one, other = getattr(found, field.name), getattr(expected, field.name)
        assert one.dtype == other.dtype, field.name
        np.testing.assert_array_equal(one, other, err_msg=field.name)


@pytest.mark.parametrize("chunk", [3, 8, 13, 64])
@pytest.mark.parametrize("count", [2, 40], ids=["long", "short"])
@pytest.mark.parametrize(
    ("shape", "periodic"),
    [
        pytest.param((16, 16, 16), (True, True, True), id="periodic"),
        pytest.param((17, 11, 22), (True, True, True), id="odd"),
        pytest.param((17, 11, 22), (False, False, False), id="cut"),
        pytest.param((4, 20, 18), (False, True, True), id="film"),
        pytest.param((9, 20, 1), (True, False, True), id="thin"),
    ],
)
def test_parts_give_the_sums_of_the_whole(shape, periodic, count, chunk):
    labels = voronoi(shape, periodic, count, seed=count + chunk)
    frame = Frame(shape=shape, pixel=1e-6, periodic=periodic)
    found = put_together(labels, frame, chunk)
    assert_same(found, sum_labels(LabelImage(labels=labels, frame=frame)))


def test_the_order_of_the_parts_does_not_matter():
    labels = voronoi((15, 14, 13), (True, False, True), 30, seed=1)
    frame = Frame(shape=labels.shape, pixel=1e-6, periodic=(True, False, True))
    generator = np.random.default_rng(2)
    expected = put_together(labels, frame, 4)
    for _ in range(3):
        assert_same(put_together(labels, frame, 4, order=generator), expected)


@pytest.mark.parametrize(("count", "called"), [(2, True), (200, False)], ids=["long", "short"])
def test_whole_rows_are_read_again_only_for_labels_longer_than_half_a_period(count, called):
    labels = voronoi((24, 24, 24), (True,) * 3, count, seed=5, melt=0.0)
    frame = Frame(shape=labels.shape, pixel=1e-6, periodic=True)
    asked = []
    put_together(labels, frame, 8, rows=asked)
    assert bool(asked) == called


def test_scattered_labels_and_none_at_all():
    generator = np.random.default_rng(3)
    frame = Frame(shape=(7, 8, 9), pixel=1e-6, periodic=(True, False, True))
    for most in (0, 4, 500):
        labels = generator.integers(0, most + 1, frame.shape).astype(np.uint32)
        found = put_together(labels, frame, 4)
        assert_same(found, sum_labels(LabelImage(labels=labels, frame=frame)))
