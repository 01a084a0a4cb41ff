"""The whole chain on one page: settings -> nuclei -> growth -> numbers. Read this first.

Nothing is written to disk here; see `spheru.output.folder`.
"""

from __future__ import annotations

import logging
from typing import TYPE_CHECKING

from spheru.growth.exact import tessellate
from spheru.measure.sizes import measure_sizes
from spheru.nuclei.sampling import draw_births
from spheru.nuclei.thinning import survivors
from spheru.run.conversion import conversion
from spheru.run.estimate import estimate
from spheru.run.plan import refuse_too_large
from spheru.run.result import Result
from spheru.run.sights import picture
from spheru.run.summary import summarise

if TYPE_CHECKING:
    from collections.abc import Callable

    from spheru.run.settings import Settings

__all__ = ["grow"]

_LOG = logging.getLogger("spheru")


def grow(
    settings: Settings,
    *,
    replica: int = 0,
    threads: int | None = None,
    progress: Callable[[str, float], None] | None = None,
) -> Result:
    """Seed nuclei, grow them until they impinge, and measure the map.

    Parameters
    ----------
    settings : Settings
        What to run.
    replica : int, optional
        Number of the replica, >= 0: the same settings with other random numbers.
    threads : int, optional
        Threads of the kernels; all cores where it is None. The result does not depend on it.
    progress : callable, optional
        Called with the name of the stage and the share of the whole that is done.

    Returns
    -------
    result : Result
        Map, numbers, curves and warnings.

    Raises
    ------
    NoCrystallisationError, MeltingError, ValidityError
        If the history or the sample makes no sense.
    CapacityError
        If the map needs more memory than there is.
    """
    tell = progress or (lambda _stage, _done: None)
    tell("mean field", 0.0)
    expected = estimate(settings)
    plan, found, settled = expected.plan, expected.kinetics, expected.settings
    refuse_too_large(plan)

    tell("nuclei", 0.05)
    drawn = draw_births(
        found.sources,
        found.clock,
        plan.region,
        seed=settings.seed,
        replica=replica,
        until=plan.until,
    )
    born = drawn.take(survivors(drawn, plan.region, threads=threads))
    _LOG.info("%d nuclei drawn, %d survive", len(drawn), len(born))

    tell("growth", 0.15)
    image = tessellate(
        born,
        plan.frame,
        end=plan.end,
        arrival=True,
        threads=threads,
        progress=lambda done: tell("growth", 0.15 + 0.6 * done),
    )

    tell("measure", 0.75)
    seen = picture(image, settled.sample)
    measured = image if settled.sample.view == "block" else seen
    sizes = measure_sizes(measured)
    curves = conversion(image, expected, spherulites=sizes.count)

    tell("numbers", 0.95)
    summary, warnings = summarise(expected, born, image, sizes, curves, replica=replica)
    tell("done", 1.0)
    return Result(
        settings=settled,
        replica=replica,
        image=image,
        picture=seen,
        births=born,
        sizes=sizes,
        conversion=curves,
        estimate=expected,
        summary=summary,
        warnings=warnings,
    )
