"""Conversion of grown maps at constant rates against Kolmogorov and Avrami.

Sources: A. N. Kolmogorov, Izv. Akad. Nauk SSSR Ser. Mat. 3 (1937) 355; M. Avrami, J. Chem. Phys.
7 (1939) 1103; 8 (1940) 212 (from memory; half times and means by algebra). Growth rate 1.

The arrival of the front at pixel centres is exact, so pixels take nothing. Bands are four standard
errors from the scatter over 64 tiles, each several spherulites wide.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import quad

from spheru.growth.exact import tessellate
from spheru.image.frame import Frame
from tests.published.reference import assert_within, box, populations, survivors_of, tile_means

BALL = {2: math.pi, 3: 4 * math.pi / 3}
TILES = {2: 8, 3: 4}
FRACTIONS = (0.05, 0.2, 0.5, 0.8, 0.95)
END = 3.5  # by then all is transformed in all cases below


def grown(dimension, kinds, seed, **options):
    """Return births and map of a periodic box with some 9000 nuclei or more."""
    shape, pixel = {2: ((800,) * 2, 0.125), 3: ((120,) * 3, 0.2)}[dimension]
    frame = Frame(shape=shape, pixel=pixel, periodic=True)
    sources = populations(*kinds)
    born = survivors_of(sources, box(frame.extent), until=END, seed=seed)[1]
    return born, tessellate(born, frame, arrival=True, **options)


def assert_mean(values, expected):
    """Fail unless the mean of an image lies within four standard errors, judged by its tiles."""
    tiles = tile_means(np.asarray(values, dtype=float), TILES[values.ndim])
    error = tiles.std(ddof=1) / math.sqrt(len(tiles))
    assert error > 0
    assert abs(values.mean() - expected) < 4 * error


# extended fraction factor * t^power, half time, mean time of a point (None: not tabulated)
CASES = {
    "plane, at once": (2, "density", math.pi, 2, 0.469719, 0.5),
    "plane, at a rate": (2, "rate", math.pi / 3, 3, 0.871496, None),
    "space, at once": (3, "density", 4 * math.pi / 3, 3, 0.549008, 0.553960),
    "space, at a rate": (3, "rate", math.pi / 3, 4, 0.901985, 0.896012),
}


@pytest.fixture(scope="module", params=CASES, ids=lambda name: name.replace(", ", "-"))
def case(request):
    dimension, kind, *law = CASES[request.param]
    return *law, grown(dimension, [(kind, 1.0)], seed=11)[1].arrival


def test_half_time(case):
    half, arrival = case[2], case[-1]
    assert_mean(arrival <= half, 0.5)


@pytest.mark.parametrize("fraction", FRACTIONS)
def test_conversion(case, fraction):
    factor, power, _, _, arrival = case
    time = (-math.log1p(-fraction) / factor) ** (1 / power)
    assert_mean(arrival <= time, fraction)


def test_mean_time_of_a_point(case):
    factor, power, _, mean, arrival = case
    exact = quad(lambda t: math.exp(-factor * t**power), 0, np.inf)[0]
    assert mean is None or mean == pytest.approx(exact, abs=5e-7)
    assert_mean(arrival, exact)


@pytest.fixture(scope="module", params=[2, 3], ids=["plane", "space"])
def mixture(request):
    """Half a nucleus per unit of space at once and half of one per unit of space and time."""
    dimension = request.param
    parts = (
        lambda t: 0.5 * BALL[dimension] * t**dimension,
        lambda t: 0.5 * BALL[dimension] / (dimension + 1) * t ** (dimension + 1),
    )
    return parts, *grown(dimension, [("density", 0.5), ("rate", 0.5)], seed=12)


@pytest.mark.parametrize("time", [0.3, 0.5, 0.7, 0.9])
def test_extended_fractions_of_two_populations_add_up(mixture, time):
    parts, _, image = mixture
    assert_mean(image.arrival <= time, -math.expm1(-sum(part(time) for part in parts)))


def test_final_number_of_a_mixture(mixture):
    """N = N(0) + int I exp(-Lambda) dt."""
    parts, born, image = mixture
    late = 0.5 * quad(lambda t: math.exp(-sum(part(t) for part in parts)), 0, END)[0]
    for origin, density in enumerate((0.5, late)):
        expected = density * image.frame.measure
        number = np.count_nonzero(born.origin == origin)
        assert abs(number - expected) < 4 * math.sqrt(expected)  # at most that of Poisson points


def test_share_of_material_of_each_part_of_a_mixture(mixture):
    """The first population ends up with int Lambda_1' exp(-Lambda) dt of the material."""
    parts, born, image = mixture
    dimension = image.frame.dimension

    def rate(t):
        slope = 0.5 * dimension * BALL[dimension] * t ** (dimension - 1)
        return slope * math.exp(-sum(part(t) for part in parts))

    assert_mean(born.origin[image.labels - 1] == 0, quad(rate, 0, END)[0])


@pytest.mark.parametrize(
    ("dimension", "variation"), [(2, 0.280176), (3, 0.179032)], ids=["plane", "space"]
)
def test_two_populations_at_once_share_the_material_by_their_numbers(dimension, variation):
    """0.3 and 0.7 per unit; binomial over n cells, inflated by 1 + CV^2 of their sizes."""
    born, image = grown(dimension, [("density", 0.3), ("density", 0.7)], seed=13)
    share = np.mean(born.origin[image.labels - 1] == 0)
    assert_within(share, 0.3, math.sqrt(0.3 * 0.7 * (1 + variation) / len(born)))


@pytest.mark.parametrize("dimension", [2, 3])
def test_history_that_ends_early(dimension):
    """Fraction and number are those of the moment: dN/dt = I (1 - alpha), alpha = 0.5."""
    power, half = dimension + 1, {2: 0.871496, 3: 0.901985}[dimension]
    born, image = grown(dimension, [("rate", 1.0)], seed=14, end=half)
    assert_mean(image.labels > 0, 0.5)
    density = quad(lambda t: math.exp(-math.pi / 3 * t**power), 0, half)[0]
    expected = density * image.frame.measure
    own = np.unique(image.labels[image.labels > 0])
    assert born.grown_length[own - 1].max() <= half
    # the last ones have not reached the centre of a pixel yet, h/sqrt(2 or 4/3) away at most
    unseen = 0.5 * image.frame.pixel * math.sqrt(dimension) * image.frame.measure
    assert_within(len(own), expected, math.sqrt(expected), unseen)
