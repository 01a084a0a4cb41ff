"""What will be run: window, pixel, the space in which nuclei are drawn, and what that costs.

Decided from the mean field before anything is drawn.
"""

from __future__ import annotations

import math
import os
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from spheru.errors import CapacityError, ValidityError
from spheru.image.frame import Frame
from spheru.nuclei.placement import Clustered, Faces
from spheru.nuclei.region import Region
from spheru.quadrature import weighted_sum
from spheru.theory.conversion import mean_field

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.run.kinetics import Kinetics
    from spheru.run.settings import Sample, Settings
    from spheru.theory.conversion import MeanField

__all__ = ["Plan", "fits_memory", "free_memory", "plan", "refuse_too_large", "typical_diameter"]

# Nothing is drawn any more once fewer survivors, or pixels, than this are expected still to come.
_STILL_TO_COME: Final = 1e-3
_LEAST_SPHERULITES: Final = 0.5
_BYTES_PER_PIXEL: Final = 12  # labels and arrival 4 each, the pass of measuring and the files
_BYTES_PER_BIRTH: Final = 120
_BASE_BYTES: Final = 200_000_000  # the program itself with its libraries
_WHOLE: Final = 0.99  # from this transformed fraction on the sample counts as crystallised


@dataclass(frozen=True, slots=True, kw_only=True)
class Plan:
    """Window, space of the nuclei, and cost of a run.

    Attributes
    ----------
    sample : Sample
        The sample with window and pixel settled.
    frame : Frame
        The grid that is grown.
    region : Region
        Where nuclei are drawn: the window, and around a cut one whatever can reach it.
    count_depth : float or None
        Survivors within this distance of a section are counted for the number per volume [m].
    until : float
        Grown length after which no nucleus matters any more [m].
    reach : float
        Grown length at which the window is full, or the history ends [m].
    end : float
        Grown length at the end of the history [m]; inf where the window is full before.
    candidates : float
        Expected number of nuclei that are drawn.
    spherulites : float
        Expected number of spherulites in the picture.
    memory : int
        Memory that the run needs [bytes].
    seconds : float
        Time that the run takes on one core of an ordinary machine [s], a rough figure.
    notices : tuple of str
        What was rounded or chosen.
    """

    sample: Sample
    frame: Frame
    region: Region
    count_depth: float | None
    until: float
    reach: float
    end: float
    candidates: float
    spherulites: float
    memory: int
    seconds: float
    notices: tuple[str, ...]


def plan(settings: Settings, found: Kinetics) -> Plan:
    """Settle window and pixel, and the space in which nuclei are drawn.

    Parameters
    ----------
    settings : Settings
        What is asked for.
    found : Kinetics
        Its course by mean field.

    Returns
    -------
    plan : Plan
        What will be run.

    Raises
    ------
    ValidityError
        If a pixel is larger than the window, or the window would hold no spherulite.
    """
    frame, notices = _frame(settings.sample, found)
    sample = replace(
        settings.sample,
        size=frame.extent,
        pixel=frame.pixel,
        spherulites=None,
        pixels_across=None,
    )
    cautious = _cautious_field(sample, found)
    reach = _reach(cautious, frame.pixels)
    region = _region(sample, frame, reach)
    until = _until(found, cautious, region)
    candidates = _candidates(found, region, until)
    wanted = _picture_density(sample, found) * _picture_measure(frame, sample)
    if wanted < _LEAST_SPHERULITES:
        raise ValidityError(
            f"sample.size: the window would hold {wanted:.2g} spherulites; their typical diameter "
            f"is {typical_diameter(sample, found) * 1e6:.4g} um: choose a window at least ten "
            "times as wide, or write spherulites = 1000 instead of size"
        )
    end = float(found.clock.grown_length[-1])
    memory = _BASE_BYTES + _BYTES_PER_PIXEL * frame.pixels + int(_BYTES_PER_BIRTH * candidates)
    return Plan(
        sample=sample,
        frame=frame,
        region=region,
        count_depth=reach if sample.view == "section" else None,
        until=until,
        reach=reach,
        end=math.inf if reach < end else end,  # no pixel of a full window is reached later
        candidates=candidates,
        spherulites=wanted,
        memory=memory,
        seconds=_seconds(frame, candidates),
        notices=tuple(notices),
    )


