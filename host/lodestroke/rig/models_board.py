"""Board, its pins and port, and the coil driver."""

from __future__ import annotations

from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le
from pydantic import StringConstraints

from ..units import Frequency, Ratio, Resistance, Time, Voltage
from .toml_file import Table

Pin = Annotated[int, Ge(0), Le(47)]
Text = Annotated[str, StringConstraints(max_length=80, pattern=r"^[^\x00-\x1f]*$")]


class Pins(Table):
    """GPIO numbers. Pressure and current sensors on an ADC are given by its pin."""

    enable: Pin
    bridge_a: Pin
    bridge_a_reverse: Pin | None = None
    bridge_b: Pin | None = None
    bridge_b_reverse: Pin | None = None
    chamber: Pin | None = None
    outlet: Pin | None = None
    inlet: Pin | None = None
    coil_a: Pin | None = None
    coil_b: Pin | None = None
    supply: Pin | None = None
    stop: Pin | None = None          # stop input, active low
    cutout: Pin | None = None        # external cut-out, open = high
    strap: Pin | None = None         # held low at power-up: firmware is skipped


class PortSettings(Table):
    """How the host finds and opens the board's serial port."""

    usb_serial: Text = ""
    interface: Annotated[int, Ge(0), Le(15)] = 0
    dtr: bool = True


class Board(Table):
    """What runs the firmware."""

    kind: Literal["virtual", "rp2040", "rp2350"]
    tick: Annotated[Time, Ge(0.0005), Le(0.02)] = 0.001
    serial: Text = ""
    port: PortSettings = PortSettings()
    pins: Pins | None = None


class Driver(Table):
    """The bridge between supply and coil."""

    bridge: Literal["half", "full"] = "half"
    supply: Annotated[Voltage, Gt(0.0), Le(60.0)]
    source_resistance: Annotated[Resistance, Ge(0.0), Le(1000.0)] = 0.0
    pwm: Annotated[Frequency, Ge(1000.0), Le(200000.0)] = 20000.0
    duty_max: Annotated[Ratio, Gt(0.0), Le(1.0)] = 0.95
