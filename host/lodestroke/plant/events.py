"""Where the right-hand side changes its form, as functions that cross zero upwards.

For anyone who integrates rhs() with another solver: stop where one of these crosses, take the new
modes from settle(), go on. advance() judges the same things at the end of each substep instead.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from . import layout as k
from .valves import next_mode

NAMES = (
    "inlet_opens", "inlet_closes", "inlet_collapses", "inlet_settles",
    "outlet_opens", "outlet_closes", "outlet_collapses", "outlet_settles",
    "slug_meets_front_stop", "slug_meets_rear_stop",
)
_NEVER = -1.0


@njit(cache=True)
def worn(rate: float, strokes: float) -> float:
    """What is left of a quantity that drifts by `rate` of its first value a stroke; never negative."""
    return max(1.0 + rate * strokes, 0.0)


@njit(cache=True)
def forward(side: int, y: np.ndarray, p: np.ndarray) -> float:
    """Pressure across a valve in its forward direction, Pa. side: 0 inlet, 1 outlet."""
    if side == 0:
        return p[k.HEAD_IN] - y[k.P_CH]
    return y[k.P_CH] - y[k.P_OUT]


@njit(cache=True)
def thresholds(side: int, p: np.ndarray, strokes: float) -> tuple[float, float, float]:
    """Cracking, closing and collapse pressure of a side after so many strokes, Pa."""
    base = k.CRACK_IN + side * (k.CRACK_OUT - k.CRACK_IN)
    return (
        p[base] * worn(p[k.DRIFT_CRACK], strokes),
        p[base + 1],
        p[base + 5] * worn(p[k.DRIFT_COLLAPSE], strokes),
    )


@njit(cache=True)
def events(y: np.ndarray, p: np.ndarray, m: np.ndarray, out: np.ndarray) -> None:
    """Values of all NAMES into out, shape (10,); -1 where an event cannot come in this mode."""
    for side in range(2):
        dp = forward(side, y, p)
        cracking, closing, collapse = thresholds(side, p, m[k.STROKES])
        mode = m[k.MODE_IN + side]
        at = 4 * side
        out[at] = dp - cracking if mode == k.CLOSED else _NEVER
        out[at + 1] = -y[k.Q_IN + side] if mode == k.OPEN and dp < cracking else _NEVER
        out[at + 2] = -dp - collapse if mode != k.COLLAPSED else _NEVER
        out[at + 3] = closing - abs(dp) if mode == k.COLLAPSED else _NEVER
    out[8] = y[k.X] - p[k.X_MAX]
    out[9] = -y[k.X] - p[k.X_MAX]


@njit(cache=True)
def settle(side: int, y: np.ndarray, p: np.ndarray, m: np.ndarray) -> None:
    """Let a valve take the mode that its state asks for; a new mode starts without flow.

    m: SINCE must count the seconds since the last collapse.
    """
    dp = forward(side, y, p)
    cracking, closing, collapse = thresholds(side, p, m[k.STROKES])
    mode = m[k.MODE_IN + side]
    reform = p[k.REFORM_IN + side * (k.CRACK_OUT - k.CRACK_IN)]
    new = next_mode(
        mode, y[k.Q_IN + side], dp, m[k.SINCE_IN + side], cracking, closing, collapse, reform
    )
    if new == k.COLLAPSED and -dp > collapse:
        m[k.SINCE_IN + side] = 0.0
        if mode != k.COLLAPSED:
            m[k.COLLAPSES_IN + side] += 1.0
    if new != mode:
        m[k.MODE_IN + side] = new
        y[k.Q_IN + side] = 0.0
