"""Pins that a board has not, that cannot do what they shall, or that two things want."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from lodeboard.limits import CHANNELS

from ..units import show
from .models_board import Board, Bus, Converter
from .models_limits import Limits
from .models_sensors import Sensors
from .pin_facts import CHIPS, Pin, bus_pin, pwm_output
from .problems import Problem

Key = tuple[str | int, ...]
DEADMAN_TICK = 0.004              # the deadman lets go 8 to 10 ms after the last whole tick
_OUTPUTS = ("enable", "bridge_a", "bridge_a_reverse", "bridge_b", "bridge_b_reverse", "one_shot",
            "scl", "sck", "mosi", "chip_select")
BRIDGES = ("bridge_a", "bridge_a_reverse", "bridge_b", "bridge_b_reverse")
_ROLES = {"i2c": ("sda", "scl"), "spi": ("sck", "mosi", "miso")}


def wired(board: Board) -> list[tuple[Key, str, Pin]]:
    """(key in the file, signal, pin) of everything that is wired to a pin."""
    rows: list[tuple[Key, str, Pin]] = []
    if board.pins is not None:
        for name, pin in board.pins.model_dump(exclude_none=True).items():
            rows.append((("board", "pins", name), name, pin))
    for name, bus in board.buses.items():
        for role in ("sda", "scl", "sck", "mosi", "miso"):
            pin = getattr(bus, role)
            if pin is not None:
                rows.append((("board", "buses", name, role), f"{name} {role}", pin))
    for name, converter in converters(board).items():
        if converter.chip_select is not None:
            rows.append((("board", "converters", name, "chip_select"), f"{name} chip_select",
                         converter.chip_select))
    return rows


def converters(board: Board) -> dict[str, Converter]:
    """The converters that are there, by channel."""
    rows = {name: getattr(board.converters, name) for name in type(board.converters).model_fields}
    return {name: row for name, row in rows.items() if row is not None}


def pins_are_usable(board: Board) -> Iterator[Problem]:
    """Each pin exists, is free for us, can do its work, and is used once."""
    chip = CHIPS.get(board.kind)
    if chip is None:
        return
    used: dict[Pin, str] = {}
    for path, signal, pin in wired(board):
        role = str(path[-1])
        if pin not in chip.exists:
            yield Problem(path, "no such pin", f"{chip.pins_text} on {board.kind}",
                          "name a free pin")
        elif pin in chip.taken:
            yield Problem(path, f"pin {pin} belongs to {chip.taken[pin]}", chip.pins_text,
                          "name a free pin")
        elif role in CHANNELS and path[1] == "pins" and pin not in chip.analogue:
            yield Problem(path, f"pin {pin} has no analogue input",
                          f"{chip.analogue_text} on {board.kind}",
                          "wire the sensor to an analogue pin, or to a converter on a bus")
        elif role in _OUTPUTS and pin in chip.not_output:
            yield Problem(path, f"pin {pin} is no output to trust: {chip.not_output[pin]}",
                          f"none of {', '.join(map(str, chip.not_output))}", "name another pin")
        if pin in used:
            yield Problem(path, f"pin {pin} is already {used[pin]}", "each pin once",
                          "give one of them another pin")
        used.setdefault(pin, signal)


def bridges_have_outputs(board: Board) -> Iterator[Problem]:
    """Each bridge pin has a PWM output of its own. All run at driver.pwm, so sharing the frequency
    of a slice or timer is no conflict; sharing the output itself is.
    """
    chip = CHIPS.get(board.kind)
    if chip is None or board.pins is None:
        return
    used: dict[tuple[str, int, int], str] = {}
    for name in BRIDGES:
        pin = getattr(board.pins, name)
        if pin is None or pin not in chip.exists:
            continue
        path = ("board", "pins", name)
        output = pwm_output(board.kind, pin)
        if output is None:
            yield Problem(path, f"pin {pin} has no PWM", "a pin with a timer channel",
                          'name one such as "B6", "B7", "A0" or "A1"')
        elif output in used:
            unit, number, channel = output
            yield Problem(path, f"pin {pin} has the same PWM output as {used[output]}",
                          f"one signal for {unit} {number}, channel {channel}",
                          "take a pin of another output")
        else:
            used[output] = name
    if board.pins.bridge_b_reverse is not None and board.pins.bridge_b is None:
        yield Problem(("board", "pins", "bridge_b_reverse"), "a reverse side without its bridge",
                      "bridge_b first", "add bridge_b")


def buses_are_whole(board: Board) -> Iterator[Problem]:
    """Each bus has its pins; each converter its bus, address or chip select."""
    if board.kind == "virtual":
        if board.buses or converters(board):
            yield Problem(("board", "buses" if board.buses else "converters"),
                          "a virtual board has no buses", 'kind "virtual"', "remove them")
        return
    units: dict[tuple[str, int], str] = {}
    for name, bus in board.buses.items():
        yield from _bus(board.kind, name, bus)
        first = units.setdefault((bus.kind, bus.unit), name)
        if first != name:
            yield Problem(("board", "buses", name, "unit"), f"{bus.kind} {bus.unit} is {first}'s",
                          "each peripheral once", "join both buses, or take another unit")
    for name, converter in converters(board).items():
        yield from _converter(board, name, converter)


def _bus(kind: str, name: str, bus: Bus) -> Iterator[Problem]:
    path: Key = ("board", "buses", name)
    if bus.kind == "i2c" and bus.frequency > 1e6:
        yield Problem((*path, "frequency"), "too fast for I2C", "at most 1 MHz, fast-mode plus",
                      "lower it")
    for role in ("sda", "scl", "sck", "mosi", "miso"):
        pin = getattr(bus, role)
        if role not in _ROLES[bus.kind]:
            if pin is not None:
                yield Problem((*path, role), f"means nothing on {bus.kind}",
                              "only " + ", ".join(_ROLES[bus.kind]), "remove it")
        elif pin is None:
            yield Problem((*path, role), "missing", f'an {bus.kind} bus has "{role}"', "add it")
        elif not bus_pin(kind, bus.kind, role, bus.unit, pin):
            yield Problem((*path, role), f"pin {pin} cannot be {role} of {bus.kind} {bus.unit}",
                          f"a pin whose functions on {kind} list it", "name another pin or unit")


def _converter(board: Board, name: str, row: Converter) -> Iterator[Problem]:
    path: Key = ("board", "converters", name)
    bus = board.buses.get(row.bus)
    wanted = "spi" if row.interface == "spi" else "i2c"
    if bus is None:
        yield Problem((*path, "bus"), "no such bus", ", ".join(board.buses) or "[board.buses.NAME]",
                      "name one of [board.buses]")
    elif bus.kind != wanted:
        yield Problem((*path, "bus"), f'interface "{row.interface}" needs an {wanted} bus',
                      f"{row.bus} is {bus.kind}", "name another bus or interface")
    needed = "chip_select" if wanted == "spi" else "address"
    if getattr(row, needed) is None:
        yield Problem((*path, needed), "missing", f'interface "{row.interface}" needs it', "add it")
    if board.pins is not None and getattr(board.pins, name, None) is not None:
        yield Problem(path, f"{name} has a pin of its own too", "one source for each channel",
                      f"remove this converter or board.pins.{name}")


def sensors_are_wired(board: Board, sensors: Sensors) -> Iterator[Problem]:
    """Every sensor comes from a pin or a converter, and none of those comes from nowhere."""
    if board.pins is None:
        return
    for name in type(board.converters).model_fields:
        pin = getattr(board.pins, name)
        there = pin is not None or getattr(board.converters, name) is not None
        path: Key = ("board", "pins" if pin is not None else "converters", name)
        sensor: Any = getattr(sensors, name, None)
        if sensor is not None and not there:
            yield Problem(("board", "pins", name), "missing", f"[sensors.{name}] needs a pin or a "
                          f"converter", f"add {name} to [board.pins] or [board.converters.{name}]")
        elif there and (sensor is None or name not in CHANNELS):
            yield Problem(path, f"wired, but there is no [sensors.{name}]",
                          "a sensor for each analogue input", f"add [sensors.{name}] or remove it")


def enable_can_be_dropped(board: Board, limits: Limits) -> Iterator[Problem]:
    """A hard timer drops enable when the loop stalls; where none can, an external one-shot does."""
    chip = CHIPS.get(board.kind)
    if chip is None or board.pins is None:
        return
    path: Key = ("limits", "deadman")
    if limits.deadman is False:
        if board.pins.one_shot is None:
            yield Problem(path, "nothing drops enable when the firmware hangs, but a watchdog "
                          "seconds later", "a deadman, or pins.one_shot",
                          "wire an external retriggerable one-shot between pins.one_shot and the "
                          "driver's enable, or take deadman = false away")
    elif not chip.hard_timer:
        yield Problem(path, f"{board.kind} has no hard timer that could drop enable",
                      "deadman = false, with an external one-shot",
                      "write deadman = false and wire a one-shot to pins.one_shot")
    elif board.tick > DEADMAN_TICK:
        yield Problem(("board", "tick"), "the deadman lets go before the next tick",
                      f"at most {show(DEADMAN_TICK, 's')}", "a shorter tick")
