"""Slow twins of the thinning, and clocks and laws made by hand."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from types import SimpleNamespace

import numpy as np

from spheru.nuclei.activation import Activation


def survivors(position, length, region):
    """Every birth against every other and its images, in float64."""
    steps = [(-1, 0, 1) if p else (0,) for p in region.periodic]
    alive = np.ones(len(length), dtype=bool)
    for shift in itertools.product(*steps):
        moved = position + np.array(shift) * region.extent
        for i in range(len(length)):
            distance = np.sqrt(((moved - position[i]) ** 2).sum(axis=1))
            alive[i] &= not (length + distance < length[i]).any()
    return alive


def survivors_in_order_of_birth(position, length, region):
    """Follow the births in time; only crystals that live swallow later ones."""
    alive = np.zeros(len(length), dtype=bool)
    extent, periodic = np.array(region.extent), np.array(region.periodic)
    for i in np.argsort(length, kind="stable"):
        apart = np.abs(position[alive] - position[i])
        apart = np.where(periodic, np.minimum(apart, extent - apart), apart)
        distance = np.sqrt((apart**2).sum(axis=1))
        alive[i] = not (length[alive] + distance < length[i]).any()
    return alive


def clock(time, *, grown_length=None, temperature=None):
    """Return nodes that can be worked by hand; integrals are taken by the trapezium rule."""
    time = np.asarray(time, dtype=float)
    temperature = 400.0 - time if temperature is None else np.asarray(temperature, dtype=float)

    def integral(rate):
        values = rate(temperature)
        parts = (values[1:] + values[:-1]) / 2 * np.diff(time)
        return np.concatenate([[0.0], np.cumsum(parts)])

    return SimpleNamespace(
        time=time,
        temperature=temperature,
        grown_length=time if grown_length is None else np.asarray(grown_length, dtype=float),
        lowest_temperature=np.minimum.accumulate(temperature),
        integral=integral,
    )


@dataclass(frozen=True, kw_only=True)
class Given(Activation):
    """Cumulative numbers at the nodes, as given."""

    numbers: tuple[float, ...]

    def density(self, clock):  # noqa: ARG002 (the numbers are given)
        return np.array(self.numbers)

    def temperatures(self):
        return ()


def constant_rate(value):
    """Return a rate law that does not depend on temperature."""
    return SimpleNamespace(rate=lambda kelvins: np.full_like(kelvins, value), breakpoints=tuple)
