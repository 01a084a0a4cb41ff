"""The whole chain on one page: settings -> nuclei -> growth -> numbers. Read this first.

Nothing is written to disk here; see `spheru.output.folder`.
"""

from __future__ import annotations

import logging
from typing import TYPE_CHECKING

import numpy as np

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

    from spheru.births import Births
    from spheru.image.label_image import LabelImage
    from spheru.measure.sizes import Sizes
    from spheru.run.estimate import Estimate
    from spheru.run.settings import Settings

__all__ = ["grow", "surviving_births"]

_LOG = logging.getLogger("spheru")


def grow(
    settings: Settings,
    *,
    replica: int = 0,
    threads: int | None = None,
    progress: Callable[[str, float], None] | None = None,
    expected: Estimate | None = None,
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
    expected : Estimate, optional
        What `estimate` gives for the settings, where it is there already.

    Returns
    -------
    result : Result
        Map, numbers, curves and warnings.

    Raises
    ------
    NoCrystallisationError, MeltingError, ValidityError
        If the history or the sample makes no sense.
    CapacityError
        If the map needs more memory than there is; see `spheru.run.stored` then.
    """
    tell = progress or (lambda _stage, _done: None)
    tell("mean field", 0.0)
    expected = expected or estimate(settings)
    plan, settled = expected.plan, expected.settings
    refuse_too_large(plan)

    tell("nuclei", 0.05)
    born = surviving_births(expected, replica=replica, threads=threads)

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
    owners = _owners(image, sizes if measured is image else None)
    summary, warnings = summarise(expected, born, owners, sizes, curves, replica=replica)
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


def surviving_births(expected: Estimate, *, replica: int, threads: int | None = None) -> Births:
    """Draw the nuclei of a run and keep those that are not swallowed before they start.

    Parameters
    ----------
    expected : Estimate
        The mean field of the run, with its plan.
    replica : int
        Number of the replica.
    threads : int, optional
        Threads of the kernels; all cores where it is None.

    Returns
    -------
    births : Births
        The survivors.
    """
    plan, found = expected.plan, expected.kinetics
    drawn = draw_births(
        found.sources,
        found.clock,
        plan.region,
        seed=expected.settings.seed,
        replica=replica,
        until=plan.until,
    )
    born = drawn.take(survivors(drawn, plan.region, threads=threads))
    _LOG.info("%d nuclei drawn, %d survive", len(drawn), len(born))
    return born


def _owners(image: LabelImage, sizes: Sizes | None) -> Births:
    """Return the births that own a pixel of a map; `sizes` are those of the map, if it has any."""
    label = np.flatnonzero(np.bincount(image.labels.ravel())) if sizes is None else sizes.label
    kept: Births = image.births  # type: ignore[assignment]  # a map that was grown has births
    return kept.take(label[label > 0].astype(np.intp) - 1)
