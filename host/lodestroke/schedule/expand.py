"""What a program does, tick by tick: a reference reading of its records on the host.

Written from the record layout alone, in plain Python integers, so that compiler and board can both
be held against it.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from lodeboard import program as board
from lodeboard.limits import FIELDS

from ..errors import ScheduleError
from .compile import Program

_TICKS_MAX = 20_000_000


@dataclass
class Expanded:
    """Targets at the end of each tick, and what happened when.

    a_ma, b_ma, step: shape (ticks,). The lists hold the tick (from 0) that a record acts before.
    """

    a_ma: np.ndarray
    b_ma: np.ndarray
    step: np.ndarray
    cycle_starts: list[int] = field(default_factory=list)
    cycle_ends: list[int] = field(default_factory=list)
    marks: list[tuple[int, int]] = field(default_factory=list)             # tick, mark
    # tick, limit field, value; field "" means that every limit is back to the rig's
    limits: list[tuple[int, str, int]] = field(default_factory=list)


def expand(program: Program) -> Expanded:
    """Run the records. Raises ScheduleError when too long to lay out, ValueError for nonsense."""
    if program.ticks > _TICKS_MAX:
        raise ScheduleError("too long to lay out tick by tick", at=program.title,
                            got=f"{program.ticks} ticks", bound=f"at most {_TICKS_MAX}",
                            try_="fewer passes")
    return _Reader(program).read()


class _Reader:
    def __init__(self, program: Program) -> None:
        self.rows = program.rows()
        self.out = Expanded(np.zeros(program.ticks, np.int32), np.zeros(program.ticks, np.int32),
                            np.zeros(program.ticks, np.int32))
        self.tick = 0
        self.now = (0, 0)
        self.cycle_open = False

    def read(self) -> Expanded:
        self._block(0)
        if self.tick != len(self.out.a_ma):
            raise ValueError(f"{self.tick} ticks in the records, {len(self.out.a_ma)} promised")
        return self.out

    def _block(self, at: int) -> int:
        """Run from `at` to the END or NEXT of this block; the place of that record."""
        while True:
            op, arg, step, a, b, n = self.rows[at]
            if op in (board.END, board.NEXT):
                if op == board.END:
                    self._close()
                return at
            if op == board.SEG:
                self._segment(step, a, b, n)
            elif op == board.LOOP:
                after = at
                for _ in range(n):
                    after = self._block(at + 1)
                at = after
            elif op == board.CYCLE:
                self._close()
                self.out.cycle_starts.append(self.tick)
                self.cycle_open = True
            elif op == board.CLOSE:
                self._close()
            elif op == board.MARK:
                self.out.marks.append((self.tick, n))
            elif op == board.LIMIT:
                self.out.limits.append((self.tick, FIELDS[arg], n))
            elif op == board.RELAX:
                self.out.limits.append((self.tick, "", 0))
            else:
                raise ValueError(f"record {at} has unknown op {op}")
            at += 1

    def _close(self) -> None:
        if self.cycle_open:
            self.out.cycle_ends.append(self.tick)
            self.cycle_open = False

    def _segment(self, step: int, a: int, b: int, n: int) -> None:
        k = np.arange(1, n + 1, dtype=np.int64)
        here = slice(self.tick, self.tick + n)
        self.out.a_ma[here] = self.now[0] + (a - self.now[0]) * k // n
        self.out.b_ma[here] = self.now[1] + (b - self.now[1]) * k // n
        self.out.step[here] = step
        self.tick += n
        self.now = (a, b)
