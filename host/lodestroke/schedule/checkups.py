"""The short measurements of an endurance test, as ordinary schedules: gentle, bounded, two seconds.

None holds a cycle, so that check-ups never enter the cycle count. Marks tell them apart in the log.
"""

from __future__ import annotations

from collections.abc import Callable

from ..errors import ScheduleError
from ..rig.models import Rig
from .compile import compile_program
from .models import Hold, HoldStep, NestedStep, Ramp, RampStep, RestStep, Schedule, Step

MARKS = {"cracking": 60001, "stroke_volume": 60002, "coil_resistance": 60003, "zero_flow": 60004}
STROKES = 3              # single strokes of a stroke-volume check-up
_SHARE = 0.4             # of full current, where nothing asks for less
_LEAST = 1.0 / 256


def checkup_schedule(item: str, rig: Rig) -> Schedule:
    """The schedule of one check-up item for a rig, at most 2 s.

    The current is 40 % of the rig's greatest, or as much of that (halved as often as needed) as the
    rig's static bounds allow. Raises ScheduleError for an unknown item, or when no current fits.
    """
    if item not in _ITEMS:
        raise ScheduleError("no such check-up", got=f'"{item}"', bound=", ".join(_ITEMS),
                            try_="name one of these in checkup.items")
    share = _SHARE
    while True:
        schedule = Schedule(title=f"Check-up: {item.replace('_', ' ')}",
                            steps=_ITEMS[item](share * rig.limits.current))
        try:
            compile_program(schedule, rig)
        except ScheduleError:
            if share < _LEAST:
                raise
            share /= 2
        else:
            return schedule


def _cracking(current: float) -> list[Step]:
    """Up and down slowly: the chamber's pressure shows where each valve opens and closes."""
    return [
        RampStep(name="up", mark=MARKS["cracking"], ramp=Ramp(to=current, over=0.85)),
        RampStep(name="down", ramp=Ramp(to=0.0, over=0.85)),
        RestStep(name="settle", rest=0.3),
    ]


def _stroke_volume(current: float) -> list[Step]:
    """Single strokes with rests long enough to settle."""
    return [NestedStep(name="strokes", mark=MARKS["stroke_volume"], times=STROKES, steps=[
        HoldStep(name="stroke", hold=Hold(current=current, time=0.22, over=0.02)),
        RestStep(name="settle", rest=0.44),
    ])]


def _coil_resistance(current: float) -> list[Step]:
    """A steady current, long against L/R and short against the winding's heat."""
    return [
        HoldStep(name="steady", mark=MARKS["coil_resistance"],
                 hold=Hold(current=0.75 * current, time=0.5, over=0.02)),
        RestStep(name="settle", rest=0.2),
    ]


def _zero_flow(_current: float) -> list[Step]:
    """Nothing driven: the sensors' zero, and what leaks."""
    return [RestStep(name="rest", mark=MARKS["zero_flow"], rest=1.0)]


_ITEMS: dict[str, Callable[[float], list[Step]]] = {
    "cracking": _cracking, "stroke_volume": _stroke_volume,
    "coil_resistance": _coil_resistance, "zero_flow": _zero_flow,
}
