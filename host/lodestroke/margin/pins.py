"""The pin table of a rig: what goes where on the board, read from board.pins as it is."""

from __future__ import annotations

from typing import Any

from ..rig.models import Rig

_WORDS = {
    "enable": ("out", "driver enable, high = on; pull-down at the driver"),
    "bridge_a": ("out", "PWM of coil a"), "bridge_a_reverse": ("out", "PWM of coil a, reversed"),
    "bridge_b": ("out", "PWM of coil b"), "bridge_b_reverse": ("out", "PWM of coil b, reversed"),
    "chamber": ("in", "chamber pressure"), "outlet": ("in", "outlet pressure"),
    "inlet": ("in", "inlet pressure"), "coil_a": ("in", "current of coil a"),
    "coil_b": ("in", "current of coil b"), "supply": ("in", "supply voltage"),
    "stop": ("in", "stop button to ground"), "cutout": ("in", "thermal cut-out, open = tripped"),
    "strap": ("in", "held low at power-up: firmware is skipped"),
}


def pin_table(rig: Rig) -> list[dict[str, Any]]:
    """One row per pin that the rig names; empty for a virtual board."""
    if rig.board.pins is None:
        return []
    rows = []
    for name, pin in rig.board.pins.model_dump(exclude_none=True).items():
        way, what = _WORDS.get(name, ("", name.replace("_", " ")))
        sensor: Any = getattr(rig.sensors, name, None)
        if sensor is not None:
            what += f", {sensor.counts_low} to {sensor.counts_high} of {sensor.counts_full} counts"
        rows.append({"signal": name, "pin": pin, "way": way, "what": what})
    return rows
