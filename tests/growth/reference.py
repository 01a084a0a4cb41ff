"""Slow twin of the exact engine: every pixel against every birth in float64."""

from __future__ import annotations

import math

import numpy as np


def tessellate(births, frame, *, end=math.inf, period_z=None):
    """Labels (rows + 1) and arrival [m] by brute force; no relabelling of sections."""
    h = frame.pixel
    axes = frame.dimension
    squared = [np.zeros(1)] * 3  # z, y, x
    for axis, count in enumerate(frame.shape):
        q = (births.position[:, births.dimension - axes + axis] - frame.origin[axis]) / h
        shape = [1] * (axes + 1)
        shape[axis] = count
        period = count if frame.periodic[axis] else None
        centres = (np.arange(count) + 0.5).reshape(shape)
        squared[3 - axes + axis] = _distance(centres, q, period) ** 2
    if frame.plane_z is not None:
        q = (births.position[:, 0] - frame.plane_z) / h + 0.5
        squared[0] = _distance(0.5, q, None if period_z is None else period_z / h) ** 2
    value = births.grown_length / h + np.sqrt(squared[0] + squared[1] + squared[2])
    value = np.broadcast_to(value, (*frame.shape, len(births)))
    owner = np.argmin(value, axis=-1)
    first = np.min(value, axis=-1)
    reached = first <= end / h
    return np.where(reached, owner + 1, 0), np.where(reached, first * h, np.inf)


def _distance(centres, q, period):
    if period is None:
        return np.abs(centres - q)
    q = np.mod(q, period)
    q = np.where(q < period, q, 0.0)
    distance = np.abs(centres - q)
    return np.minimum(distance, period - distance)
