"""Whether the pump can draw liquid in while gas is in its chamber.

Polytropic expansion of the clearance gas (textbook reciprocating compressor; for micropumps Richter et
al., Sens. Actuators A 68 (1998) 480). Absolute pressures; walls taken as rigid.
"""

from __future__ import annotations

import math
from typing import Any

from ..rig.models import Rig
from .stroke import cracking_pa, front_m, rear_m

_MULTIPLES = (0.5, 1.0, 2.0, 5.0, 10.0, 20.0)
ISOTHERMAL, ADIABATIC = 1.0, 1.4


def least_compression(
    inlet_abs: float, outlet_abs: float, cracking_in: float, cracking_out: float, exponent: float
) -> float:
    """Smallest stroke over gas volume at which gas is moved; inf where the inlet cannot open."""
    opens = inlet_abs - cracking_in
    if opens <= 0.0:
        return math.inf
    return max(0.0, math.pow((outlet_abs + cracking_out) / opens, 1.0 / exponent) - 1.0)


def suction_lift(
    stroke: float, gas: float, ambient: float, cracking_in: float, cracking_out: float,
    exponent: float,
) -> float:
    """Greatest depth of the source below the pump, Pa, with so much gas in the chamber and an open
    outlet; below zero: it does not even draw from its own level."""
    lowest = (ambient + cracking_out) / math.pow(1.0 + stroke / gas, exponent)
    return ambient - lowest - cracking_in


def priming(rig: Rig) -> dict[str, Any]:
    """What gas the pump still clears, and how deep it draws with some; volumes in m3."""
    ambient = rig.ambient.pressure
    inlet, outlet = cracking_pa(rig.valves.inlet), cracking_pa(rig.valves.outlet)
    stroke = rig.channel.area_m2 * max(0.0, front_m(rig) - rear_m(rig))
    ratios = [least_compression(ambient + rig.inlet.head, ambient + rig.outlet.head, inlet, outlet,
                                n) for n in (ISOTHERMAL, ADIABATIC)]
    return {
        "stroke_m3": stroke,
        "least_compression_isothermal": ratios[0],
        "least_compression_adiabatic": ratios[1],
        "greatest_gas_m3": stroke / ratios[0] if ratios[0] > 0.0 else math.inf,
        "with_gas": [
            {"gas_m3": part * stroke,
             "suction_lift_pa": suction_lift(stroke, part * stroke, ambient, inlet, outlet,
                                             ISOTHERMAL)}
            for part in _MULTIPLES] if stroke > 0.0 else [],
    }
