"""Board, its pins and port, and the coil driver."""

from __future__ import annotations

from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le, MaxLen, MinLen
from pydantic import BeforeValidator, Field, StringConstraints

from ..units import Frequency, Ratio, Resistance, Time, Voltage
from .toml_file import Table


def _pin(value: object) -> object:
    """A GPIO number, or a port letter and number as in "A5"; which of them the kind decides."""
    whole = isinstance(value, int) and not isinstance(value, bool)
    if not whole and not isinstance(value, str):
        raise ValueError('not a pin: write a number, or text such as "A5" on stm32')
    return value


Pin = Annotated[int | str, BeforeValidator(_pin)]
Text = Annotated[str, StringConstraints(max_length=80, pattern=r"^[^\x00-\x1f]*$")]
Octet = Annotated[int, Ge(0), Le(255)]


class Pins(Table):
    """GPIO numbers, on stm32 names such as "A5". Sensors on the chip's own ADC are given by its pin.

    Which pins can do what is judged in checks_pins.py; how each is wired says pins.py.
    """

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
    thermistor: Pin | None = None
    stop: Pin | None = None          # normally closed contact to ground; open = stop
    cutout: Pin | None = None        # normally closed contact to ground; open = tripped
    one_shot: Pin | None = None      # pulsed at the end of each tick: external one-shot gates enable
    strap: Pin | None = None         # held low at power-up: firmware is skipped


class Bus(Table):
    """A serial bus that converters or sensors hang on. `unit` is the peripheral's number."""

    kind: Literal["i2c", "spi"]
    unit: Annotated[int, Ge(0), Le(6)]
    frequency: Annotated[Frequency, Ge(10000.0), Le(20e6)] = 400000.0
    sda: Pin | None = None
    scl: Pin | None = None
    sck: Pin | None = None
    mosi: Pin | None = None
    miso: Pin | None = None


class Converter(Table):
    """One channel behind a bus, by class of interface. Raw counts reach the firmware as 16 bits.

    `i2c_24bit`: a sensor that sends its count in 24 bits; the upper 16 are used. `i2c_16bit`: a
    converter with a 16-bit result. Both: `start` is written to begin a conversion, the next tick
    reads it (from `result_register` where one is named); the count begins at octet `first`; where
    `status_mask` is not 0, octet 0 masked with it must read `status_ready`. Inputs at one address
    take turns, one a tick. `spi`: `start` is shifted out while the answer comes in; its last octets
    hold `bits` bits, `shift` bits from the right. `signed` two's complement becomes 0 to 65535 with
    32768 for zero.
    """

    interface: Literal["i2c_24bit", "i2c_16bit", "spi"]
    bus: Annotated[str, StringConstraints(min_length=1, max_length=20)]
    address: Annotated[int, Ge(8), Le(119)] | None = None
    start: Annotated[list[Octet], MinLen(1), MaxLen(8)]
    result_register: Octet | None = None
    first: Annotated[int, Ge(0), Le(6)] = 0
    status_mask: Octet = 0
    status_ready: Octet = 0
    chip_select: Pin | None = None
    bits: Annotated[int, Ge(8), Le(16)] = 16
    shift: Annotated[int, Ge(0), Le(8)] = 0
    signed: bool = False


class Converters(Table):
    """Channels that are not read by the chip's own ADC."""

    chamber: Converter | None = None
    outlet: Converter | None = None
    inlet: Converter | None = None
    coil_a: Converter | None = None
    coil_b: Converter | None = None
    supply: Converter | None = None
    thermistor: Converter | None = None


class PortSettings(Table):
    """How the host finds and opens the board's serial port."""

    usb_serial: Text = ""
    interface: Annotated[int, Ge(0), Le(15)] = 0
    dtr: bool = True


class Board(Table):
    """What runs the firmware."""

    kind: Literal["virtual", "rp2040", "rp2350", "esp32s3", "stm32"]
    tick: Annotated[Time, Ge(0.0005), Le(0.02)] = 0.001
    serial: Text = ""
    port: PortSettings = PortSettings()
    pins: Pins | None = None
    buses: dict[str, Bus] = Field(default_factory=dict)
    converters: Converters = Converters()


class Driver(Table):
    """The bridge between supply and coil."""

    bridge: Literal["half", "full"] = "half"
    supply: Annotated[Voltage, Gt(0.0), Le(60.0)]
    source_resistance: Annotated[Resistance, Ge(0.0), Le(1000.0)] = 0.0
    pwm: Annotated[Frequency, Ge(1000.0), Le(200000.0)] = 20000.0
    duty_max: Annotated[Ratio, Gt(0.0), Le(1.0)] = 0.95
