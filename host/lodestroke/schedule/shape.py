"""A step's wave, resolved: its times, its currents, and its corners in whole ticks."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from ..rig.problems import Problem
from ..units import show
from .models import NestedStep, Schedule, StepBase, WaveStep, WaveValues

EDGE_S = 0.01            # rise and fall where none are given
_NAMES = ("current", "rise", "hold", "fall", "rest", "rate", "duty", "coil_b")
Corner = tuple[int, int, int]      # tick, coil a mA, coil b mA


@dataclass(frozen=True)
class Shape:
    """One cycle, seconds and amperes."""

    rise: float
    hold: float
    fall: float
    rest: float
    a: float
    b: float
    lag: float               # coil b comes later by this share of the period

    @property
    def period(self) -> float:
        return self.rise + self.hold + self.fall + self.rest

    def edges(self, tick_s: float) -> tuple[int, int, int, int]:
        """Ends of rise, hold, fall and rest in whole ticks; rounding does not add up."""
        ends = (self.rise, self.rise + self.hold, self.period - self.rest, self.period)
        up, top, down, end = (math.floor(t / tick_s + 0.5) for t in ends)
        return up, top, down, end


class ShapeError(ValueError):
    """A wave that cannot be; `key` says which value."""

    def __init__(self, key: str, what: str, bound: str, try_: str) -> None:
        super().__init__(what)
        self.key, self.what, self.bound, self.try_ = key, what, bound, try_


def merged(wave: WaveValues, step: WaveStep) -> WaveValues:
    """The wave with what the step sets anew."""
    values = {name: getattr(wave, name) for name in _NAMES}
    for name in _NAMES:
        if getattr(step, name) is not None:
            values[name] = getattr(step, name)
    return WaveValues.model_construct(**values)


def resolve(wave: WaveValues, step: WaveStep) -> Shape:
    """The shape of a step's cycles. Raises ShapeError when values are missing or contradict."""
    values = merged(wave, step)
    if values.current is None:
        raise ShapeError("current", "this wave has no current", "a current in the wave or the step",
                         'add current = "1 A"')
    b, lag = 0.0, 0.0
    if values.coil_b is not None:
        own = values.coil_b.current
        b, lag = values.current if own is None else own, values.coil_b.phase / 360.0
    rise, hold, fall, rest = _times(values)
    return Shape(rise, hold, fall, rest, values.current, b, lag)


def _times(values: WaveValues) -> tuple[float, float, float, float]:
    """Rise, hold, fall and rest in seconds."""
    by_rate = values.rate is not None or values.duty is not None
    by_time = values.hold is not None or values.rest is not None
    if by_rate and by_time:
        raise ShapeError("wave", "a wave has either hold and rest, or rate and duty", "one of both",
                         "remove one pair")
    rise = EDGE_S if values.rise is None else values.rise
    fall = EDGE_S if values.fall is None else values.fall
    if by_time:
        for name in ("hold", "rest"):
            if getattr(values, name) is None:
                raise ShapeError(name, f"this wave has no {name}", "hold and rest belong together",
                                 f'add {name} = "0 ms"')
        assert values.hold is not None
        assert values.rest is not None
        return rise, values.hold, fall, values.rest
    if values.rate is None or values.duty is None:
        name = "duty" if values.rate is not None else "rate"
        raise ShapeError(name, f"this wave has no {name}", "rate and duty, or hold and rest",
                         'add rate = "1 Hz" and duty = 0.4')
    period = 1.0 / values.rate
    hold, rest = period * values.duty - rise, period * (1.0 - values.duty) - fall
    if hold < -1e-12 or rest < -1e-12:
        raise ShapeError(
            "duty", "rise and fall do not fit into the period",
            f"rise at most {show(period * values.duty, 's')}, "
            f"fall at most {show(period * (1 - values.duty), 's')}",
            "shorten rise or fall, or lower the rate")
    return rise, max(0.0, hold), fall, max(0.0, rest)


def cycles_of(step: WaveStep, shape: Shape) -> int:
    """Whole cycles of a step; a duration is rounded to the nearest, at least one."""
    if step.cycles is not None:
        return step.cycles
    assert step.duration is not None
    return max(1, math.floor(step.duration / shape.period + 0.5 + 1e-9))   # half a cycle: up


def count_cycles(schedule: Schedule) -> int:
    """Cycles that one pass of a (valid) schedule makes."""
    return _count(schedule, list(schedule.steps))


def _count(schedule: Schedule, steps: list[StepBase]) -> int:
    total = 0
    for step in steps:
        if isinstance(step, NestedStep):
            total += step.times * _count(schedule, list(step.steps))
        elif isinstance(step, WaveStep):
            total += cycles_of(step, resolve(schedule.waves[step.wave], step))
    return total


def corners(shape: Shape, tick_s: float) -> list[Corner]:
    """The corners of both coils' cycle merged, first at tick 0, last at the period (equal values).

    Between corners both currents are straight, up to a mA of rounding where one coil's corner
    falls inside the other's edge.
    """
    edges = shape.edges(tick_s)
    end = edges[3]
    lag = math.floor(shape.lag * end + 0.5) % end if end else 0
    ticks = {0, end, *edges}
    if shape.b:
        ticks |= {(edge + lag) % end for edge in (0, *edges)}
    return [
        (t, round(1000 * shape.a * height(edges, t % end)),
         round(1000 * shape.b * height(edges, (t - lag) % end)))
        for t in sorted(ticks)
    ]


def height(edges: tuple[int, int, int, int], tick: int) -> float:
    """Share of full current at a tick of the cycle, 0 <= tick < period."""
    up, top, down, _ = edges
    if tick < up:
        return tick / up
    if tick <= top:
        return 1.0
    if tick < down:
        return (down - tick) / (down - top)
    return 0.0


def shape_problems(
    schedule_waves: dict[str, WaveValues], path: tuple[str | int, ...], step: WaveStep
) -> Iterator[Problem]:
    """What is wrong with a step's wave, without any rig."""
    if step.wave not in schedule_waves:
        known = ", ".join(f'"{name}"' for name in schedule_waves) or "none"
        yield Problem((*path, "wave"), "no such wave", f"known waves: {known}",
                      f"add [waves.{step.wave or 'name'}], or name another")
        return
    if (step.cycles is None) == (step.duration is None):
        yield Problem((*path, "cycles"), "a step of strokes has either cycles or a duration",
                      "one of both", "write cycles = 10")
        return
    try:
        shape = resolve(schedule_waves[step.wave], step)
    except ShapeError as err:
        own = getattr(step, err.key, None) is not None or err.key == "wave"
        there: tuple[str | int, ...] = (*path, err.key) if own else ("waves", step.wave, err.key)
        yield Problem(there, err.what, err.bound, err.try_)
        return
    if shape.period <= 0.0 or cycles_of(step, shape) > 500_000_000:
        yield Problem((*path, "duration"), "this step makes too many cycles",
                      "at most 500000000", "a shorter duration or a longer wave")
