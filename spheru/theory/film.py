"""Mean field of a film: growth between two faces that crystals cannot cross.

Spheres cut off by the faces and nuclei on the faces; the inside of a thick sample is
`spheru.theory.conversion`.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING

import numpy as np

from spheru.errors import ValidityError
from spheru.quadrature import weighted_sum
from spheru.theory.moments import Moments

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import ArrayLike, NDArray

__all__ = ["FilmMeanField", "film_mean_field"]

_NOTHING = 1e-10  # extended fraction below which nothing has happened
_OVER = 60.0  # extended fraction beyond which nothing is left
_TOGETHER = 1e-9  # of the final grown length: births closer than this are born together


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FilmMeanField:
    """What the mean field says of a film.

    Attributes
    ----------
    thickness : float
        Distance of the faces [m].
    grown_length : ndarray of float64, shape (n,)
        Nodes [m].
    fraction : ndarray of float64, shape (n,)
        Transformed fraction, averaged over the thickness [-].
    fraction_mid : ndarray of float64, shape (n,)
        Transformed fraction halfway between the faces [-].
    number_per_area : float
        Crystals that grew in the end, of the inside and of both faces, per area of film [m^-2].
    """

    thickness: float
    grown_length: NDArray[np.float64]
    fraction: NDArray[np.float64]
    fraction_mid: NDArray[np.float64]
    number_per_area: float


def film_mean_field(
    grown_length: ArrayLike,
    density: ArrayLike,
    *,
    thickness: float,
    face_density: tuple[ArrayLike | None, ArrayLike | None] = (None, None),
) -> FilmMeanField:
    r"""Return conversion and count in a film, from nuclei inside it and on its faces.

    A point at the distance z from a face is reached by the nuclei of a ball that the face cuts,
    and by those of a disc in the face. With r = R - z > 0, R the radius of a crystal,

    .. math::
        \mathrm{cap} = \frac{\pi}{3} (2 r^3 + 3 z r^2), \qquad \mathrm{disc} = \pi (r^2 + 2 z r)

    so that both follow from moments of the radii, taken at the grown length less z.

    Parameters
    ----------
    grown_length : array_like of float, shape (n,)
        Nodes [m], n >= 2; never falling.
    density : array_like of float, shape (n,)
        Nuclei born inside the film by each node [m^-3], as for
        `spheru.theory.conversion.mean_field`.
    thickness : float
        Distance of the faces [m], > 0.
    face_density : tuple of (array_like of shape (n,) or None)
        Nuclei born on the low and on the high face by each node [m^-2].

    Returns
    -------
    field : FilmMeanField
        The mean field of the film.

    Raises
    ------
    ValidityError
        If the thickness is not above 0, shapes differ, or a value is not finite or falls.

    Notes
    -----
    The fraction at the nodes is good to 1e-6 (Gauss-Legendre over layers that meet where the
    crystals born together on a face end). Numbers take the untransformed fraction as linear
    between nodes.

    References
    ----------
    .. [1] J. M. Escleine, B. Monasse, E. Wey, J. M. Haudin, Colloid Polym. Sci. 262 (1984) 366.
       (memory)
    .. [2] N. Billon, J. M. Escleine, J. M. Haudin, Colloid Polym. Sci. 267 (1989) 668. (memory)

    Examples
    --------
    One nucleus per unit area on the low face only, a film of thickness 1 that has grown
    R = 2: the extended fraction at z is pi (4 - z^2), at mid-plane 3.75 pi = 11.780972, and the
    untransformed fraction there exp(-11.780972) = 7.648759e-06:

    >>> field = film_mean_field([0.0, 2.0], [0.0, 0.0], thickness=1.0,
    ...                         face_density=([1.0, 1.0], None))
    >>> round(1e6 * (1 - float(field.fraction_mid[-1])), 4)
    7.6487...
    >>> field.number_per_area
    1.0
    """
    if not (math.isfinite(thickness) and thickness > 0):
        raise ValidityError(f"film: expected a thickness above 0 m, got {thickness:g} m")
    length = np.asarray(grown_length, dtype=np.float64)
    inside = Moments(grown_length=length, density=np.asarray(density, dtype=np.float64), order=3)
    faces = [
        None
        if born is None
        else Moments(grown_length=length, density=np.asarray(born, dtype=np.float64), order=2)
        for born in face_density
    ]

    def extended(window: slice, z: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the extended fraction over a window of the nodes, at a height z for each."""
        total = 4 * math.pi / 3 * inside.nodes[3][window]
        for distance, face in zip((z, thickness - z), faces, strict=True):
            at, since = inside.locate(length[window] - distance)
            cap = 2 * inside.within(at, since, 3) + 3 * distance * inside.within(at, since, 2)
            total = total - math.pi / 3 * cap
            if face is not None:
                disc = face.within(at, since, 2) + 2 * distance * face.within(at, since, 1)
                total = total + math.pi * disc
        return np.maximum(total, 0.0)

    def left(window: slice, z: float) -> NDArray[np.float64]:
        """Return the untransformed fraction at one height over a window of the nodes."""
        return np.exp(-extended(window, np.full(length[window].shape, z)))

    window = _window(left, length.size, thickness)
    mean = np.zeros(length[window].shape)
    borders = _borders(length[window], thickness, inside, faces)
    for low, high in itertools.pairwise(borders):
        for place, weight in zip(*_layer_rule(), strict=True):
            layer = high - low
            mean += weight * layer * np.exp(-extended(window, low + place * layer))
    mean = np.minimum(mean / thickness, 1.0)
    number = thickness * _survivors(inside.density, mean, window)
    for z, face in zip((0.0, thickness), faces, strict=True):
        if face is not None:
            number += _survivors(face.density, left(window, z), window)
    return FilmMeanField(
        thickness=thickness,
        grown_length=length,
        fraction=1 - _spread(mean, window, length.size),
        fraction_mid=1 - _spread(left(window, thickness / 2), window, length.size),
        number_per_area=number,
    )


