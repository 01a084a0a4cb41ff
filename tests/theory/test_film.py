from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.errors import ValidityError
from spheru.theory.conversion import mean_field
from spheru.theory.film import film_mean_field
from tests.theory.reference import film_fraction

POPULATIONS = {
    "inside": (1.0, 0.0, 0.0),
    "faces": (0.0, 1.0, 1.0),
    "low-face": (0.0, 2.0, 0.0),
    "high-face": (0.0, 0.0, 3.0),
    "all-unequal": (5.0, 2.0, 0.5),
    "crowded-face": (0.01, 5000.0, 0.0),
}


def film(radius, density, low, high, **more):
    lengths = np.linspace(0, radius, 7)
    faces = tuple(None if s == 0 else np.full(7, s) for s in (low, high))
    return film_mean_field(lengths, np.full(7, density), thickness=1.0, face_density=faces, **more)


@pytest.mark.parametrize("name", POPULATIONS)
@pytest.mark.parametrize("radius", [0.02, 0.3, 0.5, 0.7, 0.99, 1.01, 2.5])
def test_fraction_agrees_with_adaptive_quadrature(name, radius):
    density, low, high = POPULATIONS[name]
    wanted = film_fraction(radius, thickness=1.0, density=density, low=low, high=high)
    assert film(radius, density, low, high).fraction[-1] == pytest.approx(wanted, abs=1e-6)


def test_thick_film_is_the_bulk():
    nodes = np.linspace(0, 1.5, 1501)
    born = 0.5 + nodes**2
    bulk = mean_field(nodes, born, dimension=3)
    field = film_mean_field(nodes, born, thickness=1e4)
    np.testing.assert_allclose(field.fraction, bulk.fraction, atol=1e-4)
    np.testing.assert_allclose(field.fraction_mid, bulk.fraction, atol=1e-12)
    assert field.number_per_area == pytest.approx(1e4 * bulk.number_density, rel=1e-4)


def test_thin_film_is_growth_in_a_plane():
    nodes = np.linspace(0, 3, 3001)
    born = 0.3 + 0.5 * nodes
    flat = mean_field(nodes, born, dimension=2)
    field = film_mean_field(nodes, born / 1e-4, thickness=1e-4)
    np.testing.assert_allclose(field.fraction, flat.fraction, atol=2e-4)
    assert field.number_per_area == pytest.approx(flat.number_density, rel=2e-4)


def test_mirrored_films_agree():
    nodes = np.linspace(0, 2, 401)
    inside, a, b = 0.3 * nodes, 1.0 + nodes, 2 * nodes**2
    one = film_mean_field(nodes, inside, thickness=1.0, face_density=(a, b))
    two = film_mean_field(nodes, inside, thickness=1.0, face_density=(b, a))
    np.testing.assert_allclose(one.fraction, two.fraction, atol=1e-9)
    assert one.number_per_area == pytest.approx(two.number_per_area)


def test_births_on_a_face_within_the_grown_layer_do_not_count():
    """1 per area from the start and 5 more at R = 0.5 on one face: exp(-pi/4) of the 5 live."""
    nodes = np.array([0.0, 0.5, 0.5, 9.0])
    field = film_mean_field(
        nodes,
        np.zeros(4),
        thickness=1.0,
        face_density=(np.array([1.0, 1.0, 6.0, 6.0]), None),
    )
    assert field.number_per_area == pytest.approx(1 + 5 * math.exp(-math.pi / 4), rel=1e-12)


def test_faces_cut_growth_and_delay_it():
    nodes = np.linspace(0, 2, 201)
    bulk = mean_field(nodes, np.ones(201), dimension=3)
    field = film_mean_field(nodes, np.ones(201), thickness=1.0)
    assert (field.fraction <= bulk.fraction + 1e-12).all()
    assert (field.fraction <= field.fraction_mid + 1e-12).all()
    assert (np.diff(field.fraction) >= 0).all()


@pytest.mark.parametrize(
    ("thickness", "faces", "said"),
    [
        pytest.param(0.0, (None, None), "thickness above 0 m", id="no-thickness"),
        pytest.param(1.0, ([1.0], None), "as many densities", id="shape"),
        pytest.param(1.0, (None, [2.0, 1.0]), "never fall", id="falls"),
    ],
)
def test_faults_are_named(thickness, faces, said):
    with pytest.raises(ValidityError, match=said):
        film_mean_field([0.0, 1.0], [1.0, 1.0], thickness=thickness, face_density=faces)
