"""The table ``[cooling]`` becomes a thermal history: steps one after another, or a trace."""

from __future__ import annotations

from typing import TYPE_CHECKING

from spheru.config.faults import Collecting
from spheru.config.models import HoldStep, QuenchStep, RampStep
from spheru.errors import Fault
from spheru.files import read_table
from spheru.thermal.history import History, Hold, Quench, Ramp
from spheru.units import format_si

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from spheru.config import models
    from spheru.thermal.history import Segment

__all__ = ["build_history"]


def build_history(table: models.Cooling, *, folder: Path, faults: list[Fault]) -> History | None:
    """Build the thermal history that a table describes.

    Parameters
    ----------
    table : Cooling
        A start and steps, or the name of a trace. A step that could not be read is None.
    folder : Path
        From where the path of the trace counts.
    faults : list of Fault
        Where faults are added.

    Returns
    -------
    history : History or None
        None where there was a fault.
    """
    before = len(faults)
    for key in ("start", "steps"):
        if (getattr(table, key) is None) == (table.trace is None):
            what = "is missing; expected start and steps, or a trace"
            if table.trace is not None:
                what = "stands beside trace; leave one of them out"
            faults.append(Fault(where=f"cooling.{key}", what=what))
    if len(faults) > before:
        return None
    with Collecting(faults, "cooling.trace" if table.trace else "cooling.steps"):
        if table.trace is not None:
            columns = read_table(folder / table.trace, {"time": "s", "temperature": "K"})
            return History.from_trace(columns["time"], columns["temperature"])
        steps: Sequence[models.Step | None] = table.steps or ()
        segments = _segments(steps, table.start or 0.0, faults)
        whole = len(faults) == before and None not in steps
        return History(segments=tuple(segments)) if whole else None
    return None


def _segments(
    steps: Sequence[models.Step | None], start: float, faults: list[Fault]
) -> list[Segment]:
    """Follow the steps; after one at fault go on from where it should have led, if known."""
    now: float | None = start
    segments = []
    for k, step in enumerate(steps):
        where = f"cooling.steps[{k}]"
        aim = step.until if isinstance(step, RampStep) else None
        segment = None
        if isinstance(step, RampStep) and (fault := _ramp_fault(step, now)) is not None:
            faults.append(Fault(where=f"{where}{fault[0]}", what=fault[1]))
        elif step is not None and now is not None:
            with Collecting(faults, f"{where}.for" if isinstance(step, RampStep) else where):
                segment = _segment(step, now)
        if segment is not None:
            segments.append(segment)
        now = aim if segment is None else segment.end
    return segments


def _segment(step: models.Step, now: float) -> Segment:
    if isinstance(step, HoldStep):
        return Hold(temperature=now, duration=step.hold)
    if isinstance(step, QuenchStep):
        return Quench(
            start=now, target=step.quench, time_constant=step.time_constant, duration=step.for_
        )
    if step.until is None:
        return Ramp.lasting(start=now, rate=step.rate, duration=step.for_ or 0.0)
    return Ramp.until(start=now, end=step.until, rate=step.rate)


def _ramp_fault(step: models.RampStep, now: float | None) -> tuple[str, str] | None:
    if step.rate == 0:
        return ".rate", 'expected a rate other than 0; to wait write { hold = "5 min" }'
    if (step.until is None) == (step.for_ is None):
        ends = ", not both" if step.until is not None else ""
        return "", f'expected until = "40 degC" or for = "5 min" beside rate{ends}'
    if step.until is None or now is None or (now - step.until) * step.rate > 0:
        return None
    reached, aim = format_si(now, "degC"), format_si(step.until, "degC")
    if now == step.until:
        return ".until", f"{aim} is reached already; leave the step out, or hold"
    side, sign, act = (
        ("above", "negative", "heat") if step.until > now else ("below", "positive", "cool")
    )
    return ".until", f"{aim} lies {side} the {reached} reached before; write a {sign} rate to {act}"
