"""What no bench can be: relations between values that each look well on their own.

Each check names the sections that it needs and runs when they could be read, so that one bad
section does not hide what is wrong in the others.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from typing import Any

from ..units import show
from . import checks_pins as pins
from . import checks_work as work
from .models_board import Board, Driver
from .models_limits import Limits
from .models_pump import Channel, Coil, Inlet, Outlet, Slug, Spring, Valves
from .models_sensors import Sensor, Sensors
from .problems import Problem

_CHECKS: list[tuple[tuple[str, ...], Callable[..., Iterator[Problem]]]] = []
_Check = Callable[..., Iterator[Problem]]


def check(*sections: str) -> Callable[[_Check], _Check]:
    """Register a check of these sections."""
    def register(function: _Check) -> _Check:
        _CHECKS.append((sections, function))
        return function
    return register


check("coils", "slug", "limits", "valves", "inlet", "outlet")(work.coil_reaches_cracking)
check("valves", "inlet", "outlet")(work.sides_hold_each_other)
check("coils", "limits", "board")(work.heat_can_be_guarded)
check("sensors", "limits")(work.differences_in_range)
check("coils")(work.winding_is_metal)
check("board")(pins.pins_are_usable)
check("board")(pins.bridges_have_outputs)
check("board")(pins.buses_are_whole)
check("board", "sensors")(pins.sensors_are_wired)
check("board", "limits")(pins.enable_can_be_dropped)


def rig_problems(good: dict[str, Any]) -> list[Problem]:
    """All problems between the sections that could be read."""
    found: list[Problem] = []
    for sections, function in _CHECKS:
        if all(name in good for name in sections):
            found.extend(function(*(good[name] for name in sections)))
    return found


def _order(
    path: tuple[str | int, ...], low: float, high: float, unit: str, what: str
) -> Iterator[Problem]:
    """low must be below high; the problem is told at `path`."""
    if not low < high:
        yield Problem(path, what, bound=f"below {show(high, unit)}",
                      try_="swap the values or mend one of them")


@check("board")
def _board(board: Board) -> Iterator[Problem]:
    tick_us = board.tick * 1e6
    if abs(tick_us - round(tick_us)) > 1e-6 * tick_us:
        yield Problem(("board", "tick"), "tick is no whole number of microseconds",
                      "a multiple of 1 us", f'write "{round(tick_us)} us"')
    if board.kind == "virtual" and board.pins is not None:
        yield Problem(("board", "pins"), "a virtual board has no pins", 'kind "virtual"',
                      "remove the pins, or name the board's kind")
    if board.kind != "virtual" and board.pins is None:
        yield Problem(("board", "pins"), "missing", f"kind {board.kind} needs its pins",
                      "see the shipped rig of this kind of board in hil_configs/")


@check("coils")
def _coils(coils: list[Coil]) -> Iterator[Problem]:
    for i, coil in enumerate(coils):
        if coil.inner_radius >= coil.outer_radius:
            yield Problem(("coils", i, "outer_radius"), "the winding has no thickness",
                          f"above the inner radius, {show(coil.inner_radius, 'm')}",
                          "swap inner_radius and outer_radius, or mend one")


@check("coils", "channel")
def _coil_round_channel(coils: list[Coil], channel: Channel) -> Iterator[Problem]:
    if channel.shape == "circle":
        half = channel.radius or 0.0
    else:
        half = math.hypot(channel.width or 0.0, channel.height or 0.0) / 2
    for i, coil in enumerate(coils):
        if half and coil.inner_radius < half:
            yield Problem(("coils", i, "inner_radius"), "the channel does not fit into the coil",
                          f"at least {show(half, 'm')}, the channel's half-width",
                          "mend the coil's inner radius or the channel")


@check("coils", "driver", "limits")
def _supply_reaches_current(coils: list[Coil], driver: Driver, limits: Limits) -> Iterator[Problem]:
    for coil in coils:
        ohm = coil.resistance + driver.source_resistance
        most = driver.duty_max * driver.supply / ohm
        if limits.current > most:
            yield Problem(("limits", "current"), "the supply cannot drive this current",
                          f"at most {show(most, 'A')} = duty_max x {show(driver.supply, 'V')} / "
                          f"{show(ohm, 'ohm')}", "lower the current or raise the supply")
            return


@check("coils", "sensors")
def _second_coil(coils: list[Coil], sensors: Sensors) -> Iterator[Problem]:
    if len(coils) == 2 and sensors.coil_b is None:
        yield Problem(("sensors", "coil_b"), "missing", "two coils need two current sensors",
                      "add [sensors.coil_b]")
    if len(coils) == 1 and sensors.coil_b is not None:
        yield Problem(("sensors", "coil_b"), "a current sensor without a coil",
                      "as many current sensors as coils", "remove it, or add the second coil")


@check("channel")
def _channel(channel: Channel) -> Iterator[Problem]:
    needed = ("radius",) if channel.shape == "circle" else ("width", "height")
    for name in ("radius", "width", "height"):
        given = getattr(channel, name) is not None
        if name in needed and not given:
            yield Problem(("channel", name), "missing", f'shape "{channel.shape}" needs it',
                          "add it")
        if given and name not in needed:
            yield Problem(("channel", name), f'means nothing for shape "{channel.shape}"',
                          "only " + " and ".join(needed), "remove it")


@check("slug", "channel")
def _slug_in_channel(slug: Slug, channel: Channel) -> Iterator[Problem]:
    if slug.travel > 4 * slug.length:
        yield Problem(("slug", "travel"), "the slug travels much farther than it is long",
                      f"at most {show(4 * slug.length, 'm')}, four slug lengths",
                      "check the unit of travel and length")
    if channel.length and slug.length >= channel.length:
        yield Problem(("slug", "length"), "the slug is longer than the channel",
                      f"below {show(channel.length, 'm')} less its travel",
                      "mend slug.length or channel.length")
    elif channel.length and slug.length + slug.travel > channel.length:
        yield Problem(("slug", "length"), "slug and travel do not fit into the channel",
                      f"at most {show(channel.length - slug.travel, 'm')} for this channel",
                      "mend slug.length, slug.travel or channel.length")


@check("spring", "coils", "slug", "channel")
def _spring(spring: Spring, coils: list[Coil], slug: Slug, channel: Channel) -> Iterator[Problem]:
    if spring.kind == "none":
        if len(coils) < 2:
            yield Problem(("spring",), "nothing brings the slug back",
                          "an air spring or a second coil", 'add [spring] kind = "air"')
        return
    if spring.volume is None:
        yield Problem(("spring", "volume"), "missing", "an air spring has a volume", "add it")
    elif channel.area_m2 and spring.volume <= channel.area_m2 * slug.travel / 2:
        yield Problem(("spring", "volume"), "the stroke sweeps more than the air spring holds",
                      f"above {show(channel.area_m2 * slug.travel / 2, 'm^3')}",
                      "a larger volume or a shorter travel")


@check("valves")
def _valves(valves: Valves) -> Iterator[Problem]:
    for side, row in (("inlet", valves.inlet), ("outlet", valves.outlet)):
        for i, valve in enumerate(row):
            path = ("valves", side, i)
            yield from _order((*path, "closing"), valve.closing, valve.cracking, "Pa",
                              "the valve closes above its cracking pressure")
            if valve.collapse <= valve.cracking:
                yield Problem((*path, "collapse"), "the valve collapses before it cracks",
                              f"above cracking, {show(valve.cracking, 'Pa')}",
                              "check both pressures and their units")
            if valve.leak <= valve.resistance:
                yield Problem((*path, "leak"), "the valve leaks backwards more than it passes",
                              f"above {valve.resistance:g} Pa*s/m^3, the open resistance",
                              "check both resistances")


@check("limits")
def _soft_before_hard(limits: Limits) -> Iterator[Problem]:
    for name in ("outlet_reverse", "inlet_reverse", "chamber_high", "outlet_high"):
        pair = getattr(limits, name)
        yield from _order(("limits", name, "soft"), pair.soft, pair.hard, "Pa",
                          "soft level is not below the hard one")
    low = limits.chamber_low
    if not low.soft > low.hard:
        yield Problem(("limits", "chamber_low", "soft"), "soft level is not above the hard one",
                      f"above {show(low.hard, 'Pa')}", "swap the values or mend one of them")
    heat = limits.coil_temperature
    yield from _order(("limits", "coil_temperature", "soft"), heat.soft, heat.hard, "degC",
                      "soft level is not below the hard one")
    yield from _order(("limits", "current"), limits.current, limits.over_current, "A",
                      "greatest target is not below the over-current level")
    yield from _order(("limits", "chamber_low", "hard"), low.hard, limits.chamber_high.soft, "Pa",
                      "chamber's low level is not below its high one")
    yield from _order(("limits", "outlet_low"), limits.outlet_low, limits.outlet_high.soft, "Pa",
                      "outlet's low level is not below its high one")


@check("limits", "board")
def _limit_times(limits: Limits, board: Board) -> Iterator[Problem]:
    if limits.tick_late < 2 * board.tick:
        yield Problem(("limits", "tick_late"), "every tick would be late",
                      f"at least {show(2 * board.tick, 's')}, two ticks", "a longer time")


@check("limits", "ambient")
def _limit_heat(limits: Limits, ambient: Any) -> Iterator[Problem]:
    if limits.coil_temperature.soft <= ambient.temperature:
        yield Problem(("limits", "coil_temperature", "soft"), "the coil is hot before it starts",
                      f"above the room, {ambient.temperature:g} degC", "raise the limit")


@check("limits", "valves", "board")
def _reverse_before_collapse(limits: Limits, valves: Valves, board: Board) -> Iterator[Problem]:
    """Only where there is a valve to lose: a simulated bench may show what would happen."""
    if board.kind == "virtual":
        return
    for side, row in (("outlet", valves.outlet), ("inlet", valves.inlet)):
        least = min(valve.collapse for valve in row)
        pair = getattr(limits, f"{side}_reverse")
        yield from _order(("limits", f"{side}_reverse", "hard"), pair.hard, least, "Pa",
                          f"the trip comes after the {side} valve's collapse")


@check("limits", "inlet", "outlet")
def _heads_inside_limits(limits: Limits, inlet: Inlet, outlet: Outlet) -> Iterator[Problem]:
    if not limits.outlet_low < outlet.head < limits.outlet_high.soft:
        yield Problem(("outlet", "head"), "the outlet's head is outside its limits",
                      f"{show(limits.outlet_low, 'Pa')} to {show(limits.outlet_high.soft, 'Pa')}",
                      "mend the head or limits.outlet_high, limits.outlet_low")
    if not limits.chamber_low.soft < inlet.head < limits.chamber_high.soft:
        yield Problem(("inlet", "head"), "the inlet's head is outside the chamber's limits",
                      f"{show(limits.chamber_low.soft, 'Pa')} to "
                      f"{show(limits.chamber_high.soft, 'Pa')}", "mend the head or the limits")


@check("sensors")
def _sensor_scales(sensors: Sensors) -> Iterator[Problem]:
    for name in type(sensors).model_fields:
        sensor: Sensor | None = getattr(sensors, name)
        if sensor is None:
            continue
        path = ("sensors", name)
        low, high = getattr(sensor, "low"), getattr(sensor, "high")  # noqa: B009
        if low >= high:
            yield Problem((*path, "high"), "the sensor's range is empty", f"above low, {low:g}",
                          "swap low and high")
        if sensor.counts_low >= sensor.counts_high:
            yield Problem((*path, "counts_high"), "the sensor's counts do not rise",
                          f"above counts_low, {sensor.counts_low}", "swap them, and low with high")
        if sensor.counts_high > sensor.counts_full:
            yield Problem((*path, "counts_high"), "beyond the converter's full scale",
                          f"at most counts_full, {sensor.counts_full}", "mend one of them")


@check("sensors", "limits", "inlet", "driver")
def _sensor_ranges(
    sensors: Sensors, limits: Limits, inlet: Inlet, driver: Driver
) -> Iterator[Problem]:
    """A limit that the sensor cannot reach would never trip."""
    chamber_top = max(limits.chamber_high.hard, limits.inlet_reverse.hard + inlet.head)
    yield from _covers("chamber", sensors.chamber, limits.chamber_low.hard, chamber_top, "Pa")
    yield from _covers("outlet", sensors.outlet, limits.outlet_low, limits.outlet_high.hard, "Pa")
    lowest = -limits.over_current if driver.bridge == "full" else 0.0
    for name in ("coil_a", "coil_b"):
        if getattr(sensors, name) is not None:
            yield from _covers(name, getattr(sensors, name), lowest, limits.over_current, "A")
    if limits.supply_low is not None and sensors.supply is None:
        yield Problem(("limits", "supply_low"), "no supply sensor to watch it",
                      "needs [sensors.supply]", "add the sensor or remove the limit")
    if sensors.supply is not None:
        yield from _covers("supply", sensors.supply, limits.supply_low or 0.0, driver.supply, "V")


def _covers(name: str, sensor: Any, low: float, high: float, unit: str) -> Iterator[Problem]:
    if sensor.low > low:
        yield Problem(("sensors", name, "low"), "the sensor does not reach the lower limit",
                      f"at most {show(low, unit)}", "another sensor or a closer limit")
    if sensor.high < high:
        yield Problem(("sensors", name, "high"), "the sensor does not reach the upper limit",
                      f"at least {show(high, unit)}", "another sensor or a closer limit")
