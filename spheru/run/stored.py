"""The whole chain for a volume that is larger than memory: chunk by chunk, and resumable.

The same steps as in `spheru.run.grow`, and the same numbers to the last digit. Where chunks and
what is known of them are kept is passed in, see `Keeper`; no file is known here.

Every chunk is gone through twice: first grown, written and summed up, then, once the last arrival
of all is known, grown again to count its arrivals.
"""

from __future__ import annotations

import hashlib
import itertools
from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import fields
from typing import TYPE_CHECKING, Any, Final, Protocol, cast

import numpy as np

from spheru.growth.exact import Population
from spheru.jit import threads as kernel_threads
from spheru.measure.parts import PartSums, merge_parts, sum_part
from spheru.measure.sizes import measure_sizes, sizes_of_sums
from spheru.run.conversion import (
    conversion_of_counts,
    count_arrivals,
    counts_shape,
    highest_arrival,
    last_arrival,
)
from spheru.run.grow import surviving_births
from spheru.run.result import Result, StoredMap
from spheru.run.sights import picture_of_volume
from spheru.run.summary import summarise

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from spheru.growth.exact import Window
    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage
    from spheru.measure.labels import LabelSums
    from spheru.run.estimate import Estimate

__all__ = ["Keeper", "chunk_windows", "grow_stored"]

_MOST_WORKERS: Final = 8  # each holds a few chunks in memory
_GROWN, _COUNTED = "grown", "counted"  # the two times that every chunk is gone through
_SUMS: Final = tuple(field.name for field in fields(PartSums))
_COST: Final = {_GROWN: 0.6, _COUNTED: 0.4}  # shares of the time, measured at 24 pixels across


class Keeper(Protocol):
    """Where the chunks of a volume are kept, and what has been found about each of them.

    Whatever is kept is there in full or not at all, and is still there after a crash.
    """

    @property
    def chunk(self) -> tuple[int, ...]:
        """Edges of a chunk in pixels."""

    def write(self, window: Window, labels: NDArray[np.uint32]) -> None:
        """Keep the labels of one chunk."""

    def read(self, window: Window) -> NDArray[np.uint32]:
        """Return the labels of any part of the volume."""

    def note(self, stage: str, chunk: int, record: Mapping[str, NDArray[Any]]) -> None:
        """Keep what was found about a chunk: with this it counts as done."""

    def noted(self, stage: str, chunk: int) -> bool:
        """Tell whether a chunk is done."""

    def recall(self, stage: str, chunk: int, *names: str) -> list[NDArray[Any]]:
        """Return some of what was found about a chunk."""


def chunk_windows(shape: Sequence[int], chunk: Sequence[int]) -> list[Window]:
    """Return the chunks of a grid in the order of memory.

    Parameters
    ----------
    shape, chunk : sequence of int
        Numbers of pixels of the grid and of a chunk; the last chunk of an axis may be shorter.

    Returns
    -------
    windows : list of tuple of slice
        One slice per axis.

    Examples
    --------
    >>> [w[1].stop - w[1].start for w in chunk_windows((1, 5), (1, 2))]
    [2, 2, 1]
    """
    axes = [
        [slice(a, min(a + edge, n)) for a in range(0, n, edge)]
        for n, edge in zip(shape, chunk, strict=True)
    ]
    return list(itertools.product(*axes))


def grow_stored(
    expected: Estimate,
    keeper: Keeper,
    *,
    replica: int = 0,
    threads: int | None = None,
    progress: Callable[[str, float], None] | None = None,
) -> Result:
    """Seed nuclei, grow them chunk by chunk, and measure the map.

    Parameters
    ----------
    expected : Estimate
        What is run: the estimate of settings whose view is a block or a film.
    keeper : Keeper
        Where the chunks are kept. Those that are done are not done again.
    replica : int, optional
        Number of the replica.
    threads : int, optional
        Threads to use; all cores where it is None. The result does not depend on it.
    progress : callable, optional
        Called with the name of the stage and the share that is done of what was still to do.

    Returns
    -------
    result : Result
        As from `spheru.run.grow.grow`, but for the map, which stays with the keeper.
    """
    tell = progress or (lambda _stage, _done: None)
    settings, frame = expected.settings, expected.plan.frame
    tell("nuclei", 0.0)
    born = surviving_births(expected, replica=replica, threads=threads)
    run = _Run(Population.of(born, frame), expected.plan.end, keeper, threads, tell)
    run.each(_GROWN, run.grow)
    highest = max(float(run.recall(_GROWN, k, "highest")[0]) for k in run.numbers)
    last = last_arrival(highest, expected)
    run.each(_COUNTED, lambda window: run.count(window, last))

    tell("measure", 0.95)
    counts = np.zeros(counts_shape(frame), dtype=np.int64)
    digest = hashlib.sha256()
    for k in run.numbers:
        tile, found = run.recall(_COUNTED, k, "tile", "counts")
        counts[tile] += found
        digest.update(run.recall(_GROWN, k, "sha256")[0].tobytes())
    sums = run.sums(len(born))
    held = StoredMap(frame=frame, births=born, count=len(sums.label), sha256=digest.hexdigest())
    seen = picture_of_volume(frame, born, settings.sample, keeper.read)
    if settings.sample.view == "block":
        # of the image only its frame is asked for by any rule that "auto" stands for
        sizes = sizes_of_sums(cast("LabelImage", held), sums)
    else:
        sizes = measure_sizes(seen)
    curves = conversion_of_counts(counts, last, expected, spherulites=sizes.count)

    tell("numbers", 0.97)
    owners = born.take(sums.label.astype(np.intp) - 1)
    summary, warnings = summarise(expected, born, owners, sizes, curves, replica=replica)
    return Result(
        settings=settings,
        replica=replica,
        image=held,
        picture=seen,
        births=born,
        sizes=sizes,
        conversion=curves,
        estimate=expected,
        summary=summary,
        warnings=warnings,
    )


