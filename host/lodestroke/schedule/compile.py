"""A schedule and a rig in, a program out: fixed-size integer records, rounded once, here.

Loops stay loops. Every cycle begins at a CYCLE record; the last of a step ends at CLOSE. Where a
current may be left over from a ramp or a hold, the next step of strokes or rest first takes it down
(within DOWN_S), outside any cycle.
"""

from __future__ import annotations

import binascii
import itertools
import math
import struct
from dataclasses import dataclass, field
from typing import Any

from lodeboard import program as board
from lodeboard.limits import FIELDS

from ..errors import ScheduleError
from ..rig.models import Rig
from .bounds import judge_program, judge_wave
from .limits import Tight, tighten
from .models import (
    HoldStep,
    MarkStep,
    NestedStep,
    RampStep,
    RestStep,
    Schedule,
    StepBase,
    WaveStep,
    walk,
)
from .shape import corners, cycles_of, resolve

DOWN_S = 0.01
Record = tuple[int, int, int, int, int, int]     # op, arg, step, a_ma, b_ma, n
StepPath = tuple[str | int, ...]


@dataclass(frozen=True)
class Program:
    """A compiled schedule, as the board gets it."""

    records: bytes               # RECORD_FORMAT each
    crc32: int
    steps: list[str]             # names by step index
    cycles: int
    ticks: int
    title: str = ""
    tick_s: float = 0.001
    places: list[str] = field(default_factory=list)    # where each step stands in its file

    def rows(self) -> list[Record]:
        """The records, unpacked."""
        return list(struct.iter_unpack(board.RECORD_FORMAT, self.records))


def compile_program(schedule: Schedule, rig: Rig, passes: int = 1) -> Program:
    """Compile `passes` passes of a schedule for a rig.

    Raises ScheduleError when a static bound refuses it: current, duty, heat, slew, length, memory.
    """
    compiler = _Compiler(schedule, rig)
    compiler.whole(passes)
    records = b"".join(struct.pack(board.RECORD_FORMAT, *row) for row in compiler.rows)
    program = Program(records, binascii.crc32(records), compiler.names, compiler.cycles,
                      compiler.ticks, schedule.title, rig.board.tick, compiler.places)
    judge_program(program, rig)
    return program