def typical_diameter(sample: Sample, found: Kinetics) -> float:
    """Return the diameter of the mean area (or, of a volume, of the mean volume) [m].

    Parameters
    ----------
    sample : Sample
        What is looked at.
    found : Kinetics
        Its course by mean field.

    Returns
    -------
    diameter : float
        sqrt(4 f/(pi N_A)) or (6 f/(pi N_V))^(1/3) with the transformed fraction f.
    """
    fraction = found.fraction[-1]
    if sample.dimension == 2:
        return math.sqrt(4 * fraction / (math.pi * _section_density(sample, found)))
    number = found.bulk.number_density
    if found.film is not None and sample.thickness is not None:
        number = found.film.number_per_area / sample.thickness
    return float((6 * fraction / (math.pi * number)) ** (1 / 3))


def free_memory() -> int | None:
    """Return how much memory can still be had [bytes]; None where the system does not tell."""
    info = Path("/proc/meminfo")
    if info.exists():
        for line in info.read_text(encoding="ascii").splitlines():
            if line.startswith("MemAvailable:"):
                return int(line.split()[1]) * 1024
    try:
        return int(os.sysconf("SC_AVPHYS_PAGES") * os.sysconf("SC_PAGE_SIZE"))
    except (AttributeError, ValueError, OSError):
        return None


def refuse_too_large(made: Plan) -> None:
    """Refuse a run that needs more memory than there is, before anything is allocated.

    Parameters
    ----------
    made : Plan
        What would be run.

    Raises
    ------
    CapacityError
        With what is needed, what is there and what would fit.
    """
    if fits_memory(made):
        return
    free = free_memory() or 0
    shape = " x ".join(map(str, made.frame.shape[::-1]))
    factor = (made.memory / free) ** (1 / made.frame.dimension)
    stored = ", and --store keeps it on the disk" if made.frame.dimension == 3 else ""
    raise CapacityError(
        f"sample: a map of {shape} pixels needs {made.memory / 1e9:.1f} GB of memory and "
        f"{free / 1e9:.1f} GB are free; a pixel of {made.frame.pixel * factor * 1.05e6:.3g} um or "
        f"a smaller window would fit{stored}"
    )


def fits_memory(made: Plan) -> bool:
    """Tell whether a run fits the memory that is free, as far as the system tells.

    Parameters
    ----------
    made : Plan
        What would be run.

    Returns
    -------
    fits : bool
        Whether it does.
    """
    free = free_memory()
    return free is None or made.memory <= free


def _frame(sample: Sample, found: Kinetics) -> tuple[Frame, list[str]]:
    """Return the grid in whole pixels, and what was chosen or rounded for it."""
    pixel, notices = _pixel(sample, found)
    size = sample.size
    if size is None:
        axes = 3 if sample.view == "block" else 2
        edge = ((sample.spherulites or 1000) / _picture_density(sample, found)) ** (1 / axes)
        edge = max(1, round(edge / pixel)) * pixel
        size = (edge,) * axes
        if sample.view == "film" and sample.thickness is not None:
            size = (sample.thickness, *size)
    shape = tuple(max(1, round(edge / pixel)) for edge in size)
    for name, edge, count in zip("xyz", size[::-1], shape[::-1], strict=False):
        if pixel > edge * (1 + 1e-9):
            raise ValidityError(
                f"sample.pixel: expected a pixel smaller than the window, got {pixel * 1e6:.4g} um "
                f"with {edge * 1e6:.4g} um along {name}"
            )
        if abs(count * pixel / edge - 1) > 1e-9:
            notices.append(
                f"{name} is {count * pixel * 1e6:.6g} um: whole pixels nearest to "
                f"{edge * 1e6:.6g} um"
            )
    frame = Frame(
        shape=shape,
        pixel=pixel,
        periodic=tuple(edge == "periodic" for edge in sample.edges),
        closed=tuple(edge == "closed" for edge in sample.edges),
        plane_z=0.0 if sample.view == "section" else None,
    )
    return frame, notices


def _pixel(sample: Sample, found: Kinetics) -> tuple[float, list[str]]:
    """Return the edge of a pixel, so that a film is a whole number of pixels thick."""
    pixel, notices = sample.pixel, []
    if pixel is None:
        typical = typical_diameter(sample, found)
        pixel = float(f"{typical / (sample.pixels_across or 25.0):.3g}")
        notices.append(f"pixel {pixel * 1e6:.4g} um: typical diameter {typical * 1e6:.4g} um")
    if sample.view == "film" and sample.thickness is not None:
        rows = max(1, math.ceil(sample.thickness / pixel - 1e-9))
        if abs(sample.thickness / rows / pixel - 1) > 1e-9:
            notices.append(
                f"pixel {sample.thickness / rows * 1e6:.6g} um: {rows} whole pixels across the film"
            )
        pixel = sample.thickness / rows
    return pixel, notices


