"""The whole pump: one right-hand side, and the fixed-step integrator of one control tick.

rhs() is plain: dy from y, parameters, modes and drive; anyone may integrate it with another solver,
with the modes held between the events of events.py. advance() does classical Runge-Kutta of
order four in equal substeps of a tick and judges the valves' modes after each substep.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from . import layout as k
from .coil import interpolate, resistance
from .events import forward, settle, worn
from .slug import air_spring, magnetic_pressure
from .valves import acceleration, flow, next_mode

_DIODE_A = 5e-3          # below this a free-wheeling diode no longer conducts


@njit(cache=True)
def bus_voltage(y: np.ndarray, p: np.ndarray, drive: np.ndarray) -> float:
    """Supply behind its source resistance, V, sagging under what both coils draw on average.

    Source: averaged bridge, a capacitor on the bus that carries the ripple; common practice.
    """
    if drive[2] == 0.0:
        return p[k.SUPPLY]
    drawn = abs(drive[0]) * abs(y[k.I_A]) + abs(drive[1]) * abs(y[k.I_B])
    return p[k.SUPPLY] - p[k.R_SOURCE] * drawn


@njit(cache=True)
def coil_voltage(duty: float, enable: float, i: float, bus: float, p: np.ndarray) -> float:
    """Average voltage across a coil over a PWM period, V; without enable it free-wheels.

    Half bridge: through the diode; full bridge: through two diodes back into the supply, whose drops
    are taken as one. Source: averaged bridge, common practice.
    """
    if enable == 0.0:
        if i == 0.0:
            return 0.0
        back = p[k.DIODE] + (p[k.SUPPLY] if p[k.FULL_BRIDGE] > 0.0 else 0.0)
        return -back if i > 0.0 else back
    return duty * bus


@njit(cache=True)
def slug_pressure(
    x: float, i_a: float, i_b: float, p: np.ndarray, table_a: np.ndarray, table_b: np.ndarray
) -> float:
    """Magnetic pressure across the slug, towards the chamber, Pa: front face less rear face."""
    front = x + p[k.FACE]
    rear = x - p[k.FACE]
    start = p[k.TABLE_FROM]
    step = p[k.TABLE_STEP]
    h_front = i_a * interpolate(table_a, start, step, front)
    h_rear = i_a * interpolate(table_a, start, step, rear)
    if p[k.COILS] > 1.0:
        h_front += i_b * interpolate(table_b, start, step, front)
        h_rear += i_b * interpolate(table_b, start, step, rear)
    return magnetic_pressure(h_front, p[k.M_S], p[k.CHI]) - magnetic_pressure(
        h_rear, p[k.M_S], p[k.CHI]
    )


@njit(cache=True)
def rhs(
    y: np.ndarray,
    p: np.ndarray,
    m: np.ndarray,
    drive: np.ndarray,
    table_a: np.ndarray,
    table_b: np.ndarray,
    dy: np.ndarray,
) -> None:
    """dy/dt into dy, shape (N_Y,). drive: duty a, duty b (-1 to 1), enable (0 or 1)."""
    bus = bus_voltage(y, p, drive)
    strokes = m[k.STROKES]
    for c in range(2):
        i = y[k.I_A + c]
        at = k.R20_A + c * (k.R20_B - k.R20_A)
        winding = y[k.TW_A + 2 * c]
        body = y[k.TB_A + 2 * c]
        ohm = resistance(p[at], p[at + 2], winding)
        dy[k.I_A + c] = (coil_voltage(drive[c], drive[2], i, bus, p) - ohm * i) / p[at + 1]
        across = (winding - body) / p[at + 3]
        dy[k.TW_A + 2 * c] = (ohm * i * i - across) / p[at + 4]
        dy[k.TB_A + 2 * c] = (across - (body - p[k.AMBIENT_C]) / p[at + 5]) / p[at + 6]
    x = y[k.X]
    q = y[k.Q]
    chamber = y[k.P_CH]
    outlet = y[k.P_OUT]
    # particles lost thin out saturation and susceptibility alike, and p_m goes with both
    push = slug_pressure(x, y[k.I_A], y[k.I_B], p, table_a, table_b) * worn(p[k.DRIFT_M_S], strokes)
    spring = air_spring(x, p[k.AREA], p[k.SPRING_V], p[k.AMBIENT_P], p[k.SPRING_N])
    stick = p[k.STICK] * np.tanh(q / k.STICK_FLOW)
    drag = p[k.SLUG_DRAG] * worn(p[k.DRIFT_DRAG], strokes)
    dy[k.X] = q / p[k.AREA]
    dy[k.Q] = (push + spring - chamber - drag * q - stick) / p[k.SLUG_INERTANCE]
    across_in = forward(0, y, p)
    across_out = forward(1, y, p)
    into = flow(m[k.MODE_IN], y[k.Q_IN], across_in, p[k.LEAK_IN])
    out = flow(m[k.MODE_OUT], y[k.Q_OUT], across_out, p[k.LEAK_OUT])
    load = (outlet - p[k.HEAD_OUT]) / p[k.R_OUT]
    dy[k.Q_IN] = acceleration(
        m[k.MODE_IN], y[k.Q_IN], across_in, p[k.CLOSE_IN], p[k.R_IN], p[k.L_IN]
    )
    dy[k.Q_OUT] = acceleration(
        m[k.MODE_OUT], y[k.Q_OUT], across_out, p[k.CLOSE_OUT], p[k.R_VO], p[k.L_VO]
    )
    dy[k.P_CH] = (q + into - out) / p[k.C_CH]
    dy[k.P_OUT] = (out - load) / p[k.C_OUT]
    dy[k.V_IN] = into
    dy[k.V_OUT] = out
    dy[k.V_LOAD] = load


@njit(cache=True)
def _clamp(y: np.ndarray, p: np.ndarray, drive: np.ndarray, before: np.ndarray) -> None:
    """What the right-hand side cannot say: end stops, and diodes that do not conduct backwards."""
    for stop in (p[k.X_MAX], -p[k.X_MAX]):
        over = y[k.X] - stop
        if over * stop > 0.0 and over != 0.0:
            y[k.P_CH] -= over * p[k.AREA] / p[k.C_CH]
            y[k.X] = stop
            if y[k.Q] * stop > 0.0:
                y[k.Q] = 0.0
    for c in range(2):
        i = y[k.I_A + c]
        if p[k.FULL_BRIDGE] == 0.0:
            if i < 0.0:
                y[k.I_A + c] = 0.0
        elif drive[2] == 0.0 and i * before[k.I_A + c] < 0.0:
            y[k.I_A + c] = 0.0
        if drive[2] == 0.0 and abs(y[k.I_A + c]) < _DIODE_A:
            y[k.I_A + c] = 0.0


@njit(cache=True)
def _judge_valves(y: np.ndarray, p: np.ndarray, m: np.ndarray, dt: float) -> None:
    """Modes after a substep, collapses counted, least margin kept."""
    crack_left = worn(p[k.DRIFT_CRACK], m[k.STROKES])
    collapse_left = worn(p[k.DRIFT_COLLAPSE], m[k.STROKES])
    for side in range(2):
        base = k.CRACK_IN + side * (k.CRACK_OUT - k.CRACK_IN)
        dp = p[k.HEAD_IN] - y[k.P_CH] if side == 0 else y[k.P_CH] - y[k.P_OUT]
        collapse = p[base + 5] * collapse_left
        m[k.SINCE_IN + side] += dt
        m[k.MIN_MARGIN] = min(m[k.MIN_MARGIN], collapse + dp)
        mode = m[k.MODE_IN + side]
        new = next_mode(
            mode, y[k.Q_IN + side], dp, m[k.SINCE_IN + side],
            p[base] * crack_left, p[base + 1], collapse, p[base + 6],
        )  # numbers first: settle() is right too, but a call with arrays costs more than this
        if new != mode or -dp > collapse:
            settle(side, y, p, m)


@njit(cache=True)
def _runge_kutta(
    y: np.ndarray,
    p: np.ndarray,
    m: np.ndarray,
    drive: np.ndarray,
    table_a: np.ndarray,
    table_b: np.ndarray,
    work: np.ndarray,
    dt: float,
) -> None:
    """One classical step of order four, in place; loops, because array expressions allocate."""
    k1, k2, k3, k4, at = work[0], work[1], work[2], work[3], work[4]
    rhs(y, p, m, drive, table_a, table_b, k1)
    for n in range(y.shape[0]):
        at[n] = y[n] + 0.5 * dt * k1[n]
    rhs(at, p, m, drive, table_a, table_b, k2)
    for n in range(y.shape[0]):
        at[n] = y[n] + 0.5 * dt * k2[n]
    rhs(at, p, m, drive, table_a, table_b, k3)
    for n in range(y.shape[0]):
        at[n] = y[n] + dt * k3[n]
    rhs(at, p, m, drive, table_a, table_b, k4)
    for n in range(y.shape[0]):
        y[n] += dt / 6.0 * (k1[n] + 2.0 * k2[n] + 2.0 * k3[n] + k4[n])


@njit(cache=True)
def advance(
    y: np.ndarray,
    p: np.ndarray,
    m: np.ndarray,
    drive: np.ndarray,
    table_a: np.ndarray,
    table_b: np.ndarray,
    work: np.ndarray,
    sensors: np.ndarray,
    lagged: np.ndarray,
) -> None:
    """One control tick. work: scratch of shape (6, N_Y); lagged: what each sensor's filter holds."""
    n = int(p[k.SUBSTEPS])
    dt = p[k.TICK_S] / n
    before = work[5]
    for _ in range(n):
        before[:] = y
        _runge_kutta(y, p, m, drive, table_a, table_b, work, dt)
        _clamp(y, p, drive, before)
        _judge_valves(y, p, m, dt)
        m[k.PEAK_CH] = max(m[k.PEAK_CH], y[k.P_CH])
        m[k.LOW_CH] = min(m[k.LOW_CH], y[k.P_CH])
        m[k.PEAK_OUT] = max(m[k.PEAK_OUT], y[k.P_OUT])
        bus = bus_voltage(y, p, drive)
        for channel in range(sensors.shape[0]):
            value = true_value(channel, y, p, bus)
            lagged[channel] += sensors[channel, k.S_LAG] * (value - lagged[channel])
    m[k.PEAK_C] = max(m[k.PEAK_C], y[k.TW_A], y[k.TW_B])
    on = 1.0 if drive[2] > 0.0 and abs(drive[0]) > 1e-3 else 0.0
    if on > m[k.WAS_ON]:
        m[k.STROKES] += 1.0
    m[k.WAS_ON] = on
    m[k.TIME] += p[k.TICK_S]
    m[k.TICKS] += 1.0


@njit(cache=True)
def true_value(channel: int, y: np.ndarray, p: np.ndarray, bus: float) -> float:
    """What a sensor channel looks at: Pa, A or V, in the order of lodeboard.limits.CHANNELS."""
    if channel == 0:
        return y[k.P_CH]
    if channel == 1:
        return y[k.P_OUT]
    if channel == 2:
        return y[k.I_A]
    if channel == 3:
        return y[k.I_B]
    if channel == 4:
        return bus
    return p[k.HEAD_IN]
