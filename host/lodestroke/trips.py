"""Words for the board's trips: what happened, what usually causes it, what to do next."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from lodeboard import limits, trips


@dataclass(frozen=True)
class Words:
    """One trip in words."""

    what: str
    causes: str
    next: str
    unit: str


WORDS = {
    trips.OUTLET_REVERSE: Words(
        "reverse pressure across the outlet valve reached its limit",
        "outlet pressure high while the slug returns: too much current, too fast a fall, a blocked outlet",
        "lower the current, soften the fall, or open the outlet; then run again",
        "Pa",
    ),
    trips.INLET_REVERSE: Words(
        "reverse pressure across the inlet valve reached its limit",
        "the chamber is pushed hard and its outlet does not give way",
        "lower the current or soften the rise; look for a blocked outlet valve",
        "Pa",
    ),
    trips.CHAMBER_HIGH: Words(
        "chamber pressure reached its upper limit",
        "a push against a closed or blocked outlet",
        "lower the current; look at outlet valve and tubing",
        "Pa",
    ),
    trips.CHAMBER_LOW: Words(
        "chamber pressure reached its lower limit",
        "a return stroke with a blocked or starved inlet",
        "soften the fall; look at inlet valve and supply",
        "Pa",
    ),
    trips.OUTLET_HIGH: Words(
        "outlet pressure reached its upper limit",
        "a closed or clogged line behind the pump",
        "open the line, then run again",
        "Pa",
    ),
    trips.OUTLET_LOW: Words(
        "outlet pressure fell to its lower limit",
        "suction on the outlet, or a sensor off its zero",
        "look at the line behind the pump and at the sensor's zero",
        "Pa",
    ),
    trips.OVER_CURRENT: Words(
        "coil current reached its limit",
        "a shorted coil or driver, wrong current calibration",
        "measure the coil's resistance cold before anything else",
        "mA",
    ),
    trips.COIL_HOT: Words(
        "the coil's estimated temperature reached its limit",
        "too much duty, or no way for heat to leave",
        "let it cool; lower current or duty",
        "m°C",
    ),
    trips.COIL_OPEN: Words(
        "current stays far below its target",
        "a broken coil wire, a loose plug, no supply",
        "look at coil, plug and supply with the driver off",
        "mA",
    ),
    trips.SENSOR_RANGE: Words(
        "a sensor reads outside its range",
        "a broken or shorted sensor wire, no sensor supply",
        "look at that sensor's wiring",
        "counts",
    ),
    trips.SENSOR_STUCK: Words(
        "a sensor has not moved by one count for too long",
        "a frozen converter or a disconnected input",
        "look at that sensor; power it down and up",
        "counts",
    ),
    trips.SENSOR_JUMP: Words(
        "a sensor moved further in one tick than is possible",
        "a loose contact or interference",
        "look at that sensor's plug, shield and cable route",
        "units",
    ),
    trips.SUPPLY_LOW: Words(
        "the supply voltage fell to its limit",
        "a weak or shared supply, thin cables",
        "measure the supply under load",
        "mV",
    ),
    trips.HOST_SILENT: Words(
        "the host was silent for too long",
        "the bench computer stopped, slept or lost the cable",
        "look at computer and cable; endure --resume carries on",
        "ms",
    ),
    trips.TICK_LATE: Words(
        "a control tick came too late",
        "flash writes, a stalled interpreter, a very busy computer behind a virtual board",
        "run again; if it stays, report it with the run",
        "µs",
    ),
    trips.LIMITS_CORRUPT: Words(
        "the limits in memory changed by themselves",
        "failing memory or a fault of ours",
        "reset the board; if it stays, replace it",
        "index",
    ),
    trips.PROGRAM_CORRUPT: Words(
        "the program in memory changed or has no end",
        "failing memory or a fault of ours",
        "reset the board; if it stays, replace it",
        "index",
    ),
    trips.STOP_INPUT: Words(
        "the stop input was pressed",
        "somebody pressed it",
        "find out why, release it, run again",
        "",
    ),
    trips.CUTOUT_OPEN: Words(
        "the external cut-out is open",
        "the coil got hot enough to open it, or its wire is off",
        "let the coil cool, reset the cut-out; look at its wire",
        "",
    ),
    trips.WATCHDOG_RESET: Words(
        "the board was reset by its watchdog",
        "the firmware hung",
        "report it with the run; look at the supply for dips",
        "",
    ),
    trips.FIRMWARE_FAULT: Words(
        "the firmware stopped on a fault of ours",
        "a fault of ours; its traceback is in the notes",
        "report it with the run",
        "",
    ),
}


def name(code: int) -> str:
    """A trip's name, as in JSON and in --clear."""
    return trips.TABLE[code][0] if code in trips.TABLE else f"code_{code}"


def channel_name(channel: int) -> str:
    """A channel's name; empty where a trip has none."""
    return limits.CHANNELS[channel] if channel < limits.N_CHANNELS else ""


def sentence(trip: dict[str, Any]) -> str:
    """One line: what, where, value, limit, when."""
    words = WORDS.get(trip["code"])
    if words is None:
        return f"trip code {trip['code']} at tick {trip['tick']}"
    figures = (
        f": {trip['value']} {words.unit}, limit {trip['limit']} {words.unit}" if words.unit else ""
    )
    return f"{words.what}{figures}, tick {trip['tick']}, category {trip['stop_category']} stop"


def as_json(trip: dict[str, Any]) -> dict[str, Any]:
    """A trip record as --json gives it."""
    words = WORDS.get(trip["code"])
    return {
        "code": trip["code"],
        "name": name(trip["code"]),
        "tick": trip["tick"],
        "channel": trip["channel"],
        "channel_name": channel_name(trip["channel"]),
        "value": trip["value"],
        "limit": trip["limit"],
        "unit": words.unit if words else "",
        "stop_category": trip["stop_category"],
        "step": trip["step"],
        "trip_serial": trip["trip_serial"],
        "what": words.what if words else "",
    }
