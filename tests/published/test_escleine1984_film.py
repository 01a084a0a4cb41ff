"""Conversion in a film of thickness 1 and density 1.

Method after J. M. Escleine, B. Monasse, E. Wey, J. M. Haudin, Colloid Polym. Sci. 262 (1984) 366
and N. Billon, J. M. Escleine, J. M. Haudin, ibid. 267 (1989) 668 (both from memory); values by
quadrature, five digits, the one at R = 0.4 also by brute force (0.2036 +- 0.0021).
"""

from __future__ import annotations

import pytest

from spheru.theory.film import film_mean_field


@pytest.mark.parametrize(
    ("radius", "fraction"), [(0.3, 0.09537), (0.4, 0.20306), (0.5, 0.34435)], ids=str
)
def test_nuclei_inside(radius, fraction):
    field = film_mean_field([0.0, radius], [1.0, 1.0], thickness=1.0)
    assert field.fraction[-1] == pytest.approx(fraction, abs=5e-6)


def test_nuclei_on_the_two_faces_only():
    faces = ([1.0, 1.0], [1.0, 1.0])
    field = film_mean_field([0.0, 0.6], [0.0, 0.0], thickness=1.0, face_density=faces)
    assert field.fraction[-1] == pytest.approx(0.58884, abs=5e-6)
