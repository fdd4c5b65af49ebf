"""The same pump integrated by SciPy, stopped at each event, against the fixed-step integrator."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from system_values import bench

from lodestroke.plant import Params, Plant, events, rhs, settle
from lodestroke.plant import layout as k
from lodestroke.plant.events import NAMES

DUTY = 9800  # about 1.1 A
ON_TICKS, OFF_TICKS, CYCLES = 100, 150, 3
_HYDRAULIC = (k.X, k.Q, k.P_CH, k.P_OUT, k.Q_IN, k.Q_OUT)
_SCALES = np.ones(k.N_Y)
for _place, _scale in zip(_HYDRAULIC, (1e-3, 1e-5, 1e3, 1e3, 1e-5, 1e-5), strict=True):
    _SCALES[_place] = _scale
for _place in (k.V_IN, k.V_OUT, k.V_LOAD):
    _SCALES[_place] = 1e-8


class Located:
    """A pump whose events are found by SciPy's root finder instead of at ends of substeps."""

    def __init__(self, params: Params) -> None:
        plant = Plant(params)
        self.params, self.y, self.m = params, plant.y, plant.m
        self.found: list[str] = []

    def _rhs(self, _t: float, y: np.ndarray) -> np.ndarray:
        dy = np.zeros_like(y)
        rhs(y, self.params.p, self.m, self.drive, self.params.table_a, self.params.table_b, dy)
        return dy

    def _event(self, n: int):
        def crossing(_t: float, y: np.ndarray) -> float:
            out = np.zeros(len(NAMES))
            events(y, self.params.p, self.m, out)
            return out[n]

        crossing.terminal = True
        crossing.direction = 1.0
        return crossing

    def run(self, duty: float, duration_s: float) -> None:
        self.drive = np.array([duty, 0.0, 1.0])
        crossings = [self._event(n) for n in range(len(NAMES))]
        t = 0.0
        while t < duration_s:
            step = solve_ivp(self._rhs, (t, duration_s), self.y, method="LSODA", rtol=1e-8,
                             atol=1e-9 * _SCALES, events=crossings)
            assert step.status >= 0, step.message
            t = step.t[-1]
            self.y = step.y[:, -1].copy()
            if step.status == 1:
                (n,) = (n for n, at in enumerate(step.t_events) if len(at))
                self._meet(n)

    def _meet(self, n: int) -> None:
        self.found.append(NAMES[n])
        side = n // 4
        # a root finder stops within rounding of the crossing, on either side of it
        if NAMES[n].endswith("opens"):
            self.m[k.MODE_IN + side] = k.OPEN
            self.y[k.Q_IN + side] = 0.0
        elif NAMES[n].endswith("closes"):
            self.y[k.Q_IN + side] = 0.0
            settle(side, self.y, self.params.p, self.m)
            assert self.m[k.MODE_IN + side] == k.CLOSED
        else:
            pytest.fail(f"this gentle a pump should not meet {NAMES[n]}")


def test_pump_cycles_agree_with_a_solver_that_locates_every_event():
    located = Located(bench())
    for _ in range(CYCLES):
        located.run(DUTY / 32767.0, ON_TICKS * 1e-3)
        located.run(0.0, OFF_TICKS * 1e-3)
    errors = []
    for factor in (1, 8):
        params = bench()
        params.p[k.SUBSTEPS] *= factor
        plant = Plant(params)
        for tick in range(CYCLES * (ON_TICKS + OFF_TICKS)):
            plant.step(DUTY if tick % (ON_TICKS + OFF_TICKS) < ON_TICKS else 0, 0, 1)
        assert plant.y[k.P_OUT] == pytest.approx(located.y[k.P_OUT], rel=0.01)
        errors.append(abs(plant.y[k.V_OUT] / located.y[k.V_OUT] - 1.0))
    # first order in the substep, because valves are judged at its end
    assert errors[0] < 0.02
    assert errors[1] < 0.004
    assert located.y[k.V_OUT] > 2e-9
    assert {"outlet_opens", "outlet_closes", "inlet_opens", "inlet_closes"} <= set(located.found)
    for side in ("inlet", "outlet"):
        own = [name for name in located.found if name.startswith(side)]
        assert all(a != b for a, b in itertools.pairwise(own))


def test_events_name_a_collapse_and_both_stops():
    plant = Plant(bench())
    out = np.zeros(len(NAMES))
    y, p, m = plant.y, plant.params.p, plant.m
    y[k.P_CH] = y[k.P_OUT] - p[k.COLLAPSE_OUT] - 1.0
    y[k.X] = p[k.X_MAX] + 1e-6
    events(y, p, m, out)
    due = {name for name, number in zip(NAMES, out, strict=True) if number > 0.0}
    assert due == {"inlet_opens", "outlet_collapses", "slug_meets_front_stop"}
    settle(1, y, p, m)
    assert m[k.MODE_OUT] == k.COLLAPSED
    assert m[k.COLLAPSES_OUT] == 1
    y[k.X] = -y[k.X]
    y[k.P_CH] = y[k.P_OUT]
    events(y, p, m, out)
    due = {name for name, number in zip(NAMES, out, strict=True) if number > 0.0}
    assert due == {"outlet_settles", "slug_meets_rear_stop"}
