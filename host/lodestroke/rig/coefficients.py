"""Coefficients of the board's current regulator and coil temperature estimate.

The integer formats are those of lodeboard/regulator.py and lodeboard/thermal.py.
"""

from __future__ import annotations

import math

from ..errors import RigError
from .models import Rig
from .models_pump import Coil

SMALL = 1 << 30
THERMAL_EVERY = 64       # ticks per update of the estimate
_POLE = 0.7              # closed loop: 30 % of an error is gone after each tick


def heat_values(rig: Rig) -> dict[str, int]:
    """Two-node coefficients of the hotter coil, rounded so that the estimate is rather warm."""
    coil = hotter_coil(rig)
    step_s = THERMAL_EVERY * rig.board.tick
    limits = rig.limits
    values = {
        "ambient_mc": math.ceil(rig.ambient.temperature * 1000),
        "hot_soft_mc": math.floor(limits.coil_temperature.soft * 1000),
        "hot_hard_mc": math.floor(limits.coil_temperature.hard * 1000),
        "r20_mohm": math.ceil(coil.resistance * 1000),
        "alpha_ppm": round(coil.temperature_coefficient * 1e6),
        "heat_winding_q": _whole(step_s / coil.winding_heat * 16384, 1),
        "heat_leak_winding_q": _whole(
            step_s / (coil.winding_to_body * coil.winding_heat) * 65536, -1),
        "heat_leak_body_q": _whole(
            step_s / (coil.winding_to_body * coil.body_heat) * 65536, 1),
        "heat_body_leak_q": _whole(step_s / (coil.body_to_air * coil.body_heat) * 65536, -1),
    }
    _check_heat(rig, values)
    return values


def _whole(value: float, warm: int) -> int:
    """A coefficient as an integer: the nearest when that is within 1 %, else the warmer one."""
    near = round(value)
    if abs(near - value) <= 0.01 * value:
        return near
    return math.ceil(value) if warm > 0 else math.floor(value)


def hotter_coil(rig: Rig) -> Coil:
    """The board keeps one set of coefficients: that of the coil that gets hotter per ampere."""
    return max(rig.coils, key=lambda c: c.resistance * (c.winding_to_body + c.body_to_air))


def _check_heat(rig: Rig, values: dict[str, int]) -> None:
    """Slow enough to integrate, quick enough for the integers, and no product beyond 30 bits."""
    slowest = min(values["heat_leak_winding_q"], values["heat_body_leak_q"])
    fastest = max(values["heat_leak_winding_q"], values["heat_leak_body_q"])
    top_s = THERMAL_EVERY * rig.board.tick * 65536
    if slowest < 1:
        raise RigError("the coil's thermal time constant is too long for the board's estimate",
                       at="coils", got="resistance x heat", bound=f"below {top_s:.4g} s",
                       try_="check winding_heat, body_heat and the thermal resistances")
    if fastest > 3500:
        raise RigError("the coil's thermal time constant is too short for the board's estimate",
                       at="coils", got="resistance x heat", bound=f"above {top_s / 3500:.4g} s",
                       try_="check winding_heat, body_heat and the thermal resistances")
    mean_sq = round(rig.limits.over_current * 1000) ** 2 >> 10
    hot_mohm = values["r20_mohm"] * (1 + rig.coils[0].temperature_coefficient * 280)
    power_mw = mean_sq * hot_mohm / 977
    for got, what in ((mean_sq * hot_mohm, "current squared times resistance"),
                      (power_mw * values["heat_winding_q"], "heating per step"),
                      (values["r20_mohm"] * values["alpha_ppm"], "resistance times coefficient")):
        if got >= SMALL:
            raise RigError(f"the coil's {what} does not fit the board's integers", at="coils",
                           got=f"{got:.3g}", bound=f"below {SMALL}",
                           try_="check resistance, heat capacity and limits.over_current")


def regulator_values(rig: Rig) -> dict[str, int]:
    """Gains in Q8 duty counts (Q15) per mA, from resistance, inductance, supply and tick.

    Over one tick the coil is i' = a i + (1 - a) V/R u with a = exp(-tick R / L). A PI whose zero
    cancels that pole leaves one closed-loop pole, set to 0.7; the target is fed forward as I R / V.
    Source: pole-zero cancellation design for a first-order plant (standard sampled-data control).
    """
    coil, driver = rig.coils[0], rig.driver
    ohm = coil.resistance + driver.source_resistance
    decay = math.exp(-rig.board.tick * ohm / coil.inductance)
    gain = (1.0 - _POLE) * ohm / (driver.supply * (1.0 - decay))     # duty per A
    q8 = 256 * 32768 / 1000                                          # Q8 of Q15 per mA
    top = round(driver.duty_max * 32767)
    values = {
        "kp_q8": round(gain * decay * q8),
        "ki_q8": max(1, round(gain * (1.0 - decay) * q8)),
        "feed_q8": round(ohm / driver.supply * q8),
        "response_q8": max(1, round(256 * (1.0 - decay))),
        "duty_min_q15": -top if driver.bridge == "full" else 0,
        "duty_max_q15": top,
    }
    span_ma = 1000 * (rig.limits.current + max(
        abs(rig.sensors.coil_a.low), abs(rig.sensors.coil_a.high)))
    total = span_ma * (values["kp_q8"] + values["ki_q8"] + values["feed_q8"]) + 2 * (top << 8)
    if total >= SMALL:
        raise RigError("the current regulator's gains do not fit the board's integers",
                       at="coils", got=f"{total:.3g}", bound=f"below {SMALL}",
                       try_="check inductance, resistance and supply")
    return values
