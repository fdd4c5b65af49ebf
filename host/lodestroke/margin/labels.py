"""Names with a unit at their end as labels and values for people: for tables on screens and pages."""

from __future__ import annotations

import math
from typing import Any

from ..units import show

# unit at the end of a name, longest first -> SI unit
_SUFFIXES = (
    ("_pa_s2_m3", "Pa*s^2/m^3"), ("_pa_s_m3", "Pa*s/m^3"), ("_kg_m3", "kg/m^3"), ("_a_mm2", "A/mm^2"),
    ("_pa_s", "Pa*s"), ("_m3_s", "m^3/s"), ("_k_s", "K/s"), ("_m_s", "m/s"), ("_a_m", "A/m"),
    ("_ohm", "ohm"), ("_pa", "Pa"), ("_hz", "Hz"), ("_m3", "m^3"), ("_a", "A"), ("_s", "s"),
    ("_c", "degC"), ("_m", "m"), ("_w", "W"), ("_n", "N"), ("_t", "T"), ("_v", "V"), ("_h", "H"),
    ("_bytes", "bytes"),
)
_SHARES = ("share", "fill", "ratio", "compression", "factor")
LEFT_OUT = "not known: the rig leaves out what it needs"


def value_text(value: Any, unit: str) -> str:
    """An SI value in four digits with its unit; what has no end and what is not known in words."""
    if value is None:
        return "-"
    if not math.isfinite(value):
        return "no end (thermal runaway)" if unit == "degC" else "never" if unit == "s" else "no bound"
    if unit == "m^3/s":
        return f"{value * 6e10:.4g} ul/min"
    return f"{value} bytes" if unit == "bytes" else show(float(f"{value:.4g}"), unit)


def labelled(name: str, value: Any) -> tuple[str, str]:
    """("thermal_slow_s", 389.2) -> ("thermal slow", "389.2 s")."""
    words = name.replace("_", " ")
    if isinstance(value, str):
        return words, value or "-"
    for suffix, unit in _SUFFIXES:
        if name.endswith(suffix):
            label = name.removesuffix(suffix).replace("_", " ")
            return label, LEFT_OUT if value is None else value_text(value, unit)
    if value is None:
        return words, LEFT_OUT
    if isinstance(value, float) and not math.isfinite(value):
        return words, "never"
    if isinstance(value, float) and any(word in name for word in _SHARES):
        return words, f"{value:.4g}" if value < 1e-3 else f"{value:.1%}"
    return words, f"{value:.4g}" if isinstance(value, float) else str(value)


def sensor_unit(channel: str) -> str:
    """SI unit of a sensor channel."""
    return {"coil_a": "A", "coil_b": "A", "supply": "V"}.get(channel, "Pa")
