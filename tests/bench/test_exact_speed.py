"""Times of the exact engine and of the sampling as ratios, least of interleaved repeats.

Run with ``python -m pytest tests/bench -m bench -s``; where SPHERU_BENCH names a file, the table is
saved there as well. It fails on a wrong label, never on a time.

Growing includes sorting the births into cells. Labels go to memory that has been written before, as
those of the fill that they are held against: the first touch of fresh memory costs about a second
fill on top.
"""

from __future__ import annotations

import os
import platform
import sys
import time
from pathlib import Path

import numba
import numpy as np
import pytest
import scipy
from scipy.ndimage import distance_transform_edt

from spheru.births import Births
from spheru.growth import exact, kernels
from spheru.growth.exact import Population, tessellate
from spheru.image.frame import Frame
from spheru.jit import threads as kernel_threads
from spheru.nuclei.region import Region
from spheru.nuclei.thinning import survivors

pytestmark = pytest.mark.bench

REPEATS = 5


def seconds(**works):
    """Least time, and the longest over it, of pieces of work done in turn, after one to warm up."""
    taken = {name: [] for name in works}
    for repeat in range(REPEATS + 1):
        for name, work in works.items():
            start = time.perf_counter()
            work()
            if repeat > 0:
                taken[name].append(time.perf_counter() - start)
    return {name: (min(times), max(times) / min(times)) for name, times in taken.items()}


def births_in(shape, n, *, late=0.0):
    rng = np.random.default_rng(0)
    grown = rng.random(n) * late
    return Births(position=rng.random((n, len(shape))) * shape, grown_length=grown)


@pytest.fixture(scope="module")
def say():
    """Print lines, and keep them where a file is asked for."""
    lines = []

    def tell(line):
        lines.append(line)
        sys.stdout.write(f"\n{line}")
        sys.stdout.flush()

    start = time.perf_counter()
    tessellate(births_in((8, 8), 3), Frame(shape=(8, 8), pixel=1.0))
    first = time.perf_counter() - start
    compiled = len(kernels.tessellate_kernel.stats.cache_misses)
    tell(
        f"{platform.processor() or platform.machine()}, {os.cpu_count()} cores, load "
        f"{os.getloadavg()[0]:.1f}; Python {platform.python_version()}, numpy {np.__version__}, "
        f"numba {numba.__version__}, scipy {scipy.__version__}; {time.strftime('%Y-%m-%d')}; first "
        f"call {first:.1f} s ({'compiled' if compiled else 'from cache'}); least of {REPEATS} "
        "repeats, (longest over least)"
    )
    yield tell
    if os.environ.get("SPHERU_BENCH"):
        lines.append(f"load at the end {os.getloadavg()[0]:.1f}\n")
        Path(os.environ["SPHERU_BENCH"]).write_text("\n".join(lines), encoding="utf-8")


def check_row(say, name, births, frame, *, period_z=None, arrival=False, **others):
    """One line of the table; returns the time on one thread and those of the other works.

    Every pixel must be owned, and on two threads by the same births as on one.
    """
    labels = exact._memory(None, frame.shape, np.uint32)
    times = exact._memory(None, frame.shape, np.float32)

    def grow(threads):
        population = Population.of(births, frame, period_z=period_z)
        population.tessellate(threads=threads, out=labels, arrival=arrival, arrival_out=times)
        if frame.plane_z is not None:
            with kernel_threads(threads) as count:
                exact._keep_owners(births, labels, count)

    grow(1)
    alone = labels.copy()
    grow(2)
    assert labels.min() > 0
    assert np.array_equal(labels, alone)
    del alone
    found = seconds(fill=lambda: labels.fill(7), one=lambda: grow(1), two=lambda: grow(2), **others)
    (fill, _), (one, wide_one), (two, wide_two) = (found.pop(k) for k in ("fill", "one", "two"))
    say(
        f"{name:32s} fill {fill * 1e3:6.1f} ms | 1 thread {one:7.3f} s ({wide_one:.2f}) "
        f"{one / fill:6.1f} fills | 2 threads {two:7.3f} s ({wide_two:.2f}) {two / fill:6.1f} "
        f"fills, {one / two:.2f} times faster | load {os.getloadavg()[0]:.1f}"
    )
    return one, found


