"""Schedules and plans as written. Attributes are the TOML keys; quantities are SI floats."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Any, Literal

from annotated_types import Ge, Gt, Le, Len, Lt
from pydantic import Discriminator, Field, Tag

from ..rig.models_board import Text
from ..rig.toml_file import Table
from ..units import Angle, Current, Frequency, Pressure, Ratio, Temperature, Time

_Amps = Annotated[Current, Ge(-30.0), Le(30.0)]
_Span = Annotated[Time, Gt(0.0), Le(600000.0)]
_SpanOrNone = Annotated[Time, Ge(0.0), Le(600000.0)]
_Count = Annotated[int, Ge(1), Le(500_000_000)]
_Mark = Annotated[int, Ge(0), Le(65535)]


class CoilB(Table):
    """What the second coil does during a wave: the same shape, own current, later by a phase."""

    current: _Amps | None = None
    phase: Annotated[Angle, Ge(0.0), Lt(360.0)] = 0.0


class WaveValues(Table):
    """A wave's values, all optional: a step may set some anew.

    Either rise, hold, fall and rest; or rate and duty (share of a period that is rise and hold).
    """

    current: _Amps | None = None
    rise: _SpanOrNone | None = None
    hold: _SpanOrNone | None = None
    fall: _SpanOrNone | None = None
    rest: _SpanOrNone | None = None
    rate: Annotated[Frequency, Gt(0.0), Le(1000.0)] | None = None
    duty: Annotated[Ratio, Gt(0.0), Lt(1.0)] | None = None
    coil_b: CoilB | None = None


class StepLimits(Table):
    """Limits tighter than the rig's while a step runs. These are hard levels, soft ones follow."""

    outlet_reverse: Annotated[Pressure, Gt(0.0)] | None = None
    inlet_reverse: Annotated[Pressure, Gt(0.0)] | None = None
    chamber_high: Annotated[Pressure, Gt(0.0)] | None = None
    chamber_low: Pressure | None = None
    outlet_high: Annotated[Pressure, Gt(0.0)] | None = None
    outlet_low: Pressure | None = None
    current: Annotated[Current, Gt(0.0)] | None = None
    coil_temperature: Temperature | None = None


class StepBase(Table):
    """What every step may have. A mark is journalled when the step begins."""

    name: Text = ""
    mark: _Mark | None = None
    limits: StepLimits | None = None


class WaveStep(StepBase, WaveValues):
    """Strokes: a wave, so many cycles or for so long (rounded to whole cycles)."""

    wave: Text
    cycles: _Count | None = None
    duration: _Span | None = None


class RestStep(StepBase):
    """No current."""

    rest: _Span


class Ramp(Table):
    """From the present current to another, linearly."""

    to: _Amps
    to_b: _Amps = 0.0
    over: _Span


class RampStep(StepBase):
    """A slow change of current."""

    ramp: Ramp


class Hold(Table):
    """A steady current for `time`, of which the first `over` goes to it linearly."""

    current: _Amps
    current_b: _Amps = 0.0
    time: _Span
    over: _Span = 0.01


class HoldStep(StepBase):
    """A steady current."""

    hold: Hold


class MarkStep(StepBase):
    """Only a mark in the journal."""

    mark: _Mark


class NestedStep(StepBase):
    """Steps within a step, `times` over."""

    steps: Annotated[list[Step], Len(1, 250)]
    times: _Count = 1


def step_kind(value: Any) -> str:
    """Which step a table means, by the keys that it holds. Tags must not look like keys."""
    if isinstance(value, StepBase):
        return {NestedStep: "<steps>", RampStep: "<ramp>", HoldStep: "<hold>", RestStep: "<rest>",
                MarkStep: "<mark>"}.get(type(value), "<wave>")
    if not isinstance(value, dict):
        return "<wave>"
    if "steps" in value:
        return "<steps>"
    if "wave" in value or "cycles" in value or "duration" in value:
        return "<wave>"
    for kind in ("ramp", "hold", "rest"):
        if kind in value:
            return f"<{kind}>"
    only_mark = "mark" in value and not set(value) - {"mark", "name", "limits"}
    return "<mark>" if only_mark else "<wave>"


Step = Annotated[
    Annotated[WaveStep, Tag("<wave>")] | Annotated[RestStep, Tag("<rest>")]
    | Annotated[RampStep, Tag("<ramp>")] | Annotated[HoldStep, Tag("<hold>")]
    | Annotated[MarkStep, Tag("<mark>")] | Annotated[NestedStep, Tag("<steps>")],
    Discriminator(step_kind),
]
NestedStep.model_rebuild()


class Schedule(Table):
    """What the coils shall do over time."""

    title: Text = ""
    waves: dict[str, WaveValues] = Field(default_factory=dict)
    steps: Annotated[list[Step], Len(1, 250)]
    source: Annotated[Path, Field(exclude=True)] = Path()
    lines: dict[tuple[str | int, ...], int] = Field(default_factory=dict, exclude=True)

    @property
    def cycles_per_pass(self) -> int:
        """Cycles that one pass of the schedule makes."""
        from .shape import count_cycles

        return count_cycles(self)


class Checkups(Table):
    """The short measurements that an endurance test stops for."""

    every_cycles: _Count
    items: Annotated[
        list[Literal["cracking", "stroke_volume", "coil_resistance", "zero_flow"]], Len(1, 8)]


class StopRules(Table):
    """When to give up. Changes are relative to the first check-up; 0 = not watched."""

    trips: Annotated[int, Ge(1), Le(1000)] = 1
    resistance_change: Annotated[Ratio, Ge(0.0), Le(10.0)] = 0.0
    cracking_change: Annotated[Ratio, Ge(0.0), Le(10.0)] = 0.0
    stroke_change: Annotated[Ratio, Ge(0.0), Le(10.0)] = 0.0
    gaps: Annotated[int, Ge(0), Le(1000)] = 0


class Plan(Table):
    """An endurance test. `schedule` is the path as resolved from the plan's folder."""

    title: Text = ""
    schedule: Path
    target_cycles: _Count
    checkup: Checkups | None = None
    stop: StopRules = StopRules()
    cycles_per_pass: Annotated[int, Field(exclude=True)] = 1
    source: Annotated[Path, Field(exclude=True)] = Path()


def walk(steps: list[Any], path: tuple[str | int, ...] = ("steps",)) -> Iterator[
    tuple[tuple[str | int, ...], StepBase]
]:
    """Every step, outermost first, with its key path."""
    for i, step in enumerate(steps):
        here = (*path, i)
        yield here, step
        if isinstance(step, NestedStep):
            yield from walk(step.steps, (*here, "steps"))
