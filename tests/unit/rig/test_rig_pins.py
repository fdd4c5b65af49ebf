"""Pins of a rig: what is refused, with its bound, and the pin table.

Pin functions are checked against the chips' data sheets: RP2040 "GPIO functions" (PWM slice and
channel repeat every 16 pins, I2C roles every 4, ADC on 26 to 29), ESP32-S3 "strapping pins" (0, 3,
45, 46), STM32F405/407 "alternate function mapping" (timer channels).
"""

from __future__ import annotations

from pathlib import Path

import pytest

from lodestroke.errors import RigError
from lodestroke.rig import Rig, load_rig
from lodestroke.rig.pin_facts import CHIPS, STM32_TIMERS, bus_pin, pwm_output
from lodestroke.rig.pins import pin_table

CONFIGS = Path(__file__).parents[3] / "hil_configs"
RP2, ESP, STM = "bench-rp2040.toml", "bench-esp32.toml", "bench-stm32.toml"

UNUSABLE = [
    (RP2, "bridge_a = 16 ", "bridge_a = 40 ", "pins.bridge_a", "no such pin"),
    (RP2, "bridge_a = 16 ", "bridge_a = 15 ", "pins.bridge_a", "already enable"),
    (RP2, "bridge_a = 16 ", "bridge_a = true ", "pins.bridge_a", "not a pin"),
    (RP2, "bridge_a = 16 ", 'bridge_a = "A0" ', "pins.bridge_a", "no such pin"),
    (RP2, "bridge_a = 16 ", "bridge_a = 16\nbridge_a_reverse = 0 ", "bridge_a_reverse",
     "the same PWM output as bridge_a"),
    (RP2, "bridge_a = 16 ", "bridge_a = 16\nbridge_b_reverse = 18 ", "bridge_b_reverse",
     "without its bridge"),
    (RP2, "chamber = 26 ", "chamber = 22 ", "pins.chamber", "no analogue input"),
    (RP2, "chamber = 26 ", "", "pins.chamber", "missing"),
    (RP2, "chamber = 26 ", "chamber = 26\nsupply = 29 ", "pins.supply", "no [sensors.supply]"),
    (RP2, 'tick = "4 ms"', 'tick = "5 ms"', "board.tick", "lets go before the next tick"),
    (RP2, "deadman = true", "deadman = false", "limits.deadman", "nothing drops enable"),
    (ESP, "enable = 15", "enable = 45", "pins.enable", "no output to trust"),
    (ESP, "enable = 15", "enable = 19", "pins.enable", "belongs to USB"),
    (ESP, "enable = 15", "enable = 23", "pins.enable", "no such pin"),
    (ESP, "enable = 15", "enable = 30", "pins.enable", "the module's flash"),
    (ESP, "coil_a = 1 ", "coil_a = 18 ", "pins.coil_a", "no analogue input"),
    (ESP, "one_shot = 17", "", "limits.deadman", "nothing drops enable"),
    (ESP, "deadman = false ", "deadman = true ", "limits.deadman", "no hard timer"),
    (ESP, 'bus = "left"', 'bus = "middle"', "converters.chamber.bus", "no such bus"),
    (ESP, 'unit = 1\n', 'unit = 0\n', "buses.right.unit", "i2c 0 is left's"),
    (ESP, "scl = 9\n", "", "buses.left.scl", "missing"),
    (ESP, "scl = 9\n", "scl = 9\nsck = 10\n", "buses.left.sck", "means nothing on i2c"),
    (ESP, "scl = 9\n", "scl = 8\n", "buses.left.scl", "already left sda"),
    (ESP, 'frequency = "400 kHz"', 'frequency = "2 MHz"', "buses.left.frequency", "too fast"),
    (ESP, "address = 40", "chip_select = 5", "converters.chamber.address", "missing"),
    (ESP, "coil_a = 1 ", "coil_a = 1\nchamber = 2 ", "converters.chamber", "a pin of its own"),
    (ESP, "start = [170, 0, 0]", "start = [300]", "converters.chamber.start", "out of bounds"),
    (STM, 'enable = "B12"', "enable = 12", "pins.enable", "no such pin"),
    (STM, 'enable = "B12"', 'enable = "A13"', "pins.enable", "belongs to the debug port"),
    (STM, 'enable = "B12"', 'enable = "B6"', "pins.bridge_a", "already enable"),
    (STM, 'bridge_a = "B6"', 'bridge_a = "B2"', "pins.bridge_a", "has no PWM"),
    (STM, 'bridge_a = "B6"', 'bridge_a = "B6"\nbridge_b = "D12"', "pins.bridge_b",
     "the same PWM output as bridge_a"),
    (STM, 'coil_a = "C0"', 'coil_a = "C6"', "pins.coil_a", "no analogue input"),
    (STM, 'kind = "spi"', 'kind = "i2c"', "converters.chamber.bus", "needs an spi bus"),
    (STM, 'chip_select = "A4"\n', "", "converters.chamber.chip_select", "missing"),
]


