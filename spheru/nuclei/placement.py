"""WHERE nuclei stand: anywhere, in clusters, on faces.

Numbers and places only; when they start is `spheru.nuclei.activation`. The rows of what is drawn
come in random order, so that times may be given to them in rising order.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Protocol

import numpy as np

from spheru.errors import CapacityError, UnknownNameError, ValidityError
from spheru.streams import Stream

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.nuclei.region import Region

__all__ = ["Clustered", "Face", "Faces", "Placement", "Random", "Uniform"]

Random = Callable[[Stream], np.random.Generator]
Face = tuple[Literal["z", "y", "x"], Literal["low", "high"]]

_AXES = ("z", "y", "x")
_SIDES = ("low", "high")
_MOST = 2**32 - 2  # labels are 32-bit numbers, and 0 is the melt


class Placement(Protocol):
    """Where the nuclei of a source stand."""

    def draw(
        self, started: float, final: float, region: Region, random: Random
    ) -> NDArray[np.float64]:
        """Return the places of the nuclei that have started by some moment.

        Parameters
        ----------
        started : float
            Expected number by that moment [m-3, on faces m-2], >= 0.
        final : float
            The same by the end of the thermal history, >= `started`.
        region : Region
            Where to draw.
        random : callable
            Gives a generator of random numbers for a purpose.

        Returns
        -------
        position : ndarray of float64, shape (m, D)
            Places [m] in random order.

        Raises
        ------
        CapacityError
            If more nuclei are expected than there are labels.
        """
        ...


@dataclass(frozen=True, slots=True, kw_only=True)
class Uniform:
    """Nuclei anywhere in the region, independent of each other (a Poisson process)."""

    def draw(  # noqa: D102 (as in Placement)
        self,
        started: float,
        final: float,  # noqa: ARG002 (matters to clusters only)
        region: Region,
        random: Random,
    ) -> NDArray[np.float64]:
        count = _number(started * region.measure, random)
        return _anywhere(region, count, random(Stream.PLACE))


@dataclass(frozen=True, slots=True, kw_only=True)
class Faces:
    """Nuclei on walls of the sample, independent of each other.

    Attributes
    ----------
    faces : tuple of (str, str)
        Axis and side of each face, such as ``("z", "low")``; densities are per area of each.

    Raises
    ------
    UnknownNameError
        If an axis or a side is unknown.
    ValidityError
        If no face or one face twice is named.
    """

    faces: tuple[Face, ...]

    def __post_init__(self) -> None:
        for axis, side in self.faces:
            if axis not in _AXES:
                raise UnknownNameError("axis of a face", axis, _AXES)
            if side not in _SIDES:
                raise UnknownNameError("side of a face", side, _SIDES)
        if not self.faces or len(set(self.faces)) < len(self.faces):
            raise ValidityError(f"faces: expected different faces, got {self.faces}")

    def draw(  # noqa: D102 (as in Placement)
        self,
        started: float,
        final: float,  # noqa: ARG002 (matters to clusters only)
        region: Region,
        random: Random,
    ) -> NDArray[np.float64]:
        axes = [_AXES.index(axis) - 3 + region.dimension for axis, _ in self.faces]
        for (name, side), axis in zip(self.faces, axes, strict=True):
            if axis < 0 or region.periodic[axis]:
                raise ValidityError(
                    f"faces: expected an axis with ends for nuclei on ({name}, {side}), but "
                    f"{name} is {'periodic' if axis >= 0 else 'not an axis of a plane'}"
                )
        area = np.array([region.face_area(axis) for axis in axes])
        count = _number(started * float(area.sum()), random)
        place = random(Stream.PLACE)
        position = _anywhere(region, count, place)
        bound = np.cumsum(area / area.sum())[:-1]
        which = np.searchsorted(bound, place.random(count), side="right")
        for k, ((_, side), axis) in enumerate(zip(self.faces, axes, strict=True)):
            position[which == k, axis] = (region.high if side == "high" else region.low)[axis]
        return position


@dataclass(frozen=True, slots=True, kw_only=True)
class Clustered:
    r"""Nuclei in clusters, such as the particles of an agglomerate (Neyman and Scott [1]_).

    Centres are a Poisson process of `final / mean_number` per volume; each has a Poisson number
    of nuclei, even over a ball around it (in a plane, a disc). By an earlier moment the share
    `started / final` of the nuclei of a cluster has started. The density is the same everywhere,
    also next to an edge: a periodic edge brings nuclei in at the other side, a closed one reflects
    them back, and where the region is cut the centres are drawn from a margin around it as well.

    Attributes
    ----------
    mean_number : float
        Mean number of nuclei of a cluster that start by the end of the thermal history [-], > 0.
    radius : float
        Radius of a cluster [m], > 0.

    Raises
    ------
    ValidityError
        If a number is not above 0.

    References
    ----------
    .. [1] J. Neyman and E. L. Scott, J. R. Stat. Soc. B 20 (1958) 1 (cited from memory).
    """

    mean_number: float
    radius: float

    def __post_init__(self) -> None:
        if not (0 < self.mean_number < np.inf and 0 < self.radius < np.inf):
            raise ValidityError(
                "clusters: expected a mean number above 0 and a radius above 0 m, got "
                f"{self.mean_number} and {self.radius}"
            )

    def draw(  # noqa: D102 (as in Placement)
        self, started: float, final: float, region: Region, random: Random
    ) -> NDArray[np.float64]:
        share = started / final if final > 0 else 0.0
        wider = region.padded(self.radius)
        number, scatter = random(Stream.NUMBER), random(Stream.CLUSTER)
        _refuse_too_many(started * wider.measure)
        centres = int(number.poisson(final / self.mean_number * wider.measure))
        members = number.poisson(self.mean_number * share, size=centres)
        position = np.repeat(_anywhere(wider, centres, random(Stream.PLACE)), members, axis=0)
        position += self.radius * _in_unit_ball(position.shape, scatter)
        position = _back_inside(position, region)
        position = position[region.holds(position)]
        return scatter.permutation(position)


def _refuse_too_many(expected: float) -> None:
    if not expected < _MOST:
        raise CapacityError(
            f"nuclei: {expected:.3g} are expected, more than the {_MOST:.3g} labels that there "
            "are; make the sample smaller or look at a section"
        )


def _number(expected: float, random: Random) -> int:
    _refuse_too_many(expected)
    return int(random(Stream.NUMBER).poisson(expected))


def _anywhere(region: Region, count: int, random: np.random.Generator) -> NDArray[np.float64]:
    position = random.random((count, region.dimension))
    position *= region.extent
    position += region.low
    return position


def _in_unit_ball(shape: tuple[int, ...], random: np.random.Generator) -> NDArray[np.float64]:
    direction = random.standard_normal(shape)
    direction /= np.linalg.norm(direction, axis=1, keepdims=True)
    return direction * random.random((shape[0], 1)) ** (1 / shape[1])


def _back_inside(position: NDArray[np.float64], region: Region) -> NDArray[np.float64]:
    """Bring points back in at the other side of periodic axes, and reflect them at closed ones.

    Reflection keeps the density even: what is reflected to a place is what would have come to it
    from centres behind the wall.
    """
    for axis, (low, extent) in enumerate(zip(region.low, region.extent, strict=True)):
        if region.periodic[axis]:
            position[:, axis] = low + np.mod(position[:, axis] - low, extent)
        elif region.closed[axis]:
            folded = np.mod(position[:, axis] - low, 2 * extent)
            position[:, axis] = low + np.minimum(folded, 2 * extent - folded)
    return position