class _Compiler:
    def __init__(self, schedule: Schedule, rig: Rig) -> None:
        self.schedule = schedule
        self.rig = rig
        self.rows: list[Record] = []
        self.cycles = 0
        self.ticks = 0
        self.depth = 0
        self.times = 1               # how often what is being emitted will run
        self.hot = False             # a current may be left from what ran before
        self.marked = False          # a mark was put since the last segment
        self.tight: list[Tight] = []
        self.index: dict[StepPath, int] = {}
        self.names: list[str] = []
        self.places: list[str] = []
        self._number_steps()

    def _number_steps(self) -> None:
        """Depth-first numbers and readable names."""
        for path, step in walk(list(self.schedule.steps)):
            parent = self.index.get(path[:-2])
            own = step.name or f"step {path[-1] + 1}"  # type: ignore[operator]
            self.index[path] = len(self.names)
            self.names.append(own if parent is None else f"{self.names[parent]} / {own}")
            line = self.schedule.lines.get(path)
            where = self.schedule.source.name or "schedule"
            self.places.append(f"{where}, " + (f"line {line}, " if line else "")
                               + f"step '{self.names[-1]}'")
        if len(self.names) > board.MAX_STEP:
            raise ScheduleError("too many steps", at=self.schedule.source.name,
                                got=str(len(self.names)), bound=f"at most {board.MAX_STEP}",
                                try_="repeat steps with `times`")

    def whole(self, passes: int) -> None:
        """All passes, then END."""
        steps = list(self.schedule.steps)
        if not 1 <= passes <= board.MAX_TICKS:
            raise ScheduleError("number of passes is out of bounds", got=str(passes),
                                bound=f"1 to {board.MAX_TICKS}", try_="a shorter plan")
        self._repeat(passes, steps, ("steps",), 0)
        self._emit(board.END, 0)

    def _emit(
        self, op: int, step: int, *, arg: int = 0, a: int = 0, b: int = 0, n: int = 0
    ) -> None:
        self.rows.append((op, arg, step, a, b, n))
        if op == board.SEG:
            self.ticks += n * self.times
            self.marked = False

    def _ticks(self, seconds: float) -> int:
        return max(1, math.floor(seconds / self.rig.board.tick + 0.5))

    def _fail(self, step: int, what: str, got: str, bound: str, try_: str) -> ScheduleError:
        return ScheduleError(what, at=self.places[step], got=got, bound=bound, try_=try_)

    def _open(self, times: int, step: int) -> None:
        if times > 1:
            self.depth += 1
            if self.depth > board.MAX_DEPTH:
                raise self._fail(step, "loops are nested too deeply", f"{self.depth} levels",
                                 f"at most {board.MAX_DEPTH}, cycles and passes included",
                                 "flatten the steps")
            self._emit(board.LOOP, step, n=times)
            self.times *= times

    def _close(self, times: int, step: int) -> None:
        if times > 1:
            self._emit(board.NEXT, step)
            self.times //= times
            self.depth -= 1

    def _repeat(self, times: int, steps: list[Any], path: StepPath, step: int) -> None:
        """Steps, so many times over; a later turn starts from what the last one left."""
        if times > 1:
            self.hot = self.hot or leaves_current(
                self.schedule, steps, self.rig.board.tick)
            self.marked = self.marked or _ends_on_mark(steps)
        self._open(times, step)
        for i, inner in enumerate(steps):
            self._step((*path, i), inner)
        self._close(times, step)

    def _step(self, path: StepPath, step: StepBase) -> None:
        number = self.index[path]
        if step.limits is not None:
            self._tighten(number, step)
        if step.mark is not None:
            self._mark(number, step.mark)
        if isinstance(step, NestedStep):
            self._repeat(step.times, list(step.steps), (*path, "steps"), number)
        elif isinstance(step, WaveStep):
            self._wave(number, step)
        elif isinstance(step, RestStep):
            self._go(number, 0, 0, self._ticks(step.rest), DOWN_S if self.hot else 0.0)
        elif isinstance(step, RampStep):
            ramp = step.ramp
            self._go(number, _ma(ramp.to), _ma(ramp.to_b), self._ticks(ramp.over), ramp.over)
        elif isinstance(step, HoldStep):
            hold = step.hold
            self._go(number, _ma(hold.current), _ma(hold.current_b), self._ticks(hold.time),
                     hold.over)
        else:
            assert isinstance(step, MarkStep)
        if step.limits is not None:
            self._relax(number)

    def _mark(self, step: int, mark: int) -> None:
        """One mark fits a tick: a second one at the same moment waits for the next."""
        if self.marked and self.hot:
            raise self._fail(step, "two marks in one moment while a current may flow", f"mark {mark}",
                             "one mark a moment", "remove one, or put a rest between them")
        if self.marked:
            self._down(step, 1)
        self._emit(board.MARK, step, n=mark)
        self.marked = True

    def _down(self, step: int, ticks: int) -> None:
        self._emit(board.SEG, step, n=max(ticks, self._ticks(DOWN_S) if self.hot else 1))
        self.hot = False

    def _go(self, step: int, a: int, b: int, ticks: int, over_s: float) -> None:
        """To (a, b) within over_s, then hold, `ticks` in all."""
        over = min(ticks, self._ticks(over_s)) if over_s else 0
        if over:
            self._emit(board.SEG, step, a=a, b=b, n=over)
        if ticks > over:
            self._emit(board.SEG, step, a=a, b=b, n=ticks - over)
        self.hot = bool(a or b)

    def _wave(self, number: int, step: WaveStep) -> None:
        shape = resolve(self.schedule.waves[step.wave], step)
        judge_wave(shape, self.rig, self.places[number])
        times = cycles_of(step, shape)
        row = corners(shape, self.rig.board.tick)
        _, a, b = row[0]
        if self.hot:
            self._down(number, 1)
        if a or b:                              # a lagging coil is on when the cycle begins
            self._emit(board.SEG, number, a=a, b=b, n=self._ticks(DOWN_S))
        self._open(times, number)
        self._emit(board.CYCLE, number)
        for (start, _, _), (end, a_ma, b_ma) in itertools.pairwise(row):
            self._emit(board.SEG, number, a=a_ma, b=b_ma, n=end - start)
        self.cycles += self.times
        self._close(times, number)
        self._emit(board.CLOSE, number)
        self.hot = bool(a or b)

    def _tighten(self, number: int, step: StepBase) -> None:
        assert step.limits is not None
        outer = self.tight[-1] if self.tight else {}
        tight = tighten(step.limits, self.rig, outer, self.places[number])
        self.tight.append(tight)
        self._emit_limits(number, tight)

    def _relax(self, number: int) -> None:
        """Back to the rig's limits, or to those of the step around this one."""
        self.tight.pop()
        self._emit(board.RELAX, number)
        if self.tight:
            self._emit_limits(number, self.tight[-1])

    def _emit_limits(self, number: int, tight: Tight) -> None:
        for name, value in tight.items():
            self._emit(board.LIMIT, number, arg=FIELDS.index(name), n=value)


def _ma(amperes: float) -> int:
    return round(amperes * 1000)


def leaves_current(schedule: Schedule, steps: list[Any], tick_s: float) -> bool:
    """Whether current flows when these steps end; a mark changes nothing, a coil may lag."""
    for step in reversed(steps):
        if isinstance(step, NestedStep):
            return leaves_current(schedule, list(step.steps), tick_s)
        if isinstance(step, RampStep):
            return bool(_ma(step.ramp.to) or _ma(step.ramp.to_b))
        if isinstance(step, HoldStep):
            return bool(_ma(step.hold.current) or _ma(step.hold.current_b))
        if isinstance(step, WaveStep):
            _, a, b = corners(resolve(schedule.waves[step.wave], step), tick_s)[0]
            return bool(a or b)
        if isinstance(step, RestStep):
            return False
    return False


def _ends_on_mark(steps: list[Any]) -> bool:
    """Whether these steps end on a mark that no tick has followed."""
    last = steps[-1]
    if isinstance(last, NestedStep):
        return _ends_on_mark(list(last.steps))
    return isinstance(last, MarkStep)
