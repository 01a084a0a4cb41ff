"""The exact engine against brute force in float64: no differing pixel."""

from __future__ import annotations

import itertools
import math

import numba
import numpy as np
import pytest

from spheru.births import Births
from spheru.errors import ValidityError
from spheru.growth.exact import Population, memory_needed, tessellate
from spheru.image.frame import Frame
from tests.growth import reference

pytestmark = pytest.mark.kernel


def births_in(frame, n, *, seed=0, spread=1.0, depth=None, late=0.0):
    """Nuclei at random; a section has them within `depth` pixels of the plane."""
    rng = np.random.default_rng(seed)
    extent = np.array(frame.shape, dtype=float)
    low = np.array(frame.origin)
    if depth is not None:
        extent = np.append(depth, extent)
        low = np.append(frame.plane_z - 0.5 * depth * frame.pixel, low)
    position = low + extent * frame.pixel * (0.5 + spread * (rng.random((n, len(extent))) - 0.5))
    return Births(position=position, grown_length=rng.random(n) * late * frame.pixel)


def assert_equals_brute_force(births, frame, **options):
    image = tessellate(births, frame, arrival=True, **options)
    options.pop("threads", None)
    labels, arrival = reference.tessellate(births, frame, **options)
    found = image.labels
    if frame.plane_z is not None:
        kept = np.setdiff1d(labels, [0])
        np.testing.assert_array_equal(image.births.position, births.position[kept - 1])
        found = np.append(0, kept)[found]
    np.testing.assert_array_equal(found, labels)
    np.testing.assert_allclose(image.arrival, arrival, rtol=1e-6, atol=1e-6 * frame.pixel)
    alone = tessellate(births, frame, **options)
    np.testing.assert_array_equal(alone.labels, image.labels)
    return image


VIEWS = {
    "plane": ({"shape": (37, 50)}, None),
    "plane of one row": ({"shape": (1, 70)}, None),
    "one pixel": ({"shape": (1, 1)}, None),
    "section": ({"shape": (45, 34), "plane_z": 7e-6}, 40.0),
    "film": ({"shape": (5, 30, 26)}, None),
    "film of one voxel": ({"shape": (1, 33, 18)}, None),
    "block": ({"shape": (17, 12, 21)}, None),
    "block of two voxels": ({"shape": (2, 2, 2)}, None),
}


@pytest.mark.parametrize("late", [0.0, 6.0], ids=["equal births", "different births"])
@pytest.mark.parametrize("periodic", [False, True], ids=["cut", "periodic"])
@pytest.mark.parametrize("view", VIEWS)
@pytest.mark.parametrize("n", [1, 2, 5, 60])
def test_labels_and_arrival_equal_brute_force(view, n, periodic, late):
    grid, depth = VIEWS[view]
    frame = Frame(**grid, pixel=1e-6, origin=-3.3e-6, periodic=periodic)
    assert_equals_brute_force(births_in(frame, n, seed=n, depth=depth, late=late), frame)


@pytest.mark.parametrize("late", [0.0, 15.0], ids=["equal births", "different births"])
@pytest.mark.parametrize(
    ("shape", "n"),
    [((300, 280), 3), ((150, 140), 40), ((70, 80), 60), ((60, 50, 40), 8), ((40, 40, 40), 90)],
    ids=["2D coarse", "2D", "2D fine", "3D coarse", "3D"],
)
def test_large_blocks_equal_brute_force(shape, n, late):
    if numba.config.DISABLE_JIT:
        pytest.skip("too many pixels for the interpreter")
    frame = Frame(shape=shape, pixel=0.5e-6, periodic=(True,) + (False,) * (len(shape) - 1))
    assert_equals_brute_force(births_in(frame, n, late=late), frame)


def test_film_periodic_in_its_plane_equals_brute_force():
    frame = Frame(shape=(6, 24, 24), pixel=2e-6, periodic=(False, True, True), closed=(1, 0, 0))
    assert_equals_brute_force(births_in(frame, 30, late=4.0), frame)


def test_section_of_a_periodic_body_equals_brute_force():
    frame = Frame(shape=(30, 30), pixel=1e-6, periodic=True, plane_z=2e-6)
    births = births_in(frame, 40, depth=30.0, late=3.0)
    assert_equals_brute_force(births, frame, period_z=30e-6)