def _section_density(sample: Sample, found: Kinetics) -> float:
    """Return the expected number of spherulites per area of a plane picture [m-2]."""
    bulk = found.bulk
    if sample.view == "plane":
        return bulk.number_density
    if bulk.section_count is not None and bulk.fraction[-1] > _WHOLE:
        return bulk.section_count
    # spheres that hardly touch: each is cut by the planes within its radius
    gained = np.diff(bulk.survivors, prepend=0.0)
    radius = bulk.grown_length[-1] - bulk.grown_length
    return float(2 * weighted_sum(gained, radius))


def _picture_density(sample: Sample, found: Kinetics) -> float:
    if sample.view == "block":
        return found.bulk.number_density
    if sample.view == "film" and found.film is not None:
        return found.film.number_per_area
    return _section_density(sample, found)


def _picture_measure(frame: Frame, sample: Sample) -> float:
    return math.prod(frame.extent[1:]) if sample.view == "film" else frame.measure


def _cautious_field(sample: Sample, found: Kinetics) -> MeanField:
    """Return a mean field that never ends too early.

    Clusters count as their parents, and a point in a corner of closed walls sees a part of space.
    """
    total = np.zeros_like(found.clock.grown_length)
    for source, density in zip(found.sources, found.densities, strict=True):
        if isinstance(source.placement, Faces):
            continue
        share = 1.0
        if isinstance(source.placement, Clustered):
            number = source.placement.mean_number
            share = -math.expm1(-number) / number
        total = total + share * density
    if sample.view == "plane" and sample.thickness is not None:
        total = total * sample.thickness
    walls = sum(edge == "closed" for edge in sample.edges)
    return mean_field(found.clock.grown_length, total / 2**walls, dimension=sample.growth_dimension)


def _reach(field: MeanField, pixels: int) -> float:
    empty = np.exp(-field.extended) * pixels
    done = np.flatnonzero(empty < _STILL_TO_COME)
    return float(field.grown_length[done[0] if done.size else -1])


def _region(sample: Sample, frame: Frame, reach: float) -> Region:
    """Return the window, and around a cut edge or a section whatever can reach it."""
    window = Region(
        low=(0.0,) * frame.dimension,
        high=frame.extent,
        periodic=frame.periodic,
        closed=frame.closed,
        thickness=sample.thickness if sample.view == "plane" else None,
    ).padded(reach)
    if sample.view != "section":
        return window
    # counted within the reach of the plane, and the reach beyond that
    return Region(
        low=(-2 * reach, *window.low),
        high=(2 * reach, *window.high),
        periodic=(False, *window.periodic),
        closed=(False, *window.closed),
    )


def _measures(found: Kinetics, region: Region) -> list[float]:
    """Return the volume, or the area of its faces, on which each source acts."""
    return [
        sum(region.face_area("zyx".index(axis)) for axis, _ in source.placement.faces)
        if isinstance(source.placement, Faces)
        else region.measure
        for source in found.sources
    ]


def _until(found: Kinetics, field: MeanField, region: Region) -> float:
    """Return the grown length after which fewer than `_STILL_TO_COME` survivors are expected."""
    born = np.zeros_like(field.grown_length)
    for density, measure in zip(found.densities, _measures(found, region), strict=True):
        born = born + density * measure
    alive = np.exp(-field.extended)
    gained = np.diff(born) * alive[:-1]  # the larger of the two ends: on the safe side
    to_come: NDArray[np.float64] = np.append(np.cumsum(gained[::-1])[::-1], 0.0)
    return float(field.grown_length[np.flatnonzero(to_come < _STILL_TO_COME)[0]])


def _candidates(found: Kinetics, region: Region, until: float) -> float:
    last = int(np.searchsorted(found.clock.grown_length, until, side="right")) - 1
    return float(
        sum(
            density[last] * measure
            for density, measure in zip(found.densities, _measures(found, region), strict=True)
        )
    )


def _seconds(frame: Frame, candidates: float) -> float:
    """Return a rough time: start, pixels (growth, measuring, files), nuclei.

    Measured on one core of a server of 2021, at 6 to 25 pixels across.
    """
    return 4.0 + 1.2e-7 * frame.pixels + 1.6e-6 * candidates
