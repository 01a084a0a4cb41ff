"""Slow but obvious measurements of label maps, and theory by plain sums, for published values.

All maps are periodic unless said otherwise; lengths are in pixels where no unit is given.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import digamma

from spheru.births import Births
from spheru.material.site_law import FixedSites
from spheru.nuclei.activation import Athermal, Homogeneous
from spheru.nuclei.region import Region
from spheru.nuclei.sampling import draw_births
from spheru.nuclei.source import Source
from spheru.nuclei.thinning import survivors
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Hold

MELTING, WARM = 450.0, 400.0  # K


class ConstantRate:
    """A nucleation rate of the same value at all temperatures."""

    def __init__(self, value) -> None:
        self.value = value

    def rate(self, temperature):
        return np.full_like(temperature, self.value)

    def breakpoints(self):
        return ()


def at_once(density, extent, *, seed):
    """Return a Poisson set of nuclei that are all born at the start."""
    random = np.random.default_rng(seed)
    number = random.poisson(density * math.prod(extent))
    position = random.random((number, len(extent))) * extent
    return Births(position=position, grown_length=np.zeros(number))


def populations(*kinds):
    """Return a source for each ("density" or "rate", value)."""
    return [
        Source(
            name=f"{k}",
            activation=Athermal(law=FixedSites(number=value), t_m0=MELTING)
            if kind == "density"
            else Homogeneous(law=ConstantRate(value)),
        )
        for k, (kind, value) in enumerate(kinds)
    ]


def survivors_of(sources, region, *, until, seed):
    """Return all nuclei drawn at a growth rate of 1 up to a time, and those that survive."""
    history = History(segments=(Hold(temperature=WARM, duration=until),))
    clock = Clock.from_history(history, np.ones_like)
    drawn = draw_births(sources, clock, region, seed=seed)
    return drawn, drawn.take(survivors(drawn, region))


def box(extent, **edges):
    """Return the region from the origin with these edges."""
    return Region(low=(0.0,) * len(extent), high=tuple(extent), **(edges or {"periodic": True}))


def neighbours(labels):
    """Return the number of labels that share a pixel face with each label, as by `bincount`.

    >>> neighbours(np.array([[1, 1, 2, 3]])).tolist()  # periodic: a ring of three
    [0, 2, 2, 2]
    """
    most = int(labels.max()) + 1
    pairs = []
    for axis in range(labels.ndim):
        here, there = labels, np.roll(labels, -1, axis)
        differ = here != there
        low, high = (
            f(here[differ], there[differ]).astype(np.int64) for f in (np.minimum, np.maximum)
        )
        pairs.append(np.unique(low * most + high))
    low, high = np.divmod(np.unique(np.concatenate(pairs)), most)
    return np.bincount(low, minlength=most) + np.bincount(high, minlength=most)


def chords(labels):
    """Return the lengths of the runs of one label along all rows of the last axis.

    >>> chords(np.array([[1, 1, 2, 2, 2, 1], [3, 3, 3, 4, 4, 4]])).tolist()
    [3, 3, 3, 3]

    A row of one label only has no end and gives none.
    """
    rows = labels.reshape(-1, labels.shape[-1])
    ends, places = np.nonzero(rows != np.roll(rows, -1, axis=1))
    lengths = np.diff(places, append=0)
    last = np.flatnonzero(np.diff(ends, append=-1))
    first = np.append(0, last[:-1] + 1)
    lengths[last] = places[first] + rows.shape[1] - places[last]
    return lengths


def triple_points(labels):
    """Return the number of points in the planes of the last two axes where three labels meet.

    They stand where windows of two by two pixels hold three labels, twice where they hold four; a
    label that fills two opposite corners hangs together there and parts the two others.

    >>> triple_points(np.array([[1, 1, 1, 1], [1, 2, 3, 1], [1, 1, 1, 1]]))  # 2 beside 3, within 1
    2
    """
    here, right = labels, np.roll(labels, -1, axis=-1)
    down, across = np.roll(here, -1, axis=-2), np.roll(right, -1, axis=-2)
    sides = [here == right, right == across, across == down, down == here]
    equal = np.sum(sides, axis=0, dtype=np.uint8)
    diagonal = (here == across) | (right == down)
    return int(np.count_nonzero(equal == 1) + 2 * np.count_nonzero((equal == 0) & ~diagonal))


def gamma_shape(values):
    """Return the shape of the gamma law that makes the values most likely."""
    ratio = math.log(np.mean(values)) - np.mean(np.log(values))
    return brentq(lambda shape: math.log(shape) - digamma(shape) - ratio, 1e-2, 1e3)


def kolmogorov(grown_length, density, dimension):
    """Return the transformed fraction at the nodes, by summing over all births before.

    The nuclei of an interval are taken to be born in its middle.
    """
    ball = {2: math.pi, 3: 4 * math.pi / 3}[dimension]
    born = (grown_length[1:] + grown_length[:-1]) / 2
    radius = np.maximum(grown_length[:, None] - born, 0.0)
    extended = ball * (radius**dimension @ np.diff(density))
    extended += ball * density[0] * (grown_length - grown_length[0]) ** dimension
    return -np.expm1(-extended)


def tile_means(values, tiles):
    """Return the means over equal tiles, `tiles` along each axis."""
    shape = [n for size in values.shape for n in (tiles, size // tiles)]
    return values.reshape(shape).mean(axis=tuple(range(1, 2 * values.ndim, 2))).ravel()


def assert_within(found, value, error, less=0.0, more=0.0):
    """Fail unless a value lies within four standard errors, less or more what pixels do."""
    assert value - less - 4 * error <= found <= value + more + 4 * error


def rows(*table):
    """Parametrise a test by rows of name, value, standard error, and what pixels take and add."""
    padded = [(*row, *(0.0,) * (5 - len(row))) for row in table]
    return pytest.mark.parametrize(
        ("name", "value", "error", "less", "more"),
        [pytest.param(*row, id=row[0].replace(" ", "-")) for row in padded],
    )
