"""Named streams of random numbers.

One stream a purpose: a new purpose never shifts the numbers of an old one, and the order of calls
does not matter. No draw happens here.
"""

from __future__ import annotations

from enum import IntEnum

import numpy as np

__all__ = ["Stream", "stream"]


class Stream(IntEnum):
    """What a stream of random numbers is for. A value is never used again for something else."""

    NUMBER = 1  # how many nuclei a source makes
    PLACE = 2  # where they stand
    TIME = 3  # when they are born
    CLUSTER = 4  # how agglomerates scatter their particles
    COLOUR = 5  # order of colours in a map


def stream(seed: int, purpose: Stream, *, replica: int = 0, source: int = 0) -> np.random.Generator:
    """Return the generator of one purpose.

    Parameters
    ----------
    seed : int
        Seed of the run, >= 0.
    purpose : Stream
        What the numbers are for.
    replica : int, optional
        Number of the replica, >= 0.
    source : int, optional
        Number of the source of nuclei, >= 0.

    Returns
    -------
    generator : numpy.random.Generator
        Always the same for the same four arguments (PCG64 seeded by numpy's SeedSequence).

    Examples
    --------
    >>> one = stream(7, Stream.PLACE).random()
    >>> bool(one == stream(7, Stream.PLACE).random())
    True
    >>> bool(one == stream(7, Stream.PLACE, replica=1).random())
    False
    """
    sequence = np.random.SeedSequence(seed, spawn_key=(replica, int(purpose), source))
    return np.random.default_rng(sequence)
