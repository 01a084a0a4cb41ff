"""What a run gives back: pictures, numbers, curves, warnings.

Records only; how they come about is `spheru.run.grow`, what becomes of them `spheru.output`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping

    import numpy as np
    from numpy.typing import NDArray

    from spheru.births import Births
    from spheru.image.frame import Frame
    from spheru.image.label_image import LabelImage
    from spheru.measure.intervals import Statistic
    from spheru.measure.sizes import Sizes
    from spheru.run.course import Landmarks
    from spheru.run.estimate import Estimate
    from spheru.run.settings import Settings

__all__ = ["Conversion", "Result", "StoredMap"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Conversion:
    """Transformed fraction and heat flow over time, simulated and by mean field.

    Attributes
    ----------
    time : ndarray of float64, shape (n,)
        Time since the start of the history [s].
    temperature : ndarray of float64, shape (n,)
        Temperature of the sample [K].
    fraction : ndarray of float64, shape (n,)
        Simulated transformed fraction [-].
    fraction_estimate : ndarray of float64, shape (n,)
        The same by mean field [-].
    heat_flow : ndarray of float64, shape (n,)
        Heat given off per mass of sample [W/kg], exothermic positive, without a baseline.
    heat_flow_estimate : ndarray of float64, shape (n,)
        The same by mean field [W/kg].
    landmarks : Landmarks
        Peak, onset and half time of the simulated curve, and the window over which its rate is
        averaged.
    intervals : mapping of str to Statistic
        Those landmarks, and ``fraction_transformed``, with intervals over tiles.
    """

    time: NDArray[np.float64]
    temperature: NDArray[np.float64]
    fraction: NDArray[np.float64]
    fraction_estimate: NDArray[np.float64]
    heat_flow: NDArray[np.float64]
    heat_flow_estimate: NDArray[np.float64]
    landmarks: Landmarks
    intervals: Mapping[str, Statistic] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True)
class StoredMap:
    """A map that is not in memory, but stored chunk by chunk.

    Attributes
    ----------
    frame : Frame
        The grid.
    births : Births
        Births of the labels: row i owns label i + 1.
    count : int
        Number of labels that own at least one pixel.
    sha256 : str
        Checksum of the map: the SHA-256 of the SHA-256 digests of its chunks (uint32, little
        endian, without padding) in the order of memory.
    """

    frame: Frame
    births: Births
    count: int
    sha256: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Result:
    """A finished run.

    Attributes
    ----------
    settings : Settings
        The settings with window and pixel settled.
    replica : int
        Number of the replica.
    image : LabelImage or StoredMap
        The map; a film is a volume.
    picture : LabelImage
        The map as it is looked at: two axes, the named sight of a film, the middle of a block.
    births : Births
        All births that were kept (also those that own no pixel).
    sizes : Sizes
        The spherulites and their statistics.
    conversion : Conversion
        Transformed fraction and heat flow over time.
    estimate : Estimate
        The same by mean field.
    summary : mapping
        Headline numbers, the unit in every key (see summary.json).
    warnings : tuple of str
        What must be said with the result.
    """

    settings: Settings
    replica: int
    image: LabelImage | StoredMap
    picture: LabelImage
    births: Births
    sizes: Sizes
    conversion: Conversion
    estimate: Estimate
    summary: Mapping[str, Any] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()
