"""The simulated pump behind a board: a tick of drive in, raw counts out."""

from __future__ import annotations

import threading
from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from . import layout as k
from .build import Params, params_from_rig
from .sensors import count
from .system import advance

if TYPE_CHECKING:
    from ..rig import Rig

_FULL_DUTY = 32767.0
_PATIENCE_S = 0.7  # a warm cache is loaded in less


class Plant:
    """One pump. step() advances one control tick; `counts` then holds what its sensors read.

    The seed decides the sensors' noise; from_rig() draws the rig's tolerances from it as well, so
    that twenty seeds are twenty slightly different pumps. Same seed, same numbers, to the last bit.
    """

    def __init__(self, params: Params, seed: int = 0) -> None:
        self.params = params
        self.seed = np.uint64(seed & 0xFFFFFFFFFFFFFFFF)
        p = params.p
        self.y = np.zeros(k.N_Y)
        self.y[k.TW_A : k.TB_B + 1] = p[k.AMBIENT_C]
        self.y[k.P_OUT] = p[k.HEAD_OUT]
        self.m = np.zeros(k.N_M)
        self.m[k.MIN_MARGIN] = np.inf
        self.m[k.PEAK_CH] = self.m[k.PEAK_OUT] = -np.inf
        self.m[k.LOW_CH] = np.inf
        self.m[k.PEAK_C] = p[k.AMBIENT_C]
        self.counts = np.zeros(len(params.sensors), dtype=np.int64)
        self.lagged = np.array([0.0, p[k.HEAD_OUT], 0.0, 0.0, p[k.SUPPLY], p[k.HEAD_IN]])
        self.drive = np.zeros(3)
        self.work = np.zeros((6, k.N_Y))
        count(params.sensors, self.lagged, self.seed, 0, self.counts)

    @classmethod
    def from_rig(cls, rig: Rig, seed: int = 0) -> Plant:
        """A pump within the rig's tolerances, drawn from the seed; seed 0 is the nominal one."""
        return cls(params_from_rig(rig, seed if seed else None), seed)

    def step(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        """Advance one control tick under this drive."""
        self.drive[0] = duty_a_q15 / _FULL_DUTY
        self.drive[1] = duty_b_q15 / _FULL_DUTY
        self.drive[2] = 1.0 if enable else 0.0
        params = self.params
        advance(
            self.y,
            params.p,
            self.m,
            self.drive,
            params.table_a,
            params.table_b,
            self.work,
            params.sensors,
            self.lagged,
        )
        count(params.sensors, self.lagged, self.seed, int(self.m[k.TICKS]), self.counts)

    def advance_off(self, seconds: float) -> None:
        """Let time pass with the driver off (a power cut), at most an hour of it."""
        for _ in range(int(min(seconds, 3600.0) / self.params.p[k.TICK_S])):
            self.step(0, 0, 0)

    def truth(self) -> dict[str, float]:
        """What is really so, SI, whatever the sensors say; tallies since the start."""
        y, m = self.y, self.m
        return {
            "time_s": float(m[k.TIME]),
            "delivered_m3": float(y[k.V_OUT]),
            "drawn_m3": float(y[k.V_IN]),
            "load_m3": float(y[k.V_LOAD]),
            "chamber_pa": float(y[k.P_CH]),
            "outlet_pa": float(y[k.P_OUT]),
            "slug_m": float(y[k.X]),
            "coil_a": float(y[k.I_A]),
            "coil_c": float(y[k.TW_A]),
            "peak_coil_c": float(m[k.PEAK_C]),
            "peak_chamber_pa": float(m[k.PEAK_CH]),
            "low_chamber_pa": float(m[k.LOW_CH]),
            "peak_outlet_pa": float(m[k.PEAK_OUT]),
            "min_margin_pa": float(m[k.MIN_MARGIN]),
            "collapses_inlet": float(m[k.COLLAPSES_IN]),
            "collapses_outlet": float(m[k.COLLAPSES_OUT]),
        }


def warm_up(rig: Rig, say: Callable[[str], None] | None = None) -> None:
    """Compile the plant, or load it from the cache; `say` hears once when that takes its time."""
    timer = None
    if say is not None:
        text = "compiling the simulated pump; kept for later runs ..."
        timer = threading.Timer(_PATIENCE_S, say, (text,))
        timer.daemon = True
        timer.start()
    try:
        Plant(params_from_rig(rig)).step(0, 0, 0)
    finally:
        if timer is not None:
            timer.cancel()
