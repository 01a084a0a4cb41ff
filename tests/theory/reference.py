"""Slow twins: the defining integrals by adaptive quadrature, one at a time."""

from __future__ import annotations

import itertools
import math

from scipy.integrate import quad

BALL = {2: math.pi, 3: 4 * math.pi / 3}


def extended(length, *, start, birth, dimension):
    """Extended fraction for nuclei `start` at 0 and `birth(s)` per grown length."""
    later = quad(lambda s: birth(s) * (length - s) ** dimension, 0, length, epsrel=1e-11)[0]
    return BALL[dimension] * (start * length**dimension + later)


def slope(length, *, start, birth, dimension):
    k = dimension - 1
    later = quad(lambda s: birth(s) * (length - s) ** k, 0, length, epsrel=1e-11)[0]
    return BALL[dimension] * dimension * (start * length**k + later)


def finals(end, *, start, birth, dimension):
    """Number, boundary density, triple-line density and mean grown length at arrival."""
    case = {"start": start, "birth": birth, "dimension": dimension}

    def over(f):
        return quad(f, 0, end, epsrel=1e-9, epsabs=1e-12, limit=200)[0]

    def alive(u):
        return math.exp(-extended(u, **case))

    pairs = over(lambda u: slope(u, **case) ** 2 * alive(u))
    triples = over(lambda u: slope(u, **case) ** 3 * alive(u))
    return {
        "number": start + over(lambda u: birth(u) * alive(u)),
        "boundary": pairs * (2 / math.pi if dimension == 2 else 2 / 3),
        "lines": triples * math.pi / 15,
        "mean": (over(alive) - end * alive(end)) / (1 - alive(end)),
    }


def film_fraction(radius, *, thickness, density, low, high):
    """Fraction of a film after growth to a radius, all nuclei there from the start."""

    def cap(h):
        return math.pi * (radius - h) ** 2 * (2 * radius + h) / 3 if h < radius else 0.0

    def disc(h):
        return math.pi * max(radius**2 - h**2, 0.0)

    def alive(z):
        ball = 4 * math.pi / 3 * radius**3 - cap(z) - cap(thickness - z)
        return math.exp(-density * ball - low * disc(z) - high * disc(thickness - z))

    kinks = [radius, thickness - radius]
    near = [k + side * 10.0**-n for k in kinks for n in range(1, 7) for side in (-1, 1)]
    borders = sorted({0.0, thickness, *(p for p in kinks + near if 0 < p < thickness)})
    parts = [quad(alive, a, b, epsabs=1e-13)[0] for a, b in itertools.pairwise(borders)]
    return 1 - sum(parts) / thickness
