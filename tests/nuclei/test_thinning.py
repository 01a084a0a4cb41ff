from __future__ import annotations

import math

import numpy as np
import pytest

from spheru.births import Births
from spheru.errors import ValidityError
from spheru.nuclei.activation import Homogeneous
from spheru.nuclei.region import Region
from spheru.nuclei.sampling import draw_births
from spheru.nuclei.source import Source
from spheru.nuclei.thinning import survivors
from tests.nuclei import reference

BOXES = {
    "square, periodic": ((1.0, 1.0), True),
    "square, cut": ((1.0, 1.0), False),
    "strip, mixed": ((0.1, 3.0), (True, False)),
    "cube, periodic": ((1.0, 1.0, 1.0), True),
    "cube, cut": ((1.0, 1.0, 1.0), False),
    "thin film": ((1e-3, 1.0, 1.0), (False, True, True)),
    "thin periodic layer": ((1e-3, 1.0, 1.0), True),
    "needle": ((0.02, 0.03, 5.0), (True, False, True)),
}


def region(extent, periodic):
    corner = np.linspace(-0.7, 0.4, len(extent))
    return Region(low=tuple(corner), high=tuple(corner + extent), periodic=periodic)


def births(position, length):
    return Births(position=position, grown_length=length)


def population(kind, count, box, random):
    position = random.random((count, box.dimension)) * box.extent + box.low
    spacing = (math.prod(box.extent) / max(count, 1)) ** (1 / box.dimension)
    if kind == "constant rate":
        length = 3 * spacing * random.random(count)
    elif kind == "rising rate":
        length = 3 * spacing * random.random(count) ** 0.1
    elif kind == "far reach":  # a crystal may come from many boxes away
        length = 4 * max(box.extent) * random.random(count)
    elif kind == "late burst":  # a few old crystals, then many young ones at once
        length = np.where(np.arange(count) < count / 50, 0.0, 3 * spacing)
    elif kind == "one giant":
        length = np.where(np.arange(count) < 1, 0.0, 0.3 * max(box.extent))
    else:
        raise ValueError(kind)
    return position, length


@pytest.mark.kernel
@pytest.mark.parametrize(
    "kind", ["constant rate", "rising rate", "far reach", "late burst", "one giant"]
)
@pytest.mark.parametrize("box", BOXES.values(), ids=BOXES.keys())
def test_survivors_are_those_of_brute_force_and_of_the_order_of_birth(box, kind):
    box = region(*box)
    random = np.random.default_rng(17)
    for count in (2, 3, 100):
        position, length = population(kind, count, box, random)
        alive = survivors(births(position, length), box)
        assert np.array_equal(alive, reference.survivors(position, length, box))
        assert np.array_equal(alive, reference.survivors_in_order_of_birth(position, length, box))
    assert 0 < alive.sum() < count  # the last case swallows some and leaves some


@pytest.mark.parametrize("kind", ["constant rate", "rising rate", "late burst", "one giant"])
@pytest.mark.parametrize("dimension", [2, 3])
def test_many_births_thin_as_in_order_of_birth(dimension, kind):
    box = Region(low=(0,) * dimension, high=(2.0,) * dimension, periodic=True)
    position, length = population(kind, 4000, box, np.random.default_rng(23))
    alive = survivors(births(position, length), box)
    expected = reference.survivors_in_order_of_birth(position, length, box)
    assert np.array_equal(alive, expected)
    assert 100 < alive.sum() < 3960


@pytest.mark.kernel
@pytest.mark.parametrize("count", [0, 1])
def test_none_and_one_survive(count):
    alive = survivors(births(np.zeros((count, 3)), np.ones(count)), region((1, 1, 1), True))
    assert alive.tolist() == [True] * count


@pytest.mark.kernel
def test_equal_lengths_swallow_nobody():
    random = np.random.default_rng(5)
    alive = survivors(births(random.random((300, 2)), np.full(300, 7.0)), region((1, 1), True))
    assert alive.all()


