"""Flow, margins and drift from the cycles on record. Arrays in cycle order; SI unless named."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from .uncertainty import combine, line

if TYPE_CHECKING:
    from ..rig import Rig

K = 2.0  # coverage factor of the margins


def column(rows: list[dict[str, Any]], name: str) -> np.ndarray:
    """One column of logbook rows as floats, shape (cycles,)."""
    return np.array([row[name] for row in rows], dtype=float)


def flow_ul_per_min(rows: list[dict[str, Any]], rig: Rig) -> tuple[np.ndarray, float]:
    """Mean flow to the load in each cycle and its standard uncertainty.

    Flow = (mean outlet pressure - head)/restriction; the restriction is taken as exact.
    """
    per_pa = 60e9 / rig.outlet.restriction
    flow = (column(rows, "outlet_mean_pa") - rig.outlet.head) * per_pa
    return flow, rig.sensors.outlet.uncertainty * per_pa


def seconds(rows: list[dict[str, Any]], rig: Rig) -> np.ndarray:
    """End of each cycle in pumping time, counted over all segments of a run."""
    return np.cumsum(column(rows, "duration_ticks")) * rig.board.tick


def margins_pa(rows: list[dict[str, Any]], rig: Rig) -> dict[str, np.ndarray]:
    """Per valve and cycle: collapse less the worst measured reverse pressure, less k u of the sensors."""
    u_outlet = combine(rig.sensors.outlet.uncertainty, rig.sensors.chamber.uncertainty)
    u_inlet = rig.sensors.chamber.uncertainty
    collapse = {
        side: sum(valve.collapse for valve in getattr(rig.valves, side))
        for side in ("inlet", "outlet")
    }
    return {
        "outlet": collapse["outlet"] - column(rows, "outlet_reverse_max_pa") - K * u_outlet,
        "inlet": collapse["inlet"] - column(rows, "inlet_reverse_max_pa") - K * u_inlet,
    }


def trend(cycle: np.ndarray, values: np.ndarray) -> dict[str, float] | None:
    """Change per thousand cycles with its 95 % half-width; None for fewer than eight cycles."""
    if len(cycle) < 8:
        return None
    fit = line(cycle, values)
    # normal quantile: cycles are many; Student's factor matters for a handful only
    return {"per_1000": 1000.0 * fit.slope, "half_width_95": 1960.0 * fit.u_slope}


def summary(rows: list[dict[str, Any]], rig: Rig) -> dict[str, Any]:
    """The figures of a run's cycles in one dictionary; empty for no cycles."""
    if not rows:
        return {}
    flow, u_flow = flow_ul_per_min(rows, rig)
    margin = margins_pa(rows, rig)
    time_s = seconds(rows, rig)
    return {
        "cycles": len(rows),
        "pumping_s": round(float(time_s[-1]), 3),
        "mean_flow_ul_per_min": round(float(flow.mean()), 2),
        "u_mean_flow_ul_per_min": round(u_flow, 2),
        "volume_ul": round(
            float((flow / 60.0 * column(rows, "duration_ticks") * rig.board.tick).sum()), 2
        ),
        "least_margin_outlet_pa": round(float(margin["outlet"].min()), 1),
        "least_margin_inlet_pa": round(float(margin["inlet"].min()), 1),
        "chamber_max_pa": int(column(rows, "chamber_max_pa").max()),
        "outlet_max_pa": int(column(rows, "outlet_max_pa").max()),
        "winding_max_degc": round(float(column(rows, "winding_cc").max()) / 100.0, 2),
        "held_ticks": int(column(rows, "held_ticks").sum()),
    }
