"""The one door to the compiler of kernels.

Nothing else in the package imports numba, but for the files named ``kernels.py``.
"""

from __future__ import annotations

import threading
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, TypeVar

import numba

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

__all__ = ["kernel", "prange", "threads"]

F = TypeVar("F", bound="Callable[..., Any]")

prange = numba.prange

# One parallel kernel at a time: the work queue that numba falls back to where it finds no OpenMP
# aborts the process when two Python threads enter it.
_LOCK = threading.RLock()


def kernel(*, parallel: bool = False, inline: bool = False) -> Callable[[F], F]:
    """Compile a function, and keep the result on disk where that is possible.

    Division by zero gives inf, as numpy has it. There is no fast-math: inf and nan keep their
    meaning. A function is compiled once, either parallel or not: both variants would share one
    file on disk and silently become each other.

    Parameters
    ----------
    parallel : bool, optional
        Whether the loops over `prange` run on several threads; see `threads`.
    inline : bool, optional
        Whether the caller takes in the body of the function (for small helpers).

    Returns
    -------
    decorator : callable
        Compiles at the first call. Where neither the package nor the user has a folder that can
        be written, nothing is kept (set NUMBA_CACHE_DIR to a folder that can be).
    """
    options: dict[str, Any] = {"parallel": parallel, "error_model": "numpy", "nogil": True}
    if inline:
        options["inline"] = "always"

    def decorate(function: F) -> F:
        try:
            return numba.njit(cache=True, **options)(function)  # type: ignore[no-any-return]
        except RuntimeError:  # no folder for the cache: numba says so while decorating
            return numba.njit(**options)(function)  # type: ignore[no-any-return]

    return decorate


@contextmanager
def threads(count: int | None = None) -> Iterator[int]:
    """Hold the lock of the kernels and set how many threads they use.

    Parameters
    ----------
    count : int, optional
        Number of threads; all that there are where it is None or larger.

    Yields
    ------
    count : int
        The number in force. What was set before comes back at the end.

    Examples
    --------
    >>> with threads(1) as count:
    ...     count
    1
    """
    most = int(numba.config.NUMBA_NUM_THREADS)  # type: ignore[attr-defined]
    wanted = most if count is None else max(1, min(int(count), most))
    with _LOCK:
        before = int(numba.get_num_threads())
        numba.set_num_threads(wanted)
        try:
            yield wanted
        finally:
            numba.set_num_threads(before)