def edited(tmp_path: Path, name: str, old: str, new: str) -> Path:
    text = (CONFIGS / name).read_text(encoding="utf-8")
    assert old in text, old
    path = tmp_path / name
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
    return path


@pytest.mark.parametrize(("name", "old", "new", "key", "words"), UNUSABLE)
def test_pin_that_cannot_do_it_is_refused_with_key_bound_and_advice(
    tmp_path: Path, name: str, old: str, new: str, key: str, words: str
) -> None:
    with pytest.raises(RigError) as caught:
        load_rig(edited(tmp_path, name, old, new))
    error = caught.value
    assert key in error.text()
    assert words in error.text()
    assert error.at
    assert error.got
    assert error.try_


@pytest.mark.parametrize("name", [RP2, ESP, STM])
def test_pin_table_names_every_wired_pin_once_with_what_to_mind(name: str) -> None:
    rig = load_rig(CONFIGS / name)
    rows = pin_table(rig)
    pins = [row["pin"] for row in rows]
    assert len(pins) == len(set(pins))
    assert all(row["name"] and row["what"] and row["way"] in ("in", "out", "both") for row in rows)
    by_signal = {row["signal"]: row for row in rows}
    assert "pull-down" in by_signal["enable"]["care"]
    assert "open wire reads as stop" in by_signal["stop"]["care"]
    assert by_signal["bridge_a"]["peripheral"].startswith("PWM")
    assert "counts" in by_signal["coil_a"]["what"]


def test_pin_table_is_empty_for_a_virtual_board(bench: Rig) -> None:
    assert pin_table(bench) == []


def test_pin_table_names_converter_inputs_timers_and_buses() -> None:
    rows = {row["signal"]: row["peripheral"] for name in (RP2, ESP, STM)
            for row in pin_table(load_rig(CONFIGS / name))}
    assert rows["outlet"] == "ADC1"
    assert rows["left sda"] == "I2C0"
    assert rows["spi sck"] == "SPI1"
    assert rows["chamber chip_select"] == "SPI on spi"
    assert rows["bridge_a"] == "PWM timer 4 channel 1"       # STM32F405: PB6 is TIM4_CH1


def test_pwm_outputs_of_rp2_repeat_every_sixteen_pins() -> None:
    assert pwm_output("rp2040", 0) == pwm_output("rp2040", 16) == ("slice", 0, 0)
    assert pwm_output("rp2040", 15) == ("slice", 7, 1)
    assert pwm_output("rp2350", 32) == ("slice", 8, 0)       # slices 8 to 11 serve 32 to 47 twice
    assert pwm_output("rp2350", 47) == ("slice", 11, 1)


@pytest.mark.parametrize(("pin", "timer"), [
    ("A0", (2, 1)), ("A3", (2, 4)), ("A6", (3, 1)), ("B1", (3, 4)), ("B9", (4, 4)),
    ("A8", (1, 1)), ("C9", (8, 4)),
])
def test_timer_channels_of_stm32f4_are_the_data_sheets(pin: str, timer: tuple[int, int]) -> None:
    assert STM32_TIMERS[pin] == timer
    assert pin in CHIPS["stm32"].exists


def test_bus_roles_of_rp2_are_the_data_sheets() -> None:
    assert bus_pin("rp2040", "i2c", "sda", 0, 4)
    assert bus_pin("rp2040", "i2c", "scl", 0, 5)
    assert bus_pin("rp2040", "i2c", "sda", 1, 6)
    assert not bus_pin("rp2040", "i2c", "sda", 0, 6)
    assert not bus_pin("rp2040", "i2c", "scl", 0, 4)
    assert bus_pin("rp2040", "spi", "miso", 0, 16)
    assert bus_pin("rp2040", "spi", "sck", 0, 18)
    assert bus_pin("rp2040", "spi", "mosi", 1, 11)
    assert not bus_pin("rp2040", "spi", "mosi", 0, 11)
