"""The pin table of a rig: what is wired where, and what to mind."""

from __future__ import annotations

from typing import Any

from .checks_pins import BRIDGES, converters, wired
from .models import Rig
from .pin_facts import CHIPS, Pin, pwm_output

# signal: (direction as the board sees it, what it is, what to mind)
WORDS = {
    "enable": ("out", "driver enable, high = on",
               "pull-down at the driver: a board in reset lets its pins float"),
    "bridge_a": ("out", "PWM of coil a", "pull-down at the driver"),
    "bridge_a_reverse": ("out", "PWM of coil a, reversed", "pull-down at the driver"),
    "bridge_b": ("out", "PWM of coil b", "pull-down at the driver"),
    "bridge_b_reverse": ("out", "PWM of coil b, reversed", "pull-down at the driver"),
    "chamber": ("in", "chamber pressure", "stays within the converter's reference"),
    "outlet": ("in", "outlet pressure", "stays within the converter's reference"),
    "inlet": ("in", "inlet pressure", "stays within the converter's reference"),
    "coil_a": ("in", "current of coil a", "filter below half the tick rate"),
    "coil_b": ("in", "current of coil b", "filter below half the tick rate"),
    "supply": ("in", "supply voltage, divided", "clamp it to the converter's reference"),
    "thermistor": ("in", "coil thermistor", "with a fixed resistor; an open wire reads as a rail"),
    "stop": ("in", "stop contact, normally closed to ground",
             "pull-up inside: an open wire reads as stop"),
    "cutout": ("in", "thermal cut-out's contact, normally closed to ground",
               "pull-up inside: an open wire reads as tripped; the cut-out itself breaks the supply"),
    "one_shot": ("out", "pulse at the end of each tick",
                 "retriggers an external one-shot whose output gates the driver's enable"),
    "strap": ("in", "held low at power-up: firmware is skipped", ""),
}
_BUS = {
    "sda": ("both", "I2C data", "pull-up to the board's supply"),
    "scl": ("out", "I2C clock", "pull-up to the board's supply"),
    "sck": ("out", "SPI clock", ""), "mosi": ("out", "SPI to the converter", ""),
    "miso": ("in", "SPI from the converter", ""),
    "chip_select": ("out", "SPI chip select, low = selected", "pull-up at the converter"),
}


def pin_table(rig: Rig) -> list[dict[str, Any]]:
    """One row per wired pin, in the order of the file; empty for a virtual board.

    Keys: signal, pin (number, or text on stm32), name (as the board's drawing has it), way ("in",
    "out", "both", as the board sees it), peripheral ("" where any pin would do), what, care.
    """
    if rig.board.kind not in CHIPS:
        return []
    label = CHIPS[rig.board.kind].label
    rows = []
    for path, signal, pin in wired(rig.board):
        last = str(path[-1])
        way, what, care = (_BUS if path[1] != "pins" else WORDS)[last]
        rows.append({
            "signal": signal, "pin": pin, "name": f"{label}{pin}", "way": way,
            "peripheral": _peripheral(rig, signal, last, pin),
            "what": what + _scale(rig, signal), "care": care,
        })
    return rows


def _scale(rig: Rig, signal: str) -> str:
    """The counts that a sensor gives over its range."""
    sensor: Any = getattr(rig.sensors, signal, None)
    if sensor is None:
        return ""
    return f", {sensor.counts_low} to {sensor.counts_high} of {sensor.counts_full} counts"


def _peripheral(rig: Rig, signal: str, role: str, pin: Pin) -> str:
    """The converter input, PWM output or bus behind a pin."""
    kind = rig.board.kind
    if signal in BRIDGES:
        output = pwm_output(kind, pin)
        if output is None or output[0] == "output":
            return "PWM"
        unit, number, channel = output
        return f"PWM {unit} {number} {'AB'[channel] if unit == 'slice' else f'channel {channel}'}"
    owner = signal.partition(" ")[0]
    bus = rig.board.buses.get(owner)
    if bus is not None and role != "chip_select":
        return f"{bus.kind.upper()}{bus.unit}"
    if role == "chip_select":
        return f"SPI on {converters(rig.board)[owner].bus}"
    return CHIPS[kind].analogue.get(pin, "") if signal in rig.sensors.model_fields_set else ""