@pytest.mark.parametrize("end", [-1.0, 0.0, 2.5, 6.0], ids=lambda e: f"end {e} px")
@pytest.mark.parametrize("late", [0.0, 5.0], ids=["equal births", "different births"])
@pytest.mark.parametrize("view", ["plane", "section", "block"])
def test_pixels_reached_after_the_end_stay_zero(view, late, end):
    grid, depth = VIEWS[view]
    frame = Frame(**grid, pixel=1e-6)
    births = births_in(frame, 20, depth=depth, late=late)
    image = assert_equals_brute_force(births, frame, end=end * 1e-6)
    assert (np.isinf(image.arrival) == (image.labels == 0)).all()


def test_pixel_reached_exactly_at_the_end_has_crystallised():
    frame = Frame(shape=(1, 9), pixel=1.0)
    births = Births(position=[[0.5, 0.5]], grown_length=[0.0])
    assert tessellate(births, frame, end=4.0).labels.tolist() == [[1, 1, 1, 1, 1, 0, 0, 0, 0]]


def test_end_during_a_spread_of_births_drops_those_not_yet_born():
    frame = Frame(shape=(1, 5), pixel=1.0)
    births = Births(position=[[0.5, 0.5], [0.5, 4.5]], grown_length=[3.0, 0.0])
    assert tessellate(births, frame, end=1.0).labels.tolist() == [[0, 0, 0, 2, 2]]


@pytest.mark.parametrize("step", [2, 4, 5])
@pytest.mark.parametrize("shape", [(20, 20), (5, 20, 10)], ids=["2D", "3D"])
def test_ties_of_a_lattice_go_to_the_lowest_row(shape, step):
    points = np.stack(np.meshgrid(*(np.arange(0, n, step) for n in shape), indexing="ij"), -1)
    points = np.random.default_rng(0).permutation(points.reshape(-1, len(shape)).astype(float))
    births = Births(position=points, grown_length=np.ones(len(points)))
    assert_equals_brute_force(births, Frame(shape=shape, pixel=1.0, periodic=True))
    assert_equals_brute_force(births, Frame(shape=shape, pixel=1.0))


def test_of_births_at_one_place_the_lowest_row_owns_all():
    births = Births(position=np.full((6, 2), 4.2), grown_length=np.zeros(6))
    assert (tessellate(births, Frame(shape=(9, 7), pixel=1.0)).labels == 1).all()


def test_late_duplicates_on_a_lattice_equal_brute_force():
    points = np.repeat(np.argwhere(np.ones((5, 5))) * 4.0, 2, axis=0)
    births = Births(position=points, grown_length=np.tile([1.0, 0.0], 25))
    assert_equals_brute_force(births, Frame(shape=(20, 20), pixel=1.0, periodic=True))


@pytest.mark.parametrize("spread", [3.0, 50.0, 1e5])
def test_births_far_outside_a_cut_frame_equal_brute_force(spread):
    frame = Frame(shape=(15, 14), pixel=1e-6)
    assert_equals_brute_force(births_in(frame, 40, spread=spread, late=5.0), frame)
    assert_equals_brute_force(births_in(frame, 40, spread=spread), frame)


def test_births_outside_a_periodic_frame_are_wrapped():
    frame = Frame(shape=(12, 10), pixel=1.0, periodic=True)
    births = births_in(frame, 12, late=2.0)
    moved = Births(
        position=births.position + np.array([24.0, -10.0]), grown_length=births.grown_length
    )
    np.testing.assert_array_equal(tessellate(moved, frame).labels, tessellate(births, frame).labels)


def test_clustered_births_in_a_large_empty_frame_equal_brute_force():
    rng = np.random.default_rng(3)
    frame = Frame(shape=(40, 40), pixel=1.0, periodic=True)
    births = Births(position=5.0 + rng.random((80, 2)), grown_length=0.1 * rng.random(80))
    assert_equals_brute_force(births, frame)


def test_one_early_birth_among_many_late_ones_equals_brute_force():
    frame = Frame(shape=(40, 40), pixel=1.0)
    births = births_in(frame, 200, late=1.0)
    late = births.grown_length + 15.0
    late[77] = 0.0
    assert_equals_brute_force(Births(position=births.position, grown_length=late), frame)


