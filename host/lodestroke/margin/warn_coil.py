"""What will disappoint of coil, wire, driver and supply."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

from ..rig.models import Rig
from .warn import Stroke, Warn, brief, judgement

FILL_MOST = math.pi / (2.0 * math.sqrt(3.0))    # round wires in hexagonal stacking
DENSITY_MOST = 40.0       # A/mm2 in short strokes; common practice: 3 to 10 for steady current
RIPPLE_SHARE = 0.1        # of full current, peak to peak
SAG_SHARE = 0.1
INDUCTANCE_FACTOR = 2.0   # Wheeler's formula is good for some per cent; twice off is a mistake
COPPER_J_M3_K = 8890.0 * 385.0


@judgement
def current_reached(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Full current must still be there when the coil is hot."""
    for coil in facts["coils"]:
        hot = coil["greatest_current_hot_a"]
        if hot < rig.limits.current:
            yield Warn("current_lost_when_hot", "a hot coil no longer reaches full current",
                       f"{brief(hot, 'A')} at {rig.limits.coil_temperature.hard:g} degC, "
                       f"{brief(coil['greatest_current_cold_a'], 'A')} cold",
                       f"limits.current, {brief(rig.limits.current, 'A')}",
                       "a higher supply, a lower limits.current, or a cooler coil")


@judgement
def heat(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Full current at the rig's own duty limit, for good."""
    limit, duty = rig.limits.coil_temperature.hard, rig.limits.duty_cycle
    for coil in facts["coils"]:
        steady = coil["steady_at_duty_limit_c"]
        if steady <= limit:
            continue
        row = next(row for row in coil["at_duty"] if row["duty"] == duty)
        seconds = brief(row["seconds_to_limit"], "s") if math.isfinite(
            row["seconds_to_limit"]) else "a long time"
        name, got = ("thermal_runaway", "no steady temperature: resistance rises faster than heat "
                     "leaves") if not math.isfinite(steady) else (
                     "too_hot_at_duty", f"{steady:.0f} degC in the end")
        yield Warn(name, f"full current at a duty of {duty:g} cannot be kept up",
                   f"{got}; the limit comes after {seconds}", f"{limit:g} degC",
                   f"at most {brief(coil['greatest_steady_rms_a'], 'A')} r.m.s. for good: a lower duty "
                   "or current, or better cooling")


@judgement
def winding(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Resistance, inductance and heat capacity must be those of copper in this window."""
    for coil, part in zip(facts["coils"], rig.coils, strict=True):
        if coil["copper_fill"] > FILL_MOST:
            least = coil["resistance_ohm"] * coil["copper_fill"] / FILL_MOST
            yield Warn("more_copper_than_fits", "no copper wire of these turns fits into the winding's "
                       "window at this resistance",
                       f"copper would fill {coil['copper_fill']:.0%} of the window",
                       f"at most {FILL_MOST:.0%} (round wire, hexagonal): at least "
                       f"{brief(least, 'ohm')}",
                       "measure the coil: fewer turns, a higher resistance or a larger window")
        ratio = part.inductance / coil["wheeler_inductance_h"]
        if not 1.0 / INDUCTANCE_FACTOR <= ratio <= INDUCTANCE_FACTOR:
            yield Warn("inductance_unlikely", "this inductance does not go with turns and window",
                       brief(part.inductance, "H"),
                       f"about {brief(coil['wheeler_inductance_h'], 'H')} (Wheeler), within a "
                       f"factor of {INDUCTANCE_FACTOR:g}", "measure it, or check the turns")
        copper = COPPER_J_M3_K * coil["wire_length_m"] * math.pi * coil["wire_diameter_m"]**2 / 4
        if not copper / 3.0 <= part.winding_heat <= 10.0 * copper:
            yield Warn("heat_capacity_unlikely", "this heat capacity does not go with the copper",
                       brief(part.winding_heat, "J/K"), f"about {copper:.2g} J/K of copper alone",
                       "weigh the coil: 385 J/kg/K")


@judgement
def wire_load(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Amperes per square millimetre."""
    for coil in facts["coils"]:
        density = coil["current_density_a_mm2"]
        if density >= DENSITY_MOST:
            yield Warn("wire_overloaded", "full current is much for this wire, however short",
                       f"{density:.3g} A/mm2, heating by {coil['heating_at_limit_k_s']:.3g} K/s",
                       f"below {DENSITY_MOST:g} A/mm2 (3 to 10 for steady current)",
                       "a thicker wire: fewer turns, or a larger window")


@judgement
def drive(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Ripple, sag, and a coil faster than the tick that rules it."""
    coil = facts["coils"][0]
    if coil["ripple_a"] >= RIPPLE_SHARE * rig.limits.current:
        yield Warn("ripple", "the current ripples much at this PWM frequency",
                   f"{brief(coil['ripple_a'], 'A')} peak to peak at half duty",
                   f"below {RIPPLE_SHARE:.0%} of limits.current", "a higher driver.pwm")
    bus = coil["bus_at_full_current_v"]
    if not math.isfinite(bus) or bus <= (1.0 - SAG_SHARE) * rig.driver.supply:
        shown = brief(bus, "V") if math.isfinite(bus) else "no supply voltage is left"
        yield Warn("supply_sags", "the supply sags under full current", shown,
                   f"above {brief((1.0 - SAG_SHARE) * rig.driver.supply, 'V')}",
                   "a stiffer supply, thicker leads, a buffer at the driver")
    if coil["electric_time_constant_s"] < 0.25 * rig.board.tick:
        yield Warn("tick_slow_for_coil", "the coil's current settles within a part of a tick",
                   f"time constant {brief(coil['electric_time_constant_s'], 's')}",
                   f"at least a quarter of board.tick, {brief(rig.board.tick, 's')}",
                   "a shorter tick; current follows the duty, and over-current is seen a tick late")
