"""Slow twins and small maps for the tests of the output."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
from scipy.spatial import cKDTree

from spheru.births import Births
from spheru.image.frame import Frame
from spheru.image.label_image import LabelImage


def voronoi_map(shape, count, *, seed=1, pixel=1e-6, periodic=False, reach=np.inf):
    """Return a Voronoi map with its births; pixels further than `reach` pixels stay 0."""
    rng = np.random.default_rng(seed)
    points = rng.random((count, len(shape))) * shape
    grid = np.stack(np.meshgrid(*[np.arange(n) + 0.5 for n in shape], indexing="ij"), axis=-1)
    distance, nearest = cKDTree(points, boxsize=shape if periodic else None).query(grid)
    births = Births(
        position=points * pixel,
        grown_length=np.zeros(count),
        time=np.linspace(10.0, 20.0, count),
        temperature=np.full(count, 393.15),
        origin=np.arange(count) % 2,
        origin_names=("material", "agent"),
    )
    return LabelImage(
        labels=np.where(distance <= reach, nearest + 1, 0),
        frame=Frame(shape=shape, pixel=pixel, periodic=periodic),
        births=births,
    )


def neighbour_pairs(labels, periodic):
    """Return the pairs of labels that share an edge of a pixel, pixel by pixel."""
    rows, columns = labels.shape
    pairs = set()
    for i in range(rows):
        for j in range(columns):
            for k, m, wraps in ((i + 1, j, periodic[0]), (i, j + 1, periodic[1])):
                if (k < rows and m < columns) or wraps:
                    one, other = sorted((int(labels[i, j]), int(labels[k % rows, m % columns])))
                    if one != other and one > 0:
                        pairs.add((one, other))
    return sorted(pairs)


def conversion_curves(*, cooling=True):
    """Return curves of a crystallisation at 120 degC (10 K/min), or half done after 600 s."""
    time = np.linspace(0.0, 1400.0, 300)
    if cooling:
        temperature = 423.15 - time / 24
        fraction, expected = (1 / (1 + np.exp((temperature - t) / 1.2)) for t in (393.15, 393.0))
    else:
        temperature = np.full(time.size, 405.0)
        fraction, expected = (1 - 0.5 ** ((time / half) ** 3) for half in (600.0, 590.0))
    peaks = ((393.15, 1.0), (400.0, 0.2)) if cooling else ()
    return SimpleNamespace(
        time=time,
        temperature=temperature,
        fraction=fraction,
        fraction_estimate=expected,
        heat_flow=np.gradient(fraction, time) * 9e4,
        heat_flow_estimate=np.gradient(expected, time) * 9e4,
        landmarks=SimpleNamespace(
            peak_temperature=393.15 if cooling else None,
            peaks=peaks,
            smoothing_time=4.8,
            smoothing_temperature=0.2 if cooling else None,
        ),
    )
