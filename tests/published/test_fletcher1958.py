"""The size of the particle in heterogeneous nucleation.

N. H. Fletcher, J. Chem. Phys. 29 (1958) 572. The formula is recalled; the rows were computed with
it, apart from this package, and rounded to six places. Its limits are the cap on a flat face
(D. Turnbull, J. Chem. Phys. 18 (1950) 198) and the free sphere.
"""

import pytest

from spheru.material.nucleation_barrier import flat_cap_factor, fletcher_factor

RATIOS = (0.1, 0.5, 1.0, 2.0, 10.0, 100.0)
# m = cos(contact angle): factor at each ratio of particle to critical radius, flat limit
ROWS = {
    0.5: ((0.984779, 0.762260, 0.500000, 0.303848, 0.178975, 0.158375), 0.156250),
    0.0: ((0.993444, 0.904508, 0.792893, 0.673762, 0.537376, 0.503750), 0.500000),
    -0.5: ((0.998408, 0.977859, 0.950962, 0.916995, 0.863317, 0.845844), 0.843750),
}


@pytest.mark.parametrize("m", ROWS)
def test_factor_of_a_particle_to_six_places(m):
    assert fletcher_factor(m, RATIOS).round(6).tolist() == list(ROWS[m][0])


@pytest.mark.parametrize("m", ROWS)
def test_factor_of_a_flat_face(m):
    assert float(flat_cap_factor(m)) == ROWS[m][1]
    assert float(fletcher_factor(m, 1e7)) == pytest.approx(ROWS[m][1], abs=1e-6)
