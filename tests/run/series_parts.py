"""Parts that the tests of series and aims share: a small series, an executor in this process."""

from __future__ import annotations

import copy
from concurrent.futures import Executor, Future
from typing import Any

from spheru.config.series import series_from_mapping
from tests.run.settings import BASE

SMALL: dict[str, Any] = copy.deepcopy(BASE) | {
    "sample": {"view": "section", "spherulites": 60, "pixels_across": 8, "edges": "periodic"}
}


class Inline(Executor):
    """Runs what it is given at once, in this process; `before` is called with each case first."""

    def __init__(self, before=None) -> None:
        self.before = before
        self.runs: list[tuple[Any, int]] = []

    def submit(self, fn, /, job, document, replica):
        future: Future[Any] = Future()
        try:
            if self.before is not None:
                self.before(document, replica)
            self.runs.append((document, replica))
            future.set_result(fn(job, document, replica))
        except Exception as fault:  # noqa: BLE001 (it belongs to the future)
            future.set_exception(fault)
        return future


def rate_series(*rates: str, **table: Any):
    """Return a small series over cooling rates, and its maker of settings."""
    vary = {"key": "cooling.steps[0].rate", "values": list(rates)}
    return series_from_mapping(SMALL | {"series": {"vary": [vary], **table}})
