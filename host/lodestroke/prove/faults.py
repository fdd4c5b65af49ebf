"""Faults of wires, inputs and supply, applied in one place: between the plant and the board.

Nothing in the firmware knows of them. Ticks are those of the samples: tick 0 is the first that runs.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, Literal

import numpy as np
from annotated_types import Ge, Le

from lodeboard.limits import CHANNELS

from ..plant import layout as k
from ..plant.sensors import normal
from ..rig.toml_file import Table
from .trace import WIRES

if TYPE_CHECKING:
    from ..rig import Rig

Kind = Literal[
    "stuck",  # a sensor keeps the count that it had
    "open",  # its wire is open: full scale
    "shorted",  # its wire is shorted: zero
    "jump",  # its counts are off by `magnitude`
    "noise",  # noise of `magnitude` counts, standard deviation, on top of its own
    "exchanged",  # the cables of chamber and outlet are exchanged
    "stop_input",  # the stop input is pressed
    "cutout_open",  # the external cut-out opens (what the board sees of it; the coil stays wired)
    "host_silent",  # nothing from the host arrives
    "supply_sag",  # the supply loses `magnitude` percent
]
OF_A_SENSOR = ("stuck", "open", "shorted", "jump", "noise")
OF_A_SIZE = ("jump", "noise", "supply_sag")
PRESSURES = ("chamber", "outlet", "inlet")
TICK_MAX = 100_000_000


class Fault(Table):
    """One fault, from `start_tick` on for `length_ticks`.

    `channel` is a sensor's name where the kind is of a sensor, else empty; `magnitude` is in counts
    for jump (signed) and noise, in percent for supply_sag, else 0.
    """

    kind: Kind
    start_tick: Annotated[int, Ge(1), Le(TICK_MAX)]
    length_ticks: Annotated[int, Ge(1), Le(TICK_MAX)]
    channel: Literal["", "chamber", "outlet", "coil_a", "coil_b", "supply", "inlet"] = ""
    magnitude: Annotated[int, Ge(-65535), Le(65535)] = 0

    def active(self, tick: int) -> bool:
        """Whether it acts on what this tick reads."""
        return self.start_tick <= tick < self.start_tick + self.length_ticks

    def blinds_pressures(self) -> bool:
        """Whether a pressure may be far from what its sensor shows, and plausible all the same."""
        if self.kind == "exchanged":
            return True
        return self.kind in ("stuck", "jump", "noise") and self.channel in PRESSURES

    def blinds_current(self) -> bool:
        """Whether the coil's current may lastingly be above what its sensor shows."""
        return self.kind in ("jump", "noise") and self.channel in ("coil_a", "coil_b")


class Case(Table):
    """One try: which pump within the rig's tolerances, and what happens to it."""

    plant_seed: Annotated[int, Ge(0), Le(0xFFFFFFFF)] = 0
    faults: tuple[Fault, ...] = ()


class Faulty:
    """Stands between plant and Lockstep: passes on drive and counts, with the case's faults in them.

    It also keeps what the samples cannot say: per tick the drive as it came out of the board, the
    true current, the true least margin so far.
    """

    def __init__(self, case: Case, rig: Rig) -> None:
        self.case = case
        self.full = [getattr(getattr(rig.sensors, name), "counts_full", 0) for name in CHANNELS]
        self.tick = -1  # of the next counts; -1: not running yet
        self._held: dict[int, int] = {}
        self._rows: list[tuple[Any, ...]] = []

    def fit(self, engine: Any) -> None:
        """Take the place of the engine's plant at its Lockstep, and of the host's wire into it."""
        self.plant = engine.plant
        self.lockstep = engine.lockstep
        self.supply_v = float(self.plant.params.p[k.SUPPLY])
        self.counts = self.plant.counts
        self._pass_on = self.lockstep.host_write
        self.lockstep.plant = self
        self.lockstep.host_write = self.host_write

    @property
    def silent(self) -> bool:
        """Whether the host's bytes are being lost now."""
        return any(
            fault.kind == "host_silent" and fault.active(self.tick) for fault in self.case.faults
        )

    @property
    def cut(self) -> bool:
        """Whether the host's bytes have been lost at some time so far."""
        return any(f.kind == "host_silent" and f.start_tick <= self.tick for f in self.case.faults)

    def host_write(self, data: bytes) -> None:
        """The host's bytes, unless its cable is out."""
        if not self.silent:
            self._pass_on(data)

    def step(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        """One tick of the plant under this drive; `counts` are then what the board shall see."""
        plant = self.plant
        if self.tick < 0 and not enable:
            plant.step(duty_a_q15, duty_b_q15, enable)
            self.counts = plant.counts
            return
        seen = self.lockstep.inputs
        self.tick = max(self.tick, 0) + 1
        acting = [(n, f) for n, f in enumerate(self.case.faults) if f.active(self.tick)]
        sag = sum(f.magnitude for _, f in acting if f.kind == "supply_sag")
        plant.params.p[k.SUPPLY] = self.supply_v * max(0.0, 1.0 - sag / 100.0)
        plant.step(duty_a_q15, duty_b_q15, enable)
        y, m = plant.y, plant.m
        current_a = max(abs(y[k.I_A]), abs(y[k.I_B]))
        self._rows.append((self.tick - 1, duty_a_q15, enable, seen, current_a, m[k.MIN_MARGIN]))
        self.counts = self._read(plant.counts.copy(), acting)
        self.lockstep.inputs = any(f.kind == "stop_input" for _, f in acting) | (
            any(f.kind == "cutout_open" for _, f in acting) << 1
        )

    def _read(self, counts: Any, acting: list[tuple[int, Fault]]) -> Any:
        """Counts with the acting faults in them, in their order."""
        for n, fault in acting:
            if fault.kind == "exchanged":
                counts[[0, 1]] = counts[[1, 0]]
            if fault.kind not in OF_A_SENSOR:
                continue
            at = CHANNELS.index(fault.channel)
            count = int(counts[at])
            if fault.kind == "stuck":
                count = self._held.setdefault(n, count)
            elif fault.kind == "open":
                count = self.full[at]
            elif fault.kind == "shorted":
                count = 0
            elif fault.kind == "jump":
                count += fault.magnitude
            else:
                seed = np.uint64(self.case.plant_seed)
                count += round(fault.magnitude * normal(seed, 8 + n % 8, self.tick))
            counts[at] = min(max(count, 0), self.full[at])
        return counts

    def wires(self) -> np.ndarray:
        """What was kept, one row a tick from tick 0 on: dtype trace.WIRES."""
        return np.array(self._rows, dtype=WIRES)