def _borders(
    length: NDArray[np.float64],
    thickness: float,
    inside: Moments,
    faces: list[Moments | None],
) -> NDArray[np.float64]:
    """Return the borders of the layers over which the thickness is integrated, shape (m, n).

    The untransformed fraction has a kink at the height to which the crystals of a face have grown
    that were born together. Deep below it nothing is left: the integral begins where the extended
    fraction pi s (R^2 - z^2) of those crystals alone falls below 40.
    """
    reach, full = [], []
    for face in faces:
        born, number = _largest_jump(inside if face is None else face)
        radius = np.maximum(length - born, 0.0)
        reach.append(np.minimum(radius, thickness))
        left = radius**2 - (math.inf if face is None or number == 0 else 40 / (math.pi * number))
        full.append(np.minimum(np.sqrt(np.maximum(left, 0.0)), thickness))
    low, high = full[0], np.maximum(thickness - full[1], full[0])
    inner = np.sort([reach[0], thickness - reach[1]], axis=0)
    return np.stack([low, *np.clip(inner, low, high), high])


def _largest_jump(moments: Moments) -> tuple[float, float]:
    """Return the grown length [m] at which most nuclei are born at once, and their density."""
    jumps = np.diff(moments.density, prepend=0.0)
    steps = np.diff(moments.grown_length, prepend=0.0)
    jumps[1:][steps[1:] > _TOGETHER * moments.grown_length[-1]] = 0.0
    largest = int(np.argmax(jumps))
    return float(moments.grown_length[largest]), float(jumps[largest])


def _window(
    left: Callable[[slice, float], NDArray[np.float64]], nodes: int, thickness: float
) -> slice:
    """Return the nodes between which anything happens."""
    probes = np.stack([left(slice(None), z) for z in (0.0, thickness / 2, thickness)])
    first = int(np.argmax(np.append(probes.min(axis=0), 0.0) < 1 - _NOTHING)) - 1
    last = int(np.argmax(np.append(probes.max(axis=0), 0.0) < math.exp(-_OVER))) + 1
    return slice(max(first, 0), min(last, nodes))


def _spread(left_over: NDArray[np.float64], window: slice, nodes: int) -> NDArray[np.float64]:
    """Return an untransformed fraction at all nodes: 1 before the window and 0 after it."""
    whole = np.zeros(nodes)
    whole[: window.start] = 1.0
    whole[window] = left_over
    return whole


def _survivors(born: NDArray[np.float64], left_over: NDArray[np.float64], window: slice) -> float:
    """Return how many nuclei are born where nothing has grown yet."""
    alive = _spread(left_over, window, born.size)
    return float(born[0] + weighted_sum(np.diff(born), (alive[1:] + alive[:-1]) / 2))


@cache
def _layer_rule() -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return places in a layer [0, 1], close together at both of its ends, and their weights."""
    roots, weights = np.polynomial.legendre.leggauss(16)
    part = (roots + 1) / 2
    return part**2 * (3 - 2 * part), weights / 2 * 6 * part * (1 - part)