def exponents(say, name, sizes, times):
    steps = np.diff(np.log(times)) / np.diff(np.log(sizes))
    say(f"{name}: exponents {', '.join(f'{step:.2f}' for step in steps)}")


@pytest.mark.parametrize(
    ("shape", "size"),
    [((256,) * 3, 25), ((256,) * 3, 12), ((256,) * 3, 5), ((4096, 4096), 41)],
    ids=["256^3 at 25 px", "256^3 at 12 px", "256^3 at 5 px", "4096^2 at 41 px"],
)
def test_against_the_distance_transform(shape, size, say, request):
    # Its seeds are pixels, so nuclei stand on pixel centres and are born together.
    rng = np.random.default_rng(1)
    n = int(np.prod(shape)) // size ** len(shape)
    pixels = np.unravel_index(rng.choice(np.prod(shape), n, replace=False), shape)
    position = np.stack(pixels, axis=1) + 0.5
    births = Births(position=position, grown_length=np.zeros(n))
    frame = Frame(shape=shape, pixel=1.0)
    seeds = np.zeros(shape, np.uint32)
    seeds[pixels] = np.arange(1, n + 1)
    expected = np.empty(shape, np.uint32)

    def transform():
        nearest = distance_transform_edt(seeds == 0, return_distances=False, return_indices=True)
        expected[...] = seeds[tuple(nearest)]

    one, found = check_row(say, request.node.callspec.id, births, frame, transform=transform)
    taken, wide = found["transform"]
    say(f"    distance transform with gather {taken:.2f} s ({wide:.2f}) = {taken / one:.1f} times")
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
def test_large_block(size, late, say):
    shape = (512,) * 3
    births = births_in(shape, round(512**3 / size**3), late=late * size)
    frame = Frame(shape=shape, pixel=1.0, periodic=True)
    check_row(say, f"512^3 at {size} px, late {late:g}", births, frame)


@pytest.mark.parametrize("late", [0.0, 88.0], ids=["born together", "born over one size"])
def test_section_of_a_large_body(late, say):
    births = births_in((4096,) * 3, 100_000, late=late)
    frame = Frame(shape=(4096, 4096), pixel=1.0, periodic=True, plane_z=2048.0)
    check_row(say, f"4096^2 of 4096^3, 1e5, late {late:g}", births, frame, period_z=4096.0)


def test_arrival_map(say):
    shape = (256,) * 3
    births = births_in(shape, 256**3 // 24**3, late=24.0)
    frame = Frame(shape=shape, pixel=1.0, periodic=True)
    plain, _ = check_row(say, "256^3 at 24 px, late 1", births, frame)
    mapped, _ = check_row(say, "256^3 at 24 px, with arrival", births, frame, arrival=True)
    say(f"    the arrival map costs {mapped / plain:.2f} times as much as the labels alone")


def test_growth_of_cost_with_voxels(say):
    sides, times = (64, 128, 256, 512), []
    for side in sides:
        births = births_in((side,) * 3, round(side**3 / 11**3), late=11.0)
        frame = Frame(shape=(side,) * 3, pixel=1.0, periodic=True)
        times.append(check_row(say, f"{side}^3 at 11 px, late 1", births, frame)[0])
    exponents(say, "over voxels 64^3 to 512^3 at 11 px", [side**3 for side in sides], times)


def test_growth_of_cost_with_nuclei(say):
    numbers, times = (1_000, 10_000, 100_000, 1_000_000), []
    for n in numbers:
        births = births_in((256,) * 3, n, late=256 / n ** (1 / 3))
        frame = Frame(shape=(256,) * 3, pixel=1.0, periodic=True)
        times.append(check_row(say, f"256^3, {n} nuclei, late 1", births, frame)[0])
    exponents(say, "over nuclei 1e3 to 1e6 in 256^3", numbers, times)


def test_thinning(say):
    n = 4_000_000
    births = births_in((1.0,) * 3, n, late=0.02)
    region = Region(low=(0, 0, 0), high=(1, 1, 1), periodic=True)
    found = seconds(one=lambda: survivors(births, region, threads=1))
    alive = survivors(births, region, threads=2)
    np.testing.assert_array_equal(survivors(births, region, threads=1), alive)
    (one, wide) = found["one"]
    say(f"thinning of {n} births, {alive.mean():.0%} survive: {one:.2f} s ({wide:.2f}), 1 thread")
