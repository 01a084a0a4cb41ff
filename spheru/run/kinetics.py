"""The course of crystallisation that settings imply, without a random number.

Clock, numbers of nuclei and mean field, brought together once for the estimate and for the run.
What is then made of them stands in `spheru.run.estimate` and `spheru.run.grow`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from spheru.constants import ZERO_CELSIUS
from spheru.errors import MeltingError, NoCrystallisationError
from spheru.material.rate_law import induction_time
from spheru.nuclei.placement import Faces
from spheru.theory.conversion import mean_field
from spheru.theory.film import film_mean_field
from spheru.thermal.clock import Clock

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from spheru.nuclei.source import Source
    from spheru.run.settings import Sample, Settings
    from spheru.theory.conversion import MeanField
    from spheru.theory.film import FilmMeanField

__all__ = ["Kinetics", "Walls", "kinetics"]

# A step of the clock may change the transformed fraction by no more than this.
_LARGEST_STEP = 2e-3
# The logarithm of the share that is left may fall by no more than this.
_LARGEST_DECAY = 0.25
_MOST_PARTS = 64  # into which an interval is divided at once
_PASSES = 40
# Below this transformed fraction nothing has crystallised that could melt or be seen.
_NOTHING = 1e-6


@dataclass(frozen=True, slots=True, kw_only=True)
class Walls:
    """Two walls across z and the nuclei that start on them.

    Attributes
    ----------
    distance : float
        Distance of the walls [m].
    low, high : ndarray of float64, shape (n,)
        Number of nuclei started on each wall by each node if nothing had grown [m-2].
    """

    distance: float
    low: NDArray[np.float64]
    high: NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Kinetics:
    """What happens over the thermal history, by mean field.

    Attributes
    ----------
    clock : Clock
        Time, temperature and grown length at the nodes.
    sources : tuple of Source
        The sources of the settings, delayed by the induction time.
    densities : tuple of ndarray of float64, shape (n,)
        Per source: nuclei started by each node if nothing had grown [m-3], on faces [m-2].
    bulk : MeanField
        Mean field of the bulk; in a plane layer that of two-dimensional growth.
    film : FilmMeanField or None
        Mean field averaged between two walls, where there are any.
    walls : Walls or None
        Those walls and what starts on them.
    """

    clock: Clock
    sources: tuple[Source, ...]
    densities: tuple[NDArray[np.float64], ...]
    bulk: MeanField
    film: FilmMeanField | None
    walls: Walls | None

    @property
    def fraction(self) -> NDArray[np.float64]:
        """Transformed fraction at the nodes of the clock [-]."""
        return self.bulk.fraction if self.film is None else self.film.fraction

    def scaled(self, *, growth: float, sites: float, every: int = 1) -> Kinetics:
        """Return the course with another growth rate and another number of nuclei.

        Parameters
        ----------
        growth, sites : float
            Factors of the growth rate and of all numbers of nuclei, > 0.
        every : int, optional
            Only every so many-th node is kept: quicker and coarser.

        Returns
        -------
        kinetics : Kinetics
            The mean fields are those of the scaled laws; clock and sources stay as they were.
        """
        bulk = mean_field(
            self.bulk.grown_length[::every] * growth,
            self.bulk.density[::every] * sites,
            dimension=self.bulk.dimension,
        )
        walls = None
        if self.walls is not None:
            walls = replace(
                self.walls,
                low=self.walls.low[::every] * sites,
                high=self.walls.high[::every] * sites,
            )
        return replace(self, bulk=bulk, walls=walls, film=_film(bulk, walls))


def kinetics(settings: Settings, *, temperature_step: float = 0.01) -> Kinetics:
    """Follow the crystallisation over the thermal history by mean field.

    Parameters
    ----------
    settings : Settings
        What to follow.
    temperature_step : float, optional
        Largest change of temperature between two nodes of the clock [K].

    Returns
    -------
    kinetics : Kinetics
        Clock, nuclei and mean field.

    Raises
    ------
    NoCrystallisationError
        If the history never lets more than a millionth of the material crystallise.
    MeltingError
        If it rises above the observed melting temperature after crystallisation has begun.
    """
    material, history = settings.material, settings.history
    if history.lowest_temperature >= material.t_m0:
        raise NoCrystallisationError(
            f"cooling: the sample stays at or above the equilibrium melting temperature of "
            f"{material.t_m0 - ZERO_CELSIUS:.1f} degC and never crystallises; {_window(settings)}"
        )
    marks = {material.t_m0, *material.growth.breakpoints()}
    for source in settings.sources:
        marks.update(source.temperatures())
    clock = Clock.from_history(
        history,
        material.growth.rate,
        breakpoints=sorted(marks),
        temperature_step=temperature_step,
    )
    start = _induction_end(settings, clock)
    if 0 < start < history.duration:
        clock = clock.refined(np.array([start * (1 - 1e-12), start]))
    sources = tuple(source.delayed(start) for source in settings.sources)
    found = _solve(settings, clock, sources)
    for _ in range(_PASSES):
        times = np.concatenate(
            [
                clock.time_at(found.bulk.refinement(_LARGEST_STEP)),
                _between(clock.time, found.fraction, _LARGEST_STEP),
                _between(clock.time, _unfilled(found.fraction), _LARGEST_DECAY),
            ]
        )
        if times.size == 0:
            break
        clock = clock.refined(times)
        found = _solve(settings, clock, sources)
    _refuse(settings, found)
    return found


def _solve(settings: Settings, clock: Clock, sources: tuple[Source, ...]) -> Kinetics:
    sample = settings.sample
    densities = tuple(source.density(clock) for source in sources)
    volume = np.zeros_like(clock.time)
    faces = {"low": np.zeros_like(clock.time), "high": np.zeros_like(clock.time)}
    for source, density in zip(sources, densities, strict=True):
        if isinstance(source.placement, Faces):
            for _, side in source.placement.faces:
                faces[side] = faces[side] + density
        else:
            volume = volume + density
    if sample.view == "plane" and sample.thickness is not None:
        volume = volume * sample.thickness
    bulk = mean_field(clock.grown_length, volume, dimension=sample.growth_dimension)
    distance = _wall_distance(sample)
    walls = None
    if distance is not None:
        walls = Walls(distance=distance, low=faces["low"], high=faces["high"])
    return Kinetics(
        clock=clock,
        sources=sources,
        densities=densities,
        bulk=bulk,
        film=_film(bulk, walls),
        walls=walls,
    )


def _film(bulk: MeanField, walls: Walls | None) -> FilmMeanField | None:
    if walls is None:
        return None
    return film_mean_field(
        bulk.grown_length,
        bulk.density,
        thickness=walls.distance,
        face_density=(walls.low, walls.high),
    )


def _wall_distance(sample: Sample) -> float | None:
    """Return the distance of the two walls across z [m], or None where z has no walls."""
    if sample.view == "film":
        return sample.thickness
    if sample.view == "block" and sample.edges[0] == "closed" and sample.size is not None:
        return sample.size[0]
    return None


def _induction_end(settings: Settings, clock: Clock) -> float:
    if settings.induction is None:
        return 0.0
    induction, t_m0 = settings.induction, settings.material.t_m0

    def pace(temperature: NDArray[np.float64]) -> NDArray[np.float64]:
        return 1 / induction_time(
            temperature, time=induction.time, exponent=induction.exponent, t_m0=t_m0
        )

    passed = clock.integral(pace)
    if passed[-1] < 1:
        raise NoCrystallisationError(
            f"induction: only {100 * passed[-1]:.2g} % of the induction time passes before the "
            "history ends, so nothing starts; hold longer or cool further"
        )
    return float(np.interp(1.0, passed, clock.time))


def _unfilled(fraction: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return minus the logarithm of the share that is left, as far as it can be seen."""
    return -np.log(np.maximum(1 - fraction, _NOTHING))


