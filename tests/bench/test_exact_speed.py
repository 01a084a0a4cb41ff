"""Times of the exact engine as ratios: over a warm fill and over scipy's distance transform.

Run with ``python -m pytest tests/bench -m bench -s``. It fails on a wrong label, never on a time.
"""

from __future__ import annotations

import os
import platform
import sys
import time

import numba
import numpy as np
import pytest
import scipy
from scipy.ndimage import distance_transform_edt

from spheru.births import Births
from spheru.growth import kernels
from spheru.growth.exact import tessellate
from spheru.image.frame import Frame

pytestmark = pytest.mark.bench

REPEATS = 7

say = sys.stdout.write


def seconds(work):
    """Shortest time, and the longest over it, of some repeats after one to warm up."""
    work()
    taken = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        work()
        taken.append(time.perf_counter() - start)
    return min(taken), max(taken) / min(taken)


def fill_seconds(shape):
    labels = np.zeros(shape, np.uint32)
    return seconds(lambda: labels.fill(7))[0]


def births_in(shape, n, *, late=0.0):
    rng = np.random.default_rng(0)
    grown = rng.random(n) * late
    return Births(position=rng.random((n, len(shape))) * shape, grown_length=grown)


@pytest.fixture(scope="module", autouse=True)
def machine():
    frame = Frame(shape=(8, 8), pixel=1.0)
    start = time.perf_counter()
    tessellate(births_in((8, 8), 3), frame)
    first = time.perf_counter() - start
    compiled = len(kernels.tessellate_kernel.stats.cache_misses)
    say(
        f"\n{platform.processor() or platform.machine()}, {os.cpu_count()} cores, load "
        f"{os.getloadavg()[0]:.1f}; Python {platform.python_version()}, numpy {np.__version__}, "
        f"numba {numba.__version__}, scipy {scipy.__version__}; first call {first:.1f} s "
        f"({'compiled' if compiled else 'from cache'}); least of {REPEATS} repeats, (longest over "
        "least)\n"
    )


def row(name, shape, births, frame, **options):
    fill = fill_seconds(shape)
    one, spread_one = seconds(lambda: tessellate(births, frame, threads=1, **options))
    two, spread_two = seconds(lambda: tessellate(births, frame, threads=2, **options))
    say(
        f"{name:34s} fill {fill * 1e3:6.1f} ms | 1 thread {one:6.3f} s ({spread_one:.2f}) = "
        f"{one / fill:6.1f} fills | 2 threads {two:6.3f} s ({spread_two:.2f}) = "
        f"{two / fill:6.1f} fills, {one / two:.2f} times faster",
    )
    return one


@pytest.mark.parametrize(
    ("shape", "n"),
    [((256,) * 3, 256**3 // size**3) for size in (25, 12, 5)] + [((4096, 4096), 10_000)],
    ids=["256^3 at 25 px", "256^3 at 12 px", "256^3 at 5 px", "4096^2, 1e4 nuclei"],
)
def test_against_the_distance_transform(shape, n, request):
    # Its seeds are pixels, so nuclei stand on pixel centres and are born together.
    rng = np.random.default_rng(1)
    pixels = np.unravel_index(rng.choice(np.prod(shape), n, replace=False), shape)
    position = np.stack(pixels, axis=1) + 0.5
    births = Births(position=position, grown_length=np.zeros(n))
    frame = Frame(shape=shape, pixel=1.0)
    seeds = np.zeros(shape, np.uint32)
    seeds[pixels] = np.arange(1, n + 1)

    def transform():
        nearest = distance_transform_edt(seeds == 0, return_distances=False, return_indices=True)
        return seeds[tuple(nearest)]

    one = row(request.node.callspec.id, shape, births, frame)
    start = time.perf_counter()
    expected = transform()
    taken = time.perf_counter() - start
    for _ in range(4):
        start = time.perf_counter()
        transform()
        taken = min(taken, time.perf_counter() - start)
    say(f" | distance transform with gather {taken:.2f} s = {taken / one:.1f} times ours\n")
    labels = tessellate(births, frame).labels
    differ = np.argwhere(labels != expected)
    ours = position[labels[tuple(differ.T)] - 1]
    theirs = position[expected[tuple(differ.T)] - 1]
    centres = differ + 0.5
    np.testing.assert_array_equal(  # squared distances of half-integers are exact
        ((centres - ours) ** 2).sum(axis=1), ((centres - theirs) ** 2).sum(axis=1)
    )


@pytest.mark.parametrize("late", [0.0, 1.0], ids=["born together", "born over one size"])
@pytest.mark.parametrize("size", [24, 11, 5])
def test_large_block(size, late):
    shape = (512,) * 3
    births = births_in(shape, round(512**3 / size**3), late=late * size)
    frame = Frame(shape=shape, pixel=1.0, periodic=True)
    row(f"512^3 at {size} px, late {late:g}", shape, births, frame)
    say("\n")


@pytest.mark.parametrize("late", [0.0, 88.0], ids=["born together", "born over one size"])
def test_section_of_a_large_body(late):
    births = births_in((4096,) * 3, 100_000, late=late)
    frame = Frame(shape=(4096, 4096), pixel=1.0, periodic=True, plane_z=2048.0)
    row(f"4096^2 of 4096^3, 1e5, late {late:g}", (4096, 4096), births, frame, period_z=4096.0)
    say("\n")


def test_arrival_map():
    shape = (256,) * 3
    births = births_in(shape, 256**3 // 24**3, late=24.0)
    frame = Frame(shape=shape, pixel=1.0, periodic=True)
    row("256^3 at 24 px with arrival", shape, births, frame, arrival=True)
    say("\n")
