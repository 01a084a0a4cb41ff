"""The settings of a run: frozen, checked, in SI units.

How they are read from a file is `spheru.config`'s business.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from collections.abc import Mapping

    from spheru.material.record import MaterialRecord
    from spheru.nuclei.source import Source
    from spheru.thermal.history import History

__all__ = ["Edge", "Induction", "Sample", "Settings", "Sight", "View"]

View = Literal["section", "block", "film", "plane"]
Edge = Literal["periodic", "cut", "closed"]
Sight = Literal["mid", "face", "through"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Induction:
    """An induction time that must pass before any nucleus starts.

    The clock is additive: nothing starts before the integral of dt / t_i(T) reaches 1, with
    t_i = time * (undercooling / 1 K)^(-exponent).

    Attributes
    ----------
    time : float
        Induction time at an undercooling of 1 K [s], > 0.
    exponent : float
        How steeply it falls with undercooling [-], >= 0.
    """

    time: float
    exponent: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Sample:
    """What is looked at.

    Attributes
    ----------
    view : {"section", "block", "film", "plane"}
        A plane cut of a bulk sample, a volume, a film between two faces, or growth in a plane.
    size : tuple of float or None
        Edges of the window [m] in the axis order z, y, x (or y, x); None where it follows from
        `spherulites`. A film's z is its thickness.
    spherulites : int or None
        Number of spherulites wanted in the picture.
    pixel : float or None
        Edge of a pixel [m]; None where it follows from `pixels_across`.
    pixels_across : float or None
        Pixels across the mean spherulite.
    edges : tuple of {"periodic", "cut", "closed"}
        Per axis, in the order of the axes of the picture.
    thickness : float or None
        Thickness of a film or of a plane layer [m].
    sight : {"mid", "face", "through"}
        How the picture of a film is taken.
    """

    view: View
    size: tuple[float, ...] | None
    spherulites: int | None
    pixel: float | None
    pixels_across: float | None
    edges: tuple[Edge, ...]
    thickness: float | None = None
    sight: Sight = "mid"

    @property
    def dimension(self) -> int:
        """Number of axes of the label image that is grown, 2 or 3."""
        return 3 if self.view in ("block", "film") else 2

    @property
    def growth_dimension(self) -> Literal[2, 3]:
        """Number of directions in which the spherulites grow, 2 or 3."""
        return 2 if self.view == "plane" else 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """All that decides a run.

    Attributes
    ----------
    title : str
        What the run is called.
    seed : int
        Seed of the random numbers.
    material : MaterialRecord
        The record used, with overrides and pressure in it.
    history : History
        Temperature over time.
    sources : tuple of Source
        Where nuclei come from, the background first.
    sample : Sample
        What is looked at.
    induction : Induction or None
        Delay before anything starts.
    clustered : tuple of str
        Names of the sources whose particles stand in clusters.
    warnings : tuple of str
        What the reader of the file must be told.
    document : mapping
        The settings as they stood in the file, in their own units.
    attachments : mapping of str to bytes
        Files that the settings refer to, by the name that they have in the document.
    """

    title: str
    seed: int
    material: MaterialRecord
    history: History
    sources: tuple[Source, ...]
    sample: Sample
    induction: Induction | None = None
    clustered: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()
    document: Mapping[str, Any] = field(default_factory=dict)
    attachments: Mapping[str, bytes] = field(default_factory=dict)