@pytest.mark.parametrize("late", [0.0, 4.0], ids=["equal births", "different births"])
@pytest.mark.parametrize("view", ["plane", "section", "film", "block"])
def test_bytes_do_not_depend_on_threads(view, late):
    grid, depth = VIEWS[view]
    frame = Frame(**grid, pixel=1e-6)
    births = births_in(frame, 50, depth=depth, late=late)
    one, two = (tessellate(births, frame, threads=t, arrival=True) for t in (1, 2))
    assert one.labels.tobytes() == two.labels.tobytes()
    assert one.arrival.tobytes() == two.arrival.tobytes()


@pytest.mark.parametrize("view", ["plane", "section", "block"])
def test_without_births_nothing_crystallises(view):
    grid, depth = VIEWS[view]
    frame = Frame(**grid, pixel=1e-6)
    image = tessellate(births_in(frame, 0, depth=depth), frame, arrival=True)
    assert not image.labels.any()
    assert np.isinf(image.arrival).all()
    assert len(image.births) == 0


def test_births_of_a_grid_that_is_no_section_stay_as_they_were():
    frame = Frame(shape=(3, 3), pixel=1.0)
    births = Births(position=np.full((4, 2), 1.0), grown_length=np.zeros(4))
    assert tessellate(births, frame).births is births


def test_births_of_a_section_are_those_that_own_a_pixel():
    frame = Frame(shape=(1, 4), pixel=1.0, plane_z=0.0)
    position = [[9.0, 0.5, 1.0], [1.0, 0.5, 3.5], [0.0, 0.5, 0.5]]
    image = tessellate(Births(position=position, grown_length=np.zeros(3)), frame)
    assert image.births.position.tolist() == position[1:]
    assert image.labels.tolist() == [[2, 2, 1, 1]]


def pieces(shape, edges):
    """Windows that cover a grid, the last of each axis cut off."""
    parts = [
        [slice(at, min(at + edge, n)) for at in range(0, n, edge)]
        for n, edge in zip(shape, edges, strict=True)
    ]
    return itertools.product(*parts)


@pytest.mark.parametrize("end", [math.inf, 3.0], ids=["no end", "end"])
@pytest.mark.parametrize("late", [0.0, 3.0], ids=["equal births", "different births"])
@pytest.mark.parametrize("periodic", [False, True], ids=["cut", "periodic"])
@pytest.mark.parametrize(
    ("shape", "edges", "n"),
    [((35, 19, 41), (17, 19, 13), 40), ((9, 20, 150), (9, 7, 37), 500), ((90, 145), (33, 51), 30)],
    ids=["3D", "3D fine", "2D"],
)
def test_windows_pieced_together_have_the_bytes_of_the_whole(shape, edges, n, periodic, late, end):
    if numba.config.DISABLE_JIT:
        pytest.skip("too many pixels for the interpreter")
    frame = Frame(shape=shape, pixel=1e-6, origin=2e-6, periodic=periodic)
    births = births_in(frame, n, seed=4, late=late)
    population = Population.of(births, frame)
    whole = tessellate(births, frame, end=end * 1e-6, arrival=True)
    labels, arrival = np.zeros(shape, np.uint32), np.zeros(shape, np.float32)
    for window in pieces(shape, edges):
        part = population.tessellate(window=window, end=end * 1e-6, arrival=True)
        labels[window], arrival[window] = part.labels, part.arrival
        assert part.frame == frame.crop([cut.start for cut in window], part.labels.shape)
        assert part.births is births
        alone = tessellate(births, frame, end=end * 1e-6, window=window, threads=1)
        np.testing.assert_array_equal(alone.labels, part.labels)
    assert labels.tobytes() == whole.labels.tobytes()
    assert arrival.tobytes() == whole.arrival.tobytes()


def test_window_of_a_section_counts_all_births():
    frame = Frame(shape=(20, 30), pixel=1e-6, periodic=True, plane_z=2e-6)
    births = births_in(frame, 40, depth=30.0, late=3.0)
    labels, _ = reference.tessellate(births, frame, period_z=30e-6)
    window = (slice(3, 15), slice(11, 30))
    image = tessellate(births, frame, period_z=30e-6, window=window)
    np.testing.assert_array_equal(image.labels, labels[window])
    assert len(image.births) == 40


