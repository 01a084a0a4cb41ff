"""Conversion between walls: film and closed box, grown against published forms.

Sources: J. M. Escleine, B. Monasse, E. Wey, J. M. Haudin, Colloid Polym. Sci. 262 (1984) 366;
N. Billon, J. M. Escleine, J. M. Haudin, ibid. 267 (1989) 668 (from memory); values by quadrature,
the film at R = 0.4 also by brute force (0.2036 +- 0.0021). Thickness and densities are 1.

Bands are four standard errors from the scatter over tiles or boxes; arrival is exact at pixel
centres. A mean over the ten middles of layers stands for that over the thickness.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.births import Births
from spheru.growth.exact import tessellate
from spheru.image.frame import Frame
from spheru.nuclei.placement import Faces
from spheru.nuclei.sampling import draw_births
from spheru.nuclei.source import Source
from spheru.thermal.clock import Clock
from spheru.thermal.history import History, Hold
from tests.published.reference import assert_within, box, populations

LAYERS, WIDE = 10, 960  # pixels of 0.1
EDGES = {"periodic": (False, True, True), "closed": (True, False, False)}


def film_arrival(sources, seed):
    frame = Frame(shape=(LAYERS, WIDE, WIDE), pixel=1 / LAYERS, **EDGES)
    history = History(segments=(Hold(temperature=400.0, duration=3.0),))
    clock = Clock.from_history(history, np.ones_like)
    born = draw_births(sources, clock, box(frame.extent, **EDGES), seed=seed)
    return tessellate(born, frame, arrival=True).arrival


def assert_film(arrival, radius, expected, covered):
    """`covered` is the expected number of spheres over a height, whose mean over layers counts."""
    height = (np.arange(LAYERS) + 0.5) / LAYERS
    layers = -np.expm1(-covered(height)).mean()
    assert layers == pytest.approx(expected, abs=2e-3)  # ten layers are enough
    tiles = (arrival <= radius).reshape(LAYERS, 12, WIDE // 12, 12, WIDE // 12).mean((0, 2, 4))
    assert_within(tiles.mean(), layers, tiles.std(ddof=1) / 12)


@pytest.fixture(scope="module")
def bulk():
    return film_arrival(populations(("density", 1.0)), seed=21)


def cap(radius, height):
    """Volume of a sphere beyond a plane at a distance from its centre."""
    return math.pi * (radius - height).clip(0) ** 2 * (2 * radius + height) / 3


@pytest.mark.parametrize(
    ("radius", "fraction"), [(0.3, 0.09537), (0.4, 0.20306), (0.5, 0.34435)], ids=str
)
def test_nuclei_inside_a_film(bulk, radius, fraction):
    def covered(z):
        return 4 / 3 * math.pi * radius**3 - cap(radius, z) - cap(radius, 1 - z)

    assert_film(bulk, radius, fraction, covered)


def test_film_lags_behind_the_bulk(bulk):
    """At R = 0.4 the bulk law gives 0.2352, walls or not."""
    assert np.mean(bulk <= 0.4) < 0.2352 - 0.02


def test_nuclei_on_the_two_faces_only():
    faces = Faces(faces=(("z", "low"), ("z", "high")))
    source = populations(("density", 1.0))[0]
    arrival = film_arrival([Source(name="f", activation=source.activation, placement=faces)], 22)

    def covered(z):
        return math.pi * ((0.36 - z**2).clip(0) + (0.36 - (1 - z) ** 2).clip(0))

    assert_film(arrival, 0.6, 0.58884, covered)


@pytest.mark.parametrize(
    ("edges", "fraction"),
    [({"closed": True}, 0.52682), ({"periodic": True}, 0.54406)],
    ids=["closed", "periodic"],
)
def test_plane_box_of_ten_by_ten_at_radius_one_half(edges, fraction):
    """1 - exp(-pi/4) where it is periodic; near walls nuclei are missing on one side."""
    random = np.random.default_rng(23)
    frame = Frame(shape=(50, 50), pixel=0.2, **edges)
    found = []
    for _ in range(600):
        position = 10 * random.random((random.poisson(100), 2))
        born = Births(position=position, grown_length=np.zeros(len(position)))
        found.append(tessellate(born, frame, end=0.5, threads=1).fraction)
    error = np.std(found, ddof=1) / math.sqrt(len(found))
    assert error < 0.003
    assert_within(np.mean(found), fraction, error)
