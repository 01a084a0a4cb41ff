"""A source of nuclei: a name, when its nuclei start, and where they stand."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import ValidityError
from spheru.nuclei.placement import Uniform

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.nuclei.activation import Activation
    from spheru.nuclei.placement import Placement
    from spheru.thermal.clock import Clock

__all__ = ["Source"]

_ROUNDED: Final = 1 - 1e-9  # a law may fall by as much as its rounding


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """Where nuclei come from.

    Attributes
    ----------
    name : str
        What the source is called in tables.
    activation : Activation
        When its nuclei start.
    placement : Placement
        Where they stand.
    """

    name: str
    activation: Activation
    placement: Placement = field(default_factory=Uniform)

    def density(self, clock: Clock) -> NDArray[np.float64]:
        """Return the number of nuclei that have started by each node if nothing had grown yet.

        Parameters
        ----------
        clock : Clock
            Time and temperature at n nodes.

        Returns
        -------
        density : ndarray of float64, shape (n,)
            Cumulative number per volume [m-3], on faces per area [m-2]; never falling.

        Raises
        ------
        ValidityError
            If the number is negative, falls by more than rounding, or is not finite.
        """
        found = self.activation.density(clock)
        density = np.maximum.accumulate(found)
        if not (np.isfinite(found).all() and found[0] >= 0 and (found >= _ROUNDED * density).all()):
            raise ValidityError(
                f"nuclei of '{self.name}': expected a finite number per volume [m-3] or area [m-2] "
                f"that never falls over the history, got {found.min():.4g} to {found.max():.4g}; "
                "check the numbers of its law"
            )
        return density

    def temperatures(self) -> tuple[float, ...]:
        """Return the temperatures [K] at which the law jumps or bends, for nodes of the clock."""
        return self.activation.temperatures()

    def delayed(self, time: float) -> Source:
        """Return the same source, with nothing starting before a time [s]."""
        return replace(self, activation=self.activation.delayed(time))
