"""Slow twins: one expression of plain numbers or one general solver each, never optimised.

Polypropylene after Koscher and Fulchiron, Polymer 43 (2002) 6931 (memory): growth law with
driving-force factor 1, sites exp(a dT + b).
"""

from __future__ import annotations

import math

import numpy as np
from scipy.integrate import quad, solve_ivp

T_M0 = 483.15
GAS = 8.31446261815324


def growth(temperature):
    t = np.asarray(temperature, dtype=float)
    grows = (t < T_M0) & (t > 239.15)
    safe = np.where(grows, t, 400.0)
    rate = 283.0 * np.exp(-6270.0 / (GAS * (safe - 239.15)) - 5.5e5 / (safe * (T_M0 - safe)))
    return np.where(grows, rate, 0.0)


def sites(lowest_temperature):
    undercooling = T_M0 - np.asarray(lowest_temperature, dtype=float)
    return np.where(undercooling > 0, np.exp(0.156 * undercooling + 15.1), 0.0)


def grown_length(temperature, times, *, points=()):
    """Grown length at some times, by adaptive quadrature of the law over time."""
    parts = [
        quad(
            lambda t: float(growth(temperature(t))),
            a,
            b,
            points=[p for p in points if a < p < b] or None,
            limit=500,
            epsrel=1e-12,
            epsabs=0,
        )[0]
        for a, b in zip([0.0, *times[:-1]], times, strict=True)
    ]
    return np.cumsum(parts)


def schneider(temperature, span, *, number=sites):
    """Schneider, Koeppl and Berger's rate equations on cooling, and what follows from them.

    phi3 = 8 pi N, phi2' = G phi3, phi1' = G phi2, phi0' = G phi1, fraction = 1 - exp(-phi0).
    Lambda' = phi1 by grown length. Lengths in units of 1e-5 m, numbers per (1e-5 m)^3.
    Returns the final values per cubic metre and the solution.
    """
    unit = 1e-5

    def slopes(t, y):
        phi2, phi1, phi0, _, _, _, _ = y
        now = temperature(t)
        g = float(growth(now)) / unit
        alive = math.exp(-phi0)
        step = 1e-4
        born = (number(temperature(t + step)) - number(temperature(t - step))) / (2 * step)
        return [
            g * 8 * math.pi * float(number(now)) * unit**3,
            g * phi2,
            g * phi1,
            alive * float(born) * unit**3,
            g * phi1**2 * alive,
            g * phi1**3 * alive,
            alive,
        ]

    start = [0, 0, 0, float(number(temperature(span[0]))) * unit**3, 0, 0, 0]
    found = solve_ivp(
        slopes, span, start, method="LSODA", rtol=1e-10, atol=1e-12, dense_output=True
    )
    end = found.y[:, -1]
    return {
        "number": end[3] / unit**3,
        "boundary": 2 / 3 * end[4] / unit,
        "lines": math.pi / 15 * end[5] / unit**2,
        "fraction": lambda t: 1 - np.exp(-found.sol(t)[2]),
        "mean_time": end[6] + span[0],
    }
