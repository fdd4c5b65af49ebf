"""Liquid check valves: closed below cracking, open above, blown out past collapse.

Open, a valve costs its closing pressure plus resistance times flow, and its liquid has inertance; it
closes when forward flow has ended. Closed, it leaks backwards through `leak`. Past collapse in
reverse the plug is gone: a plain passage, until `reform` has passed with little pressure across.
Valves in series on one side are lumped: pressures, resistances and inertances add, but the first to
collapse is the one with the greatest share of the reverse pressure for its strength: series_collapse.
Source: lumped-element hydraulics; threshold and hysteresis as measured at a valve, common practice.
"""

from __future__ import annotations

from collections.abc import Sequence

from numba import njit

from .layout import CLOSED, COLLAPSED, OPEN


@njit(cache=True)
def flow(mode: float, q: float, dp: float, leak: float) -> float:
    """Forward flow in m3/s at forward pressure difference dp in Pa."""
    if mode == CLOSED:
        return dp / leak
    return q


@njit(cache=True)
def acceleration(
    mode: float, q: float, dp: float, closing: float, resistance: float, inertance: float
) -> float:
    """dq/dt in m3/s2 of a conducting valve; 0 when closed."""
    if mode == CLOSED:
        return 0.0
    if mode == OPEN:
        return (dp - closing - resistance * q) / inertance
    return (dp - resistance * q) / inertance


@njit(cache=True)
def next_mode(
    mode: float,
    q: float,
    dp: float,
    since_s: float,
    cracking: float,
    closing: float,
    collapse: float,
    reform_s: float,
) -> float:
    """The mode after a step in which dp was reached; since_s counts from the collapse."""
    if -dp > collapse:
        return COLLAPSED
    if mode == CLOSED and dp > cracking:
        return OPEN
    if mode == OPEN and q <= 0.0 and dp < cracking:
        return CLOSED
    if mode == COLLAPSED and since_s >= reform_s and abs(dp) < closing:
        return CLOSED
    return mode


def series_collapse(collapse_pa: Sequence[float], leak_pa_s_per_m3: Sequence[float]) -> float:
    """Reverse pressure over closed valves in series at which the first of them collapses, Pa.

    One reverse leak flows through all, so that each takes a share of the pressure that goes with its
    leak's resistance. Source: resistances in series.
    """
    whole = sum(leak_pa_s_per_m3)
    return min(
        collapse * whole / leak
        for collapse, leak in zip(collapse_pa, leak_pa_s_per_m3, strict=True)
    )
