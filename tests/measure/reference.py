"""Slow twins of the measuring room, and maps to measure: drawn truths and tessellations."""

from __future__ import annotations

import math

import numpy as np
from scipy.spatial import cKDTree

from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage


def label_sums(labels, periodic):
    """Return per label: pixels, sums and extremes of the offsets from its first pixel."""
    rows = {}
    for label in np.unique(labels[labels > 0]):
        at = np.argwhere(labels == label)
        offset = at - at[0]
        for axis, n in enumerate(labels.shape):
            if periodic[axis]:
                offset[:, axis] = (offset[:, axis] + n // 2) % n - n // 2
        rows[int(label)] = (len(at), at[0], offset.sum(0), offset.min(0), offset.max(0))
    return rows


def face_counts(labels, periodic):
    """Return the faces between two labels, and all pairs of neighbours, across each axis."""
    faces, pairs = [], []
    for axis, n in enumerate(labels.shape):
        here = labels if periodic[axis] else labels.take(range(1, n), axis)
        there = np.roll(labels, 1, axis) if periodic[axis] else labels.take(range(n - 1), axis)
        faces.append(int(((here != there) & (here > 0) & (there > 0)).sum()))
        pairs.append(here.size)
    return faces, pairs


def image_of(labels, *, pixel=1.0, **edges):
    labels = np.asarray(labels)
    return LabelImage(labels=labels, frame=Frame(shape=labels.shape, pixel=pixel, **edges))


def patches(labels, periodic):  # noqa: C901 (one flood, told in one place)
    """Return the patches of a label image, found by flooding, and the label of each.

    Pixels hang together by faces, and by an edge where both pixels beside it carry other labels.
    """
    shape = labels.shape
    axes = range(labels.ndim)
    unit = np.eye(labels.ndim, dtype=int)
    faces = [s * unit[k] for k in axes for s in (1, -1)]
    edges = [(s * unit[k], t * unit[m]) for k in axes for m in axes if k < m
             for s in (1, -1) for t in (1, -1)]  # fmt: skip

    def at(place):
        wrapped = []
        for x, n, goes_on in zip(place, shape, periodic, strict=True):
            if not (0 <= x < n or goes_on):
                return None
            wrapped.append(x % n)
        return tuple(wrapped)

    def near(place):
        here, own = np.array(place), labels[place]
        yield from (at(here + step) for step in faces)
        for one, other in edges:
            beside = [at(here + one), at(here + other)]
            if all(b is not None and labels[b] not in (0, own) for b in beside):
                yield at(here + one + other)

    found = np.zeros(shape, dtype=int)
    owner = [0]
    for first in zip(*np.nonzero(labels), strict=True):
        if found[first]:
            continue
        owner.append(int(labels[first]))
        found[first] = len(owner) - 1
        todo = [first]
        while todo:
            for place in near(todo.pop()):
                if place is not None and labels[place] == owner[-1] and not found[place]:
                    found[place] = len(owner) - 1
                    todo.append(place)
    return found, owner


def exits(labels, label, step, periodic):
    """Return the pixels of a label from which one step leads out of it or out of the frame."""
    count = 0
    for place in np.argwhere(labels == label):
        target = place + step
        outside = (target < 0) | (target >= labels.shape)
        if (outside & ~np.array(periodic)).any():
            count += 1
        else:
            count += labels[tuple(target % labels.shape)] != label
    return count


def drawn(outline, size, *, centre, angle, pixels):
    """Return an image of one figure, turned; `outline` tells from x, y, size what lies inside."""
    y, x = np.mgrid[:pixels, :pixels] + 0.5
    y, x = y - centre[0], x - centre[1]
    turned = (
        x * math.cos(angle) + y * math.sin(angle),
        y * math.cos(angle) - x * math.sin(angle),
    )
    return image_of(outline(*turned, size).astype(int))


def grid_points(frame, shift=0.0):
    axes = [frame.centres(axis) + shift for axis in range(frame.dimension)]
    return np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, frame.dimension)


def voronoi(seed, *, side, across, dimension=2, section=False, cut=False):
    """Return a Poisson-Voronoi map with 1 nucleus per unit of area or volume.

    A window of edge `side`, with `across` pixels per unit of length; a plane section of a
    periodic volume where wanted; cut out of a larger periodic map where wanted.
    """
    rng = np.random.default_rng(seed)
    n = round(side * across)
    frame = Frame(shape=(n,) * dimension, pixel=1.0 / across, periodic=not cut)
    box = side + 5.0 if cut else side
    axes = dimension + section
    nuclei = rng.random((rng.poisson(box**axes), axes)) * box
    points = grid_points(frame)
    if section:
        points = np.column_stack([np.full(len(points), 0.5 * box), points])
    owner = cKDTree(nuclei, boxsize=box).query(points)[1]
    return LabelImage(labels=owner.reshape(frame.shape) + 1, frame=frame)


def johnson_mehl(seed, *, side, across, cut=False):
    """Return a Johnson-Mehl map with unit rates of growth and of nucleation per area.

    Slow and sure: births in order, each takes the pixels that it reaches before all earlier ones
    do, unless its own place is taken.
    """
    rng = np.random.default_rng(seed)
    n = round(side * across)
    frame = Frame(shape=(n,) * 2, pixel=1.0 / across, periodic=not cut)
    box = side + 5.0 if cut else side
    end = 2.6  # 1 - exp(-pi/3 * 2.6**3) = 1 - 1e-8 is covered by then
    number = rng.poisson(box**2 * end)
    births = np.sort(rng.random(number) * end)
    nuclei = rng.random((number, 2)) * box
    centres = frame.centres(0)
    arrival = np.full(frame.shape, math.inf)
    labels = np.zeros(frame.shape, dtype=np.uint32)
    alive = np.zeros(number, dtype=bool)
    for i in range(number):
        apart = np.abs(nuclei[:i][alive[:i]] - nuclei[i])
        apart = np.minimum(apart, box - apart)
        if (np.hypot(*apart.T) + births[:i][alive[:i]] < births[i]).any():
            continue
        alive[i] = True
        reach = end - births[i]
        rows, columns = (
            np.flatnonzero(np.minimum(d := np.abs(centres - c), box - d) < reach) for c in nuclei[i]
        )
        away = [
            np.minimum(d := np.abs(centres[k] - c), box - d)
            for k, c in zip((rows, columns), nuclei[i], strict=True)
        ]
        time = births[i] + np.hypot(away[0][:, None], away[1])
        part = np.ix_(rows, columns)
        won = time < arrival[part]
        arrival[part] = np.where(won, time, arrival[part])
        labels[part] = np.where(won, i + 1, labels[part])
    return LabelImage(labels=labels, frame=frame)