class _Run:
    """The passes over the chunks of one volume."""

    def __init__(
        self,
        population: Population,
        end: float,
        keeper: Keeper,
        threads: int | None,
        tell: Callable[[str, float], None],
    ) -> None:
        self.population, self.end, self.keeper, self.tell = population, end, keeper, tell
        self.frame: Frame = population.frame
        self.windows = chunk_windows(self.frame.shape, keeper.chunk)
        self.numbers = range(len(self.windows))
        with kernel_threads(threads) as count:
            self.threads = count
        self.recall = keeper.recall
        self.todo = {
            stage: [k for k in self.numbers if not keeper.noted(stage, k)] for stage in _COST
        }
        self.cost = sum(_COST[stage] * len(todo) for stage, todo in self.todo.items())
        self.spent = 0.0

    def each(self, stage: str, work: Callable[[Window], Mapping[str, NDArray[Any]]]) -> None:
        """Do what is still to do of a stage on several threads, each chunk by one of them."""

        def do(k: int) -> None:
            self.keeper.note(stage, k, work(self.windows[k]))

        pool = ThreadPoolExecutor(min(self.threads, _MOST_WORKERS))
        try:
            for job in as_completed([pool.submit(do, k) for k in self.todo[stage]]):
                job.result()
                self.spent += _COST[stage]
                self.tell(f"chunks {stage}", 0.02 + 0.93 * self.spent / self.cost)
        finally:
            pool.shutdown(cancel_futures=True)  # so that an interruption does not wait for the rest

    def grow(self, window: Window) -> dict[str, NDArray[Any]]:
        """Grow and write a chunk, and sum up its labels."""
        image = self._tessellate(window, arrival=True)

        def below(axis: int) -> NDArray[np.uint32]:
            layer = list(window)
            at = (window[axis].start - 1) % self.frame.shape[axis]
            layer[axis] = slice(at, at + 1)
            labels = self._tessellate(tuple(layer)).labels
            return labels.reshape([n for k, n in enumerate(labels.shape) if k != axis])

        sums = sum_part(image.labels, self.frame, [part.start for part in window], below)
        self.keeper.write(window, image.labels)
        digest = hashlib.sha256(image.labels.astype("<u4", copy=False).data).digest()
        record = {name: getattr(sums, name) for name in _SUMS}
        return record | {
            "highest": np.array(highest_arrival(_arrival(image))),
            "sha256": np.frombuffer(digest, dtype=np.uint8),
        }

    def count(self, window: Window, last: float) -> dict[str, NDArray[Any]]:
        """Count the arrivals in a chunk."""
        arrival = _arrival(self._tessellate(window, arrival=True))
        start = [part.start for part in window]
        tile, counts = count_arrivals(arrival, last, start=start, whole=self.frame.shape)
        return {"tile": tile, "counts": counts.astype(np.uint32)}

    def sums(self, labels: int) -> LabelSums:
        """Put the sums of all chunks together."""
        return merge_parts(_Sums(self.keeper, self.numbers), self.frame, labels, self._rows)

    def _tessellate(self, window: Window, *, arrival: bool = False) -> LabelImage:
        return self.population.tessellate(
            window=window, end=self.end, arrival=arrival, threads=self.threads
        )

    def _rows(self) -> Iterator[tuple[Sequence[int], NDArray[np.uint32]]]:
        """Yield bands of whole rows, a chunk high and deep."""
        depth, height, _ = self.keeper.chunk
        for window in chunk_windows(self.frame.shape, (depth, height, self.frame.shape[2])):
            yield [part.start for part in window], self.keeper.read(window)


class _Sums:
    """The sums of all chunks, read one after the other, as often as they are asked for."""

    def __init__(self, keeper: Keeper, numbers: Iterable[int]) -> None:
        self.keeper, self.numbers = keeper, numbers

    def __iter__(self) -> Iterator[PartSums]:
        for k in self.numbers:
            found = self.keeper.recall(_GROWN, k, *_SUMS)
            yield PartSums(**dict(zip(_SUMS, found, strict=True)))


def _arrival(image: LabelImage) -> NDArray[np.float32]:
    return cast("NDArray[np.float32]", image.arrival)  # asked for, so it is there
