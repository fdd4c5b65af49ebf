"""Rigs that cannot work at all, told with the numbers; what would only disappoint, `check` warns about.

Bounds here are generous on purpose: a field no coil of these turns exceeds, a swing without any drag,
heat that no interlock is quick enough for. Source of each formula beside it.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

from ..units import show
from .coefficients import THERMAL_EVERY
from .models_board import Board
from .models_limits import Limits
from .models_pump import Coil, Inlet, Outlet, Slug, Valve, Valves
from .models_sensors import Sensors
from .problems import Problem

_MU0 = 1.25663706127e-6      # N/A2, CODATA 2022
_COPPER_MELTS_C = 1084.6     # ITS-90 freezing point of copper, 1084.62 degC


def push_bound_pa(coils: list[Coil], slug: Slug, current_a: float) -> float:
    """No push is above this, Pa: one face in the middle of every coil at once, the other in no field.

    Central field of a thick solenoid (Montgomery, Solenoid Magnet Design, 1969); the magnetic pressure
    mu0 Ms²/(3 chi) ln(sinh u / u) of a Langevin liquid, u = 3 chi H / Ms (Rosensweig 1985).
    """
    field = sum(_central_field(coil, current_a) for coil in coils)
    ms, chi = slug.saturation_magnetisation, slug.initial_susceptibility
    u = 3.0 * chi * field / ms
    log_sinhc = u * u / 6.0 if u < 1e-2 else (
        u + math.log1p(-math.exp(-2.0 * u)) - math.log(2.0 * u))
    return _MU0 * ms * ms / (3.0 * chi) * log_sinhc


def _central_field(coil: Coil, current_a: float) -> float:
    half, thick = coil.length / 2.0, coil.outer_radius - coil.inner_radius
    if thick <= 0.0:
        return 0.0                           # told elsewhere
    top = coil.outer_radius + math.hypot(coil.outer_radius, half)
    low = coil.inner_radius + math.hypot(coil.inner_radius, half)
    return current_a * coil.turns / (2.0 * thick) * math.log(top / low)


def coil_reaches_cracking(
    coils: list[Coil], slug: Slug, limits: Limits, valves: Valves, inlet: Inlet, outlet: Outlet,
) -> Iterator[Problem]:
    """Twice the greatest push, all that a swing without drag can reach, must open the outlet."""
    needed = (outlet.head - inlet.head + sum(valve.cracking for valve in valves.outlet)
              + slug.hysteresis)
    most = 2.0 * push_bound_pa(coils, slug, limits.current)
    if most <= needed:
        yield Problem(
            ("coils", 0, "turns"), "the coil cannot open the outlet valve", try_="more current or turns, a "
            "stronger liquid, a lower head or cracking pressure",
            bound=f"a push of {show(float(f'{needed:.3g}'), 'Pa')} (outlet less inlet head, cracking, "
                  f"contact lines); full current gives less than {show(float(f'{most:.3g}'), 'Pa')} "
                  "even in a swing without drag")


def sides_hold_each_other(valves: Valves, inlet: Inlet, outlet: Outlet) -> Iterator[Problem]:
    """While one side opens, the other has to hold: heads and cracking against collapse."""
    across = outlet.head - inlet.head
    for side, holding, opening in (("inlet", valves.inlet, valves.outlet),
                                   ("outlet", valves.outlet, valves.inlet)):
        needed = across + sum(valve.cracking for valve in opening)
        holds = _series_collapse(holding)
        if holds <= needed:
            other = "outlet" if side == "inlet" else "inlet"
            yield Problem(
                ("valves", side, 0, "collapse"),
                f"the {side} valve collapses before the {other} opens",
                f"above {show(float(f'{needed:.3g}'), 'Pa')} on this side: outlet less inlet head and "
                f"the {other}'s cracking", "a lower head, valves in series, or check the units")


def _series_collapse(valves: list[Valve]) -> float:
    """Reverse leaks share the pressure (resistances in series)."""
    whole = sum(valve.leak for valve in valves)
    return min(valve.collapse * whole / valve.leak for valve in valves)


def heat_can_be_guarded(coils: list[Coil], limits: Limits, board: Board) -> Iterator[Problem]:
    """From the hard level on, the board needs one step of its estimate and the stop's ramp."""
    acts = THERMAL_EVERY * board.tick + limits.stop_ramp
    hard = limits.coil_temperature.hard
    for i, coil in enumerate(coils):
        hot_ohm = coil.resistance * (1.0 + coil.temperature_coefficient * (hard - 20.0))
        reached = hard + limits.current**2 * hot_ohm / coil.winding_heat * acts
        if reached >= _COPPER_MELTS_C:
            yield Problem(
                ("coils", i, "winding_heat"), "the wire melts before the interlock acts",
                f"below {_COPPER_MELTS_C:g} degC within {show(acts, 's')}; full current takes it to "
                f"{reached:.4g} degC", "check resistance, winding_heat and limits.current")


def differences_in_range(sensors: Sensors, limits: Limits) -> Iterator[Problem]:
    """A difference of two readings can only trip where both ranges together reach its level."""
    chamber, outlet = sensors.chamber, sensors.outlet
    pairs = [("outlet", outlet.high - chamber.low, limits.outlet_reverse.hard, "outlet_reverse")]
    if sensors.inlet is not None:
        pairs.append(("chamber", chamber.high - sensors.inlet.low, limits.inlet_reverse.hard,
                      "inlet_reverse"))
    for name, widest, level, limit in pairs:
        if widest < level:
            yield Problem(("sensors", name, "high"), f"the sensors do not reach limits.{limit}",
                          f"a difference of {show(level, 'Pa')}; together they show at most "
                          f"{show(widest, 'Pa')}", "other sensors or a closer limit")


def winding_is_metal(coils: list[Coil]) -> Iterator[Problem]:
    """Ten times more copper than the window holds is a mistake of units, not a doubtful coil."""
    for i, coil in enumerate(coils):
        length = math.pi * coil.turns * (coil.inner_radius + coil.outer_radius)
        copper = length / 58e6 / coil.resistance                # IEC 60028, 1/58 ohm mm2/m
        window = coil.length * (coil.outer_radius - coil.inner_radius)
        if window > 0.0 and coil.turns * copper > 10.0 * window:
            yield Problem(
                ("coils", i, "resistance"), "no metal winds such a coil",
                f"above {show(float(f'{coil.resistance * coil.turns * copper / window:.3g}'), 'ohm')}: "
                "copper that fills its whole window", "check turns, resistance and the window")