def _between(
    time: NDArray[np.float64], values: NDArray[np.float64], step: float
) -> NDArray[np.float64]:
    """Return times that divide the intervals over which values rise by more than a step."""
    parts = np.ceil(np.diff(values) / step).clip(1, _MOST_PARTS).astype(np.int64)
    wide = np.flatnonzero((parts > 1) & (np.diff(time) > 1e-9 * time[-1]))
    pieces = [np.linspace(time[k], time[k + 1], parts[k] + 1)[1:-1] for k in wide]
    return np.concatenate([np.empty(0), *pieces])


def _refuse(settings: Settings, found: Kinetics) -> None:
    fraction, clock = found.fraction, found.clock
    if fraction[-1] < _NOTHING:
        raise NoCrystallisationError(
            f"cooling: by the end of the history (at "
            f"{clock.temperature[-1] - ZERO_CELSIUS:.1f} degC after {clock.time[-1]:.4g} s) less "
            f"than a millionth has crystallised; {_window(settings)}"
        )
    observed = settings.material.t_m_observed
    molten = np.flatnonzero((fraction > _NOTHING) & (clock.temperature > observed))
    if molten.size:
        k = int(molten[0])
        raise MeltingError(
            f"cooling: at {clock.time[k]:.4g} s the sample is at "
            f"{clock.temperature[k] - ZERO_CELSIUS:.1f} degC, above the observed melting "
            f"temperature of {observed - ZERO_CELSIUS:.1f} degC, after {fraction[k]:.2g} of it "
            "had crystallised; melting is not modelled: end the history before, or start it after"
        )


def _window(settings: Settings) -> str:
    growth = settings.material.growth
    low, high = growth.window()
    grid = np.linspace(low, high, 2001)[1:-1]
    rate = growth.rate(grid)
    quick = grid[rate > 1e-3 * rate.max()]
    return (
        f"{settings.material.title} grows between {low - ZERO_CELSIUS:.0f} and "
        f"{high - ZERO_CELSIUS:.0f} degC, in practice between {quick[0] - ZERO_CELSIUS:.0f} and "
        f"{quick[-1] - ZERO_CELSIUS:.0f} degC"
    )
