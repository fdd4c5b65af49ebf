"""How hot a program makes a coil: two nodes, winding and body, solved exactly segment by segment.

Cw dTw/dt = P - (Tw - Tb)/Rwb,  Cb dTb/dt = (Tw - Tb)/Rwb - (Tb - Ta)/Rba   (lumped network)
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from lodeboard import program as board

from ..rig.models_pump import Coil

_PIECES = 16              # a long segment is looked at in so many places
_LONG_S = 1.0
Row = tuple[int, int, int, int, int, int]


@dataclass
class TwoNode:
    """Winding and body above ambient, in kelvin, under a power in W."""

    coil: Coil
    rates: np.ndarray = field(init=False)
    modes: np.ndarray = field(init=False)
    back: np.ndarray = field(init=False)

    def __post_init__(self) -> None:
        c = self.coil
        wb = 1.0 / (c.winding_to_body * c.winding_heat)
        bw = 1.0 / (c.winding_to_body * c.body_heat)
        ba = 1.0 / (c.body_to_air * c.body_heat)
        self.rates, self.modes = np.linalg.eig(np.array([[-wb, wb], [bw, -bw - ba]]))
        self.back = np.linalg.inv(self.modes)

    def steady(self, power_w: float) -> np.ndarray:
        """[winding, body] above ambient after a long time."""
        c = self.coil
        return power_w * np.array([c.winding_to_body + c.body_to_air, c.body_to_air])

    def time_constants(self) -> tuple[float, float]:
        """Fast and slow, in seconds."""
        fast, slow = sorted(-1.0 / self.rates)
        return float(fast), float(slow)

    def step(self, seconds: float, power_w: float) -> np.ndarray:
        """The 3x3 matrix that takes (winding, body, 1) over a time of constant power."""
        decay = (self.modes * np.exp(self.rates * seconds)) @ self.back
        matrix = np.eye(3)
        matrix[:2, :2] = decay
        matrix[:2, 2] = (np.eye(2) - decay) @ self.steady(power_w)
        return matrix


def hot_resistance(coil: Coil, degc: float) -> float:
    """Winding resistance in ohm: R20 (1 + alpha (T - 20 degC)); copper's alpha is IEC 60028's."""
    return coil.resistance * (1.0 + coil.temperature_coefficient * (degc - 20.0))


def steady_winding_c(coil: Coil, mean_square_a2: float, ambient_c: float) -> float:
    """Steady winding temperature under a mean-square current; infinite beyond thermal runaway.

    T = (Ta + Rth I² R20 (1 - 20 alpha)) / (1 - Rth I² R20 alpha), from P = I² R(T) = (T - Ta)/Rth.
    """
    rth = coil.winding_to_body + coil.body_to_air
    alpha = coil.temperature_coefficient
    gain = rth * mean_square_a2 * coil.resistance
    if gain * alpha >= 1.0:
        return math.inf
    return (ambient_c + gain * (1.0 - 20.0 * alpha)) / (1.0 - gain * alpha)


class HeatBound:
    """Walks a program's records and keeps the hottest winding and where it was.

    Conservative: resistance is taken at `limit_c` throughout, so the bound holds as long as it is
    below that. A loop is followed through its first and last turn, and looked at between them.
    """

    def __init__(
        self, rows: Sequence[Row], tick_s: float, coil: Coil, second: bool, limit_c: float
    ) -> None:
        self.rows = rows
        self.tick_s = tick_s
        self.node = TwoNode(coil)
        self.ohm = hot_resistance(coil, limit_c)
        self.peak_k = 0.0
        self.peak_step = 0
        self.state = np.array([0.0, 0.0, 1.0])
        self.starts = self._starting_currents(4 if second else 3)
        self.ends = [row[4 if second else 3] for row in rows]
        self.partner = _matching_next(rows)
        self.cache: dict[int, np.ndarray] = {}

    def run(self, state: np.ndarray | None = None) -> float:
        """Peak winding temperature above ambient, in kelvin, starting cold unless told."""
        if state is not None:
            self.state = state
        self._range(0, len(self.rows))
        return self.peak_k

    def _starting_currents(self, column: int) -> list[int]:
        """The current that each record starts from, in record order."""
        starts, now = [], 0
        for row in self.rows:
            starts.append(now)
            if row[0] == board.SEG:
                now = row[column]
        return starts

    def _see(self, step: int) -> None:
        if self.state[0] > self.peak_k:
            self.peak_k, self.peak_step = float(self.state[0]), step

    def _range(self, first: int, last: int) -> None:
        at = first
        while at < last:
            op = self.rows[at][0]
            if op == board.SEG:
                for matrix in self._pieces(at):
                    self.state = matrix @ self.state
                    self._see(self.rows[at][2])
            elif op == board.LOOP:
                self._loop(at)
                at = self.partner[at]
            at += 1

    def _loop(self, at: int) -> None:
        turns, end = self.rows[at][5], self.partner[at]
        self._range(at + 1, end)
        if turns > 2:
            matrix = self._matrix(at + 1, end)
            self._leap(matrix, turns - 2, self.rows[at][2])
        if turns > 1:
            self._range(at + 1, end)

    def _leap(self, matrix: np.ndarray, turns: int, step: int) -> None:
        """`turns` turns by doubling, looking at the winding after each power of two."""
        while turns:
            if turns & 1:
                self.state = matrix @ self.state
                self._see(step)
            matrix = matrix @ matrix
            turns >>= 1

    def _matrix(self, first: int, last: int) -> np.ndarray:
        """The matrix of a range of records, once through."""
        if first in self.cache:
            return self.cache[first]
        total, at = np.eye(3), first
        while at < last:
            op = self.rows[at][0]
            if op == board.SEG:
                for matrix in self._pieces(at):
                    total = matrix @ total
            elif op == board.LOOP:
                inner = self._matrix(at + 1, self.partner[at])
                total = np.linalg.matrix_power(inner, self.rows[at][5]) @ total
                at = self.partner[at]
            at += 1
        self.cache[first] = total
        return total

    def _pieces(self, at: int) -> list[np.ndarray]:
        """A segment's matrices; the power is that of the mean square current of each piece."""
        seconds = self.rows[at][5] * self.tick_s
        pieces = _PIECES if seconds > _LONG_S else 1
        start, end = self.starts[at] / 1000, self.ends[at] / 1000
        found = []
        for k in range(pieces):
            i0 = start + (end - start) * k / pieces
            i1 = start + (end - start) * (k + 1) / pieces
            power_w = self.ohm * (i0 * i0 + i0 * i1 + i1 * i1) / 3
            found.append(self.node.step(seconds / pieces, power_w))
        return found


def _matching_next(rows: Sequence[Row]) -> dict[int, int]:
    """LOOP record -> its NEXT record."""
    found: dict[int, int] = {}
    open_loops: list[int] = []
    for at, row in enumerate(rows):
        if row[0] == board.LOOP:
            open_loops.append(at)
        elif row[0] == board.NEXT:
            found[open_loops.pop()] = at
    return found
