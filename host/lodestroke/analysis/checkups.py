"""What the short measurements of an endurance test say, from their sample rows.

Each result has the unit in its key names, standard uncertainties (k = 1) as u_..., and `ok` with
`why`. rows: structured array of rows.SAMPLE, one row per control tick, in order.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import numpy as np

from .uncertainty import combine, line, type_a

if TYPE_CHECKING:
    from ..rig import Rig

Result = dict[str, Any]
K_COPPER = 235.0  # IEC 60034-1 resistance method
U_STATED_SUPPLY = 0.01  # relative, of a supply that is stated and not measured; our assumption
_SMOOTH = 3  # ticks in a running mean: steadies noise, short against a valve's opening
_UL = 1e9


def evaluate(item: str, rows: np.ndarray, rig: Rig) -> Result:
    """The result of one check-up item. Raises KeyError for an unknown item; never for bad data."""
    measure = _ITEMS[item]
    if len(rows) < 50:
        return {"ok": False, "why": f"only {len(rows)} samples arrived"}
    return measure(rows, rig)


def _smooth(values: np.ndarray) -> np.ndarray:
    kernel = np.ones(_SMOOTH) / _SMOOTH
    return np.convolve(values.astype(float), kernel, mode="valid")


def _u_pressure(rig: Rig, *names: str) -> float:
    """Standard uncertainty of a difference of pressure readings, noise after smoothing included."""
    parts = []
    for name in names:
        sensor = getattr(rig.sensors, name)
        if sensor is not None:
            parts += [sensor.uncertainty, sensor.noise / _SMOOTH**0.5]
    return combine(*parts)


def cracking(rows: np.ndarray, rig: Rig) -> Result:
    """Cracking pressures from a slow ramp up and down.

    While a valve is shut the pressure across it follows the slug; where it opens the pressure gives
    way. The greatest forward pressure on the way is the cracking pressure.
    """
    current = rows["target_a_ma"]
    top = int(np.argmax(current))
    across_out = _smooth(rows["chamber_pa"] - rows["outlet_pa"])[: max(top, 1)]
    across_in = _smooth(rows["inlet_pa"] - rows["chamber_pa"])[top:]
    outlet = _smooth(rows["outlet_pa"])
    rise = float(outlet.max() - outlet[:20].mean())
    needed = 5.0 * max(_u_pressure_noise(rig, "outlet"), 1.0)
    result: Result = {
        "outlet_cracking_pa": round(float(across_out.max()), 1),
        "u_outlet_cracking_pa": round(_u_pressure(rig, "chamber", "outlet"), 1),
        **_inlet_cracking(across_in, _u_pressure(rig, "chamber", "inlet")),
        "ok": rise > needed,
        "why": "",
    }
    if not result["ok"]:
        result["why"] = f"the outlet rose by {rise:.0f} Pa only: its valve did not open"
    return result


def _inlet_cracking(across: np.ndarray, u: float) -> Result:
    """The inlet's cracking pressure, or the pressure that it held without opening.

    A valve that opened settles near its closing pressure, well below where it opened.
    """
    if len(across) < 100:
        return {}
    top = round(float(across.max()), 1)
    if float(across[-50:].mean()) < 0.6 * top:
        return {"inlet_cracking_pa": top, "u_inlet_cracking_pa": round(u, 1)}
    return {"inlet_cracking_above_pa": top, "u_inlet_cracking_above_pa": round(u, 1)}


def _u_pressure_noise(rig: Rig, name: str) -> float:
    return float(getattr(rig.sensors, name).noise) / math.sqrt(_SMOOTH)


def stroke_volume(rows: np.ndarray, rig: Rig) -> Result:
    """Volume that each stroke puts into the outlet vessel: what it stores plus what it lets through.

    V = C (p_end - p_start) + integral of (p - head)/R dt. Source: lumped compliance and resistance.
    """
    tick_s = rig.board.tick
    on = rows["target_a_ma"] > 0
    starts = np.flatnonzero(on & ~np.append(False, on[:-1]))
    ends = np.append(starts[1:], len(rows))
    pressure = rows["outlet_pa"].astype(float)
    volumes = []
    for start, end in zip(starts, ends, strict=True):
        if end - start < 40:
            continue
        before = pressure[max(start - 20, 0) : max(start, 3)].mean()
        after = pressure[end - 20 : end].mean()
        through = (pressure[start:end] - rig.outlet.head).sum() * tick_s / rig.outlet.restriction
        # what already ran out because the vessel stood above its head is no part of the stroke
        through -= (before - rig.outlet.head) * (end - start) * tick_s / rig.outlet.restriction
        volumes.append((rig.outlet.compliance * (after - before) + through) * _UL)
    mean, u_a = type_a(np.array(volumes))
    u_c = abs(mean) * rig.tolerances.compliance
    u_p = rig.outlet.compliance * rig.sensors.outlet.noise * (2 / 20) ** 0.5 * _UL
    return {
        "stroke_volume_ul": round(mean, 3),
        "u_stroke_volume_ul": round(combine(u_a, u_c, u_p), 3),
        "strokes": len(volumes),
        "ok": len(volumes) > 0,
        "why": "" if volumes else "no stroke was found in the samples",
    }


def coil_resistance(rows: np.ndarray, rig: Rig) -> Result:
    """Resistance at a steady current, and the winding temperature that it implies.

    R = duty (V - R_source duty I)/I; T = R/R20 (235 + 20) - 235 (IEC 60034-1 for copper).
    """
    steady = rows[rows["target_a_ma"] > 0]
    steady = steady[len(steady) // 2 :]
    steady = steady[steady["target_a_ma"] == np.max(steady["target_a_ma"], initial=0)]
    if len(steady) < 20:
        return {"ok": False, "why": "no steady current was found in the samples"}
    current, u_a = type_a(steady["coil_a_ma"] / 1000.0)
    duty, u_duty = type_a(steady["duty_a_q15"] / 32767.0)
    if current <= 0.0:
        return {"ok": False, "why": "no current flowed: is the coil open?"}
    driver = rig.driver
    ohm = duty * (driver.supply - driver.source_resistance * duty * current) / current
    u = ohm * combine(
        combine(u_a, rig.sensors.coil_a.uncertainty) / current,
        u_duty / duty if duty else 0.0,
        U_STATED_SUPPLY,
    )
    r20 = rig.coils[0].resistance
    return {
        "coil_resistance_ohm": round(ohm, 4),
        "u_coil_resistance_ohm": round(u, 4),
        "winding_degc": round(ohm / r20 * (K_COPPER + 20.0) - K_COPPER, 1),
        "u_winding_degc": round(u / r20 * (K_COPPER + 20.0), 1),
        "ok": True,
        "why": "",
    }


def zero_flow(rows: np.ndarray, rig: Rig) -> Result:
    """Nothing driven: what still flows to the load, and how the outlet drifts."""
    seconds = rows["tick"] * rig.board.tick
    outlet = rows["outlet_pa"].astype(float)
    fit = line(seconds, outlet)
    mean, u_a = type_a(outlet)
    above = mean - rig.outlet.head
    u = combine(u_a, rig.sensors.outlet.uncertainty)
    per_pa = _UL * 60.0 / rig.outlet.restriction
    return {
        "zero_flow_ul_per_min": round(above * per_pa, 3),
        "u_zero_flow_ul_per_min": round(u * per_pa, 3),
        "outlet_drift_pa_per_s": round(fit.slope, 3),
        "u_outlet_drift_pa_per_s": round(fit.u_slope, 3),
        "chamber_pa": round(float(rows["chamber_pa"].mean()), 1),
        "ok": True,
        "why": "",
    }


_ITEMS: dict[str, Callable[[np.ndarray, Rig], Result]] = {
    "cracking": cracking,
    "stroke_volume": stroke_volume,
    "coil_resistance": coil_resistance,
    "zero_flow": zero_flow,
}
