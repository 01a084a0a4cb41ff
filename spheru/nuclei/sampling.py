"""Draw the births of crystals from sources of nuclei.

The extended births: what has been overgrown before it could start is taken out by
`spheru.nuclei.thinning`. Numbers and times come from the cumulative numbers that the mean field
reads as well; no law stands here.
"""

from __future__ import annotations

from functools import partial
from typing import TYPE_CHECKING

import numpy as np

from spheru.births import Births
from spheru.errors import ValidityError
from spheru.streams import Stream, stream

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from spheru.nuclei.placement import Random
    from spheru.nuclei.region import Region
    from spheru.nuclei.source import Source
    from spheru.thermal.clock import Clock

__all__ = ["draw_births"]

_MOST_SOURCES = 256  # the origin of a nucleus is kept in 8 bits


def draw_births(
    sources: Sequence[Source],
    clock: Clock,
    region: Region,
    *,
    seed: int,
    replica: int = 0,
    until: float = np.inf,
) -> Births:
    """Draw where and when nuclei start if nothing had grown yet.

    Each source has random numbers of its own, told by its index: adding a source at the end
    changes nothing in the births of the others. Number, places, times and the scatter of clusters
    have a stream each.

    Parameters
    ----------
    sources : sequence of Source
        Where nuclei come from, 1 to 256.
    clock : Clock
        Time, temperature and grown length at its nodes; all are linear in time in between, and so
        is the cumulative number of nuclei.
    region : Region
        Where to draw.
    seed : int
        Seed of the run, >= 0.
    replica : int, optional
        Number of the replica, >= 0.
    until : float, optional
        Grown length [m], >= 0, after which nothing is drawn.

    Returns
    -------
    births : Births
        With time, temperature and origin (an index into `sources`), ordered by grown length, at
        equal lengths by source.

    Raises
    ------
    ValidityError
        If `until` is below 0, there is no source or more than 256, or a cumulative number falls or
        is not finite.
    CapacityError
        If more nuclei are expected than there are labels.

    Notes
    -----
    Nuclei that are there from the start are born at the first node. Of n nuclei the cumulative
    numbers at birth are n independent, evenly distributed numbers; they are sorted at once, which
    orders the times, and given to places that come in random order.

    Examples
    --------
    1e12 sites per m3 that are there from the start, in a cube of 0.1 mm: 1e12 * 1e-12 = 1 is
    expected; in one of 1 mm 1000, give or take 32.

    >>> from spheru.material.site_law import FixedSites
    >>> from spheru.nuclei.activation import Athermal
    >>> from spheru.nuclei.region import Region
    >>> from spheru.nuclei.source import Source
    >>> from spheru.thermal.clock import Clock
    >>> from spheru.thermal.history import History, Hold
    >>> hold = History(segments=(Hold(temperature=400.0, duration=100.0),))
    >>> clock = Clock.from_history(hold, lambda kelvins: np.full_like(kelvins, 1e-7))
    >>> sites = Source(name="a", activation=Athermal(law=FixedSites(number=1e12), t_m0=450.0))
    >>> cube = Region(low=(0, 0, 0), high=(1e-3, 1e-3, 1e-3), periodic=True)
    >>> births = draw_births([sites], clock, cube, seed=7)
    >>> abs(len(births) - 1000) < 4 * 32, set(births.time.tolist())
    (True, {0.0})
    """
    if not until >= 0:
        raise ValidityError(f"nuclei: expected a grown length `until` of 0 m or above, got {until}")
    if not 1 <= len(sources) <= _MOST_SOURCES:
        raise ValidityError(f"nuclei: expected 1 to 256 sources, got {len(sources)}")
    end = _place_on_clock(clock, until)
    drawn = [
        _draw(source, clock, region, end, partial(stream, seed, replica=replica, source=index))
        for index, source in enumerate(sources)
    ]
    position, length, time, temperature = (
        np.concatenate(column) for column in zip(*drawn, strict=True)
    )
    origin = np.repeat(np.arange(len(sources), dtype=np.uint8), [len(d[0]) for d in drawn])
    order = np.argsort(length, kind="stable")
    return Births(
        position=position[order],
        grown_length=length[order],
        time=time[order],
        temperature=temperature[order],
        origin=origin[order],
        origin_names=tuple(source.name for source in sources),
    )


def _draw(
    source: Source, clock: Clock, region: Region, end: tuple[int, float], random: Random
) -> tuple[NDArray[np.float64], ...]:
    """Return places, grown lengths, times and temperatures of the births of one source."""
    density = source.density(clock)
    started = _between(density, *end)
    position = source.placement.draw(started, float(density[-1]), region, random)
    level = random(Stream.TIME).random(len(position))
    level *= started
    level.sort()
    # a level lies where the number rises, never in a rest; below the number of the first node
    # interpolation gives that node
    columns = (clock.grown_length, clock.time, clock.temperature)
    return position, *(np.interp(level, density, nodes) for nodes in columns)


def _place_on_clock(clock: Clock, length: float) -> tuple[int, float]:
    """Return the last node with at most this grown length, and the part of the interval after."""
    nodes = clock.grown_length
    node = int(np.searchsorted(nodes, length, side="right")) - 1
    if node + 1 >= len(nodes):
        return node, 0.0
    return node, float((length - nodes[node]) / (nodes[node + 1] - nodes[node]))


def _between(values: NDArray[np.float64], node: int, part: float) -> float:
    if part == 0.0:
        return float(values[node])
    return float(values[node] + part * (values[node + 1] - values[node]))