@pytest.mark.kernel
def test_at_one_place_the_first_born_live():
    position = np.full((5, 3), 0.25)
    alive = survivors(births(position, [2.0, 1.0, 1.0, 3.0, 1.5]), region((1, 1, 1), False))
    assert alive.tolist() == [False, True, True, False, False]


@pytest.mark.kernel
@pytest.mark.parametrize(
    ("length", "lives"),
    [(2.0, True), (np.nextafter(2.0, 3.0), False), (np.nextafter(2.0, 0.0), True)],
    ids=["equal", "just later", "just earlier"],
)
def test_a_birth_on_the_rim_of_a_crystal_lives(length, lives):
    box = Region(low=(0, 0), high=(8, 8))
    alive = survivors(births([[1.0, 1.0], [1.0, 3.0]], [0.0, length]), box)
    assert alive.tolist() == [True, lives]


@pytest.mark.kernel
def test_places_outside_a_periodic_box_are_wrapped():
    box = region((1.0, 2.0, 1.5), (True, True, False))
    random = np.random.default_rng(3)
    position, length = population("constant rate", 150, box, random)
    moved = position + random.integers(-3, 4, (150, 3)) * box.extent * np.array([1, 1, 0])
    alive = survivors(births(moved, length), box)
    assert np.array_equal(alive, reference.survivors(position, length, box))


def test_order_of_rows_and_number_of_threads_change_nothing():
    box = Region(low=(0, 0, 0), high=(1, 1, 1), periodic=True)
    random = np.random.default_rng(11)
    position, length = population("constant rate", 5000, box, random)
    alive = survivors(births(position, length), box, threads=1)
    assert np.array_equal(alive, survivors(births(position, length), box, threads=2))
    order = random.permutation(5000)
    shuffled = survivors(births(position[order], length[order]), box)
    assert np.array_equal(alive[order], shuffled)


def test_lengths_and_places_scale_together():
    random = np.random.default_rng(2)
    box = Region(low=(0, 0, 0), high=(1, 1, 1), periodic=(True, True, False))
    position, length = population("constant rate", 2000, box, random)
    small = Region(low=(0, 0, 0), high=(2.0**-20,) * 3, periodic=(True, True, False))
    alive = survivors(births(position * 2.0**-20, length * 2.0**-20), small)
    assert np.array_equal(alive, survivors(births(position, length), box))


# Number density at constant rates of nucleation I and growth G in units of (I/G)^(D/(D+1)):
# Gamma(5/4) (3/pi)^(1/4) and Gamma(4/3) (3/pi)^(1/3), Meijering, Philips Res. Rep. 8 (1953) 270
# (cited from memory), confirmed by quadrature of the integral of I exp(-extended fraction).
@pytest.mark.parametrize(("dimension", "density"), [(3, 0.896012), (2, 0.879357)], ids=["3D", "2D"])
def test_survivors_at_constant_rates_have_the_johnson_mehl_density(dimension, density):
    # exp(-pi/3 3^3) and exp(-pi/3 3^4) leave nothing for later than three units of time
    clock = reference.clock(np.linspace(0, 3.0, 31))
    side = (600 / density) ** (1 / dimension)
    box = Region(low=(0,) * dimension, high=(side,) * dimension, periodic=True)
    source = Source(name="rate", activation=Homogeneous(law=reference.constant_rate(1.0)))
    counts = [
        survivors(draw_births([source], clock, box, seed=1, replica=k, until=3.0), box).sum()
        for k in range(40)
    ]
    error = np.std(counts, ddof=1) / math.sqrt(40) / box.measure
    assert np.mean(counts) / box.measure == pytest.approx(density, abs=4 * error)
    assert error < 0.01 * density


def test_births_and_region_of_different_axes_are_refused():
    with pytest.raises(ValidityError, match="births have 2 axes, the region 3"):
        survivors(births([[0.0, 0.0]], [0.0]), region((1, 1, 1), True))
