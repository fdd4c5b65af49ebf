"""What each chip's pins can do, as far as a rig needs it.

Sources: RP2040 and RP2350 data sheets, tables "GPIO functions"; ESP32-S3 data sheet, "pin
overview", and its technical reference on strapping pins and ADC2; STM32F405/407 data sheet, table
"alternate function mapping" (other STM32F4 chips carry the same timers where they have the pin).
"""

from __future__ import annotations

from dataclasses import dataclass, field

Pin = int | str


@dataclass(frozen=True)
class Chip:
    """Pins of one kind of board. `taken` pins are wired to something else on every board."""

    exists: frozenset[Pin]
    label: str                                   # what stands before a pin in print
    analogue: dict[Pin, str]                     # pin -> converter input
    taken: dict[Pin, str] = field(default_factory=dict)
    not_output: dict[Pin, str] = field(default_factory=dict)
    pins_text: str = ""
    analogue_text: str = ""
    hard_timer: bool = True


_USB = "USB"
_STRAP = "its level at reset chooses the boot mode"


def _rp2(top: int, analogue: dict[Pin, str], text: str) -> Chip:
    return Chip(frozenset(range(top + 1)), "GP", analogue,
                pins_text=f"0 to {top}", analogue_text=text)


def _stm32_timers() -> dict[Pin, tuple[int, int]]:
    """Pin -> (timer, channel): the general timers 2 to 5 before the advanced ones."""
    rows = (
        (1, ((1, "A8 E9"), (2, "A9 E11"), (3, "A10 E13"), (4, "E14"))),
        (8, ((1, "C6"), (2, "C7"), (3, "C8"), (4, "C9"))),
        (2, ((1, "A0 A5 A15"), (2, "A1 B3"), (3, "A2 B10"), (4, "A3 B11"))),
        (3, ((1, "A6 B4"), (2, "A7 B5"), (3, "B0"), (4, "B1"))),
        (4, ((1, "B6 D12"), (2, "B7 D13"), (3, "B8 D14"), (4, "B9 D15"))),
    )
    return {pin: (timer, channel) for timer, channels in rows
            for channel, pins in channels for pin in pins.split()}


STM32_TIMERS = _stm32_timers()
_STM32_ADC: dict[Pin, str] = {
    **{f"A{i}": f"ADC1_IN{i}" for i in range(8)}, "B0": "ADC1_IN8", "B1": "ADC1_IN9",
    **{f"C{i}": f"ADC1_IN{10 + i}" for i in range(6)},
}

CHIPS = {
    "rp2040": _rp2(29, {26 + i: f"ADC{i}" for i in range(4)}, "26 to 29"),
    "rp2350": _rp2(47, {**{26 + i: f"ADC{i}" for i in range(4)},
                        **{40 + i: f"ADC{i}" for i in range(8)}},
                   "26 to 29 with 30 pins, 40 to 47 with 48 pins"),
    "esp32s3": Chip(
        frozenset([*range(22), *range(26, 49)]), "GPIO",
        {i: f"ADC1_CH{i - 1}" for i in range(1, 11)},
        taken={19: _USB, 20: _USB, 43: "the UART prompt", 44: "the UART prompt",
               **dict.fromkeys(range(26, 33), "the module's flash")},
        not_output=dict.fromkeys((0, 3, 45, 46), _STRAP),
        pins_text="0 to 21 and 33 to 48, less USB 19, 20 and UART 43, 44",
        analogue_text="1 to 10 (ADC1; ADC2 is the radio's)", hard_timer=False,
    ),
    "stm32": Chip(
        frozenset(f"{port}{i}" for port in "ABCDE" for i in range(16)), "P", _STM32_ADC,
        taken={"A11": _USB, "A12": _USB, "A13": "the debug port", "A14": "the debug port",
               "C14": "the 32 kHz crystal", "C15": "the 32 kHz crystal"},
        pins_text='"A0" to "E15", less "A11" to "A14", "C14" and "C15"',
        analogue_text='"A0" to "A7", "B0", "B1", "C0" to "C5"',
    ),
}


def pwm_output(kind: str, pin: Pin) -> tuple[str, int, int] | None:
    """The PWM output behind a pin as (name, unit, channel): pins with the same one move together.

    None where the pin has none. On esp32s3 any pin can be given any output.
    """
    if kind in ("rp2040", "rp2350") and isinstance(pin, int):
        slice_ = (pin >> 1) & 7 if pin < 32 else 8 + ((pin >> 1) & 3)
        return "slice", slice_, pin & 1
    if kind == "stm32":
        found = STM32_TIMERS.get(pin)
        return None if found is None else ("timer", *found)
    return ("output", pin, 0) if isinstance(pin, int) else None


def bus_pin(kind: str, bus: str, role: str, unit: int, pin: Pin) -> bool:
    """Whether this pin can serve a bus in this role. Only rp2 ties roles to pins by a rule."""
    if kind not in ("rp2040", "rp2350") or not isinstance(pin, int):
        return True
    if bus == "i2c":
        return pin % 4 == 2 * (unit & 1) + (role == "scl")
    return (pin >> 3) & 1 == unit and pin % 4 == {"miso": 0, "sck": 2, "mosi": 3}[role]