@pytest.mark.parametrize("offset", range(0, 17, 3))
def test_given_memory_is_filled_wherever_it_begins(offset):
    frame = Frame(shape=(7, 50), pixel=1.0)
    births = births_in(frame, 20, late=3.0)
    room = np.full(7 * 50 + 32, 99, np.uint32)
    out = room[offset : offset + 350].reshape(7, 50)
    image = Population.of(births, frame).tessellate(out=out)
    assert np.shares_memory(image.labels, room)
    np.testing.assert_array_equal(out, tessellate(births, frame).labels)
    assert (np.delete(room, np.s_[offset : offset + 350]) == 99).all()


@pytest.mark.parametrize("periodic", [False, True], ids=["cut", "periodic"])
@pytest.mark.parametrize("place", [0.0, 0.5], ids=["corners", "centres"])
@pytest.mark.parametrize(("shape", "n"), [((30, 41), 60), ((12, 17, 20), 90)], ids=["2D", "3D"])
def test_ties_of_births_on_the_lattice_of_pixels_equal_brute_force(shape, n, place, periodic):
    rng = np.random.default_rng(2)
    births = Births(
        position=rng.integers(0, shape, (n, len(shape))) + place, grown_length=[2.0] * n
    )
    frame = Frame(shape=shape, pixel=1.0, periodic=periodic)
    assert_equals_brute_force(births, frame)
    assert_equals_brute_force(births, frame, end=5.0)


def test_progress_rises_to_one():
    frame = Frame(shape=(40, 40), pixel=1.0)
    seen = []
    tessellate(births_in(frame, 30), frame, progress=seen.append)
    assert seen == sorted(seen)
    assert seen[-1] == 1.0


def test_memory_needed_is_that_of_the_arrays():
    frame = Frame(shape=(7, 9), pixel=1.0)
    image = tessellate(births_in(frame, 3), frame, arrival=True)
    assert memory_needed(frame, arrival=True) == image.labels.nbytes + image.arrival.nbytes
    assert memory_needed(frame) == image.labels.nbytes


FLAT = Frame(shape=(4, 4), pixel=1e-6)
SOLID = Births(position=np.zeros((2, 3)), grown_length=np.zeros(2))
PLANAR = Births(position=np.zeros((2, 2)), grown_length=np.zeros(2))


@pytest.mark.parametrize(
    ("window", "message"),
    [
        ((slice(0, 2),), "2 slices"),
        ((slice(0, 2), slice(3, 3)), "at least one pixel"),
        ((slice(0, 4, 2), slice(0, 4)), "without steps"),
    ],
    ids=["one axis", "empty", "steps"],
)
def test_window_that_does_not_fit_is_refused(window, message):
    with pytest.raises(ValidityError, match=message):
        tessellate(PLANAR, FLAT, window=window)


@pytest.mark.parametrize(
    "out",
    [np.zeros((4, 5), np.uint32), np.zeros((4, 4), np.int32), np.zeros((4, 8), np.uint32)[:, ::2]],
    ids=["shape", "type", "strides"],
)
def test_memory_that_does_not_fit_is_refused(out):
    with pytest.raises(ValidityError, match="contiguous memory"):
        Population.of(PLANAR, FLAT).tessellate(out=out)


@pytest.mark.parametrize(
    ("births", "frame", "options", "message"),
    [
        (SOLID, FLAT, {}, "2 dimensions"),
        (PLANAR, Frame(shape=(4, 4), pixel=1e-6, plane_z=0.0), {}, "3 dimensions"),
        (PLANAR, Frame(shape=(4, 4, 4), pixel=1e-6), {}, "3 dimensions"),
        (PLANAR, FLAT, {"end": math.nan}, "end"),
        (PLANAR, FLAT, {"period_z": 1e-6}, "section only"),
        (SOLID, Frame(shape=(4, 4), pixel=1e-6, plane_z=0.0), {"period_z": 0.0}, "above 0 m"),
    ],
    ids=["births 3D", "section of 2D", "block of 2D", "end nan", "period of plane", "period zero"],
)
def test_what_does_not_fit_is_refused(births, frame, options, message):
    with pytest.raises(ValidityError, match=message):
        tessellate(births, frame, **options)
