"""What must hold in every run, whatever the pump's tolerances and whichever wire fails.

Each is a pure function of a Trace: None, or what is Broken with its figures. Where a fault shows the
board a plausible untruth (a pressure that is stuck, offset, noisy or exchanged with another), no
firmware could know better: then margin is held only up to the fault's first tick, and what remains
is that the board acts on what it was shown. A coil's temperature likewise, where the current's
sensor is offset or noisy. Sensors that are open or shorted blind nothing: they hold throughout.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from lodeboard import states

from .trace import Trace

GONE_A = 0.01  # a coil current that counts as none
COIL_ALLOWANCE_C = 10.0  # estimate against truth: copper's spread, and the ramp of a category 1 stop
_DRIVEN = (states.RUNNING, states.PAUSED, states.STOPPING)


@dataclass(frozen=True)
class Broken:
    """An invariant that did not hold: where, what was found, what was promised."""

    invariant: str
    tick: int
    got: str
    bound: str

    def figures(self) -> str:
        """In one line."""
        return f"tick {self.tick}: {self.got}; {self.bound}"


def _ramp_ticks(trace: Trace) -> int:
    """The longest category 1 stop: full target to zero, one step a tick, and the tick of the trip."""
    return -(-trace.limits["target_max_ma"] // trace.limits["ramp_ma"]) + 1


def current_only_while_allowed(trace: Trace) -> Broken | None:
    """Enable only while running, paused or ramping down, and current gone soon after it drops."""
    name = "current_only_while_allowed"
    rows = trace.samples
    wires = trace.wires
    off_from = len(wires)
    for trip in trace.trips:
        ramp = _ramp_ticks(trace) if trip["stop_category"] == 1 else 0
        off_from = min(off_from, trip["tick"] + ramp)
    for end in trace.ends:
        ramp = _ramp_ticks(trace) if trace.trips else 0
        off_from = min(off_from, end["tick"] + ramp)
    driven = np.flatnonzero(wires["enable"][off_from:])
    if len(driven):
        tick = off_from + int(driven[0])
        return Broken(name, tick, "enable is on", f"off from tick {off_from} on")
    idle = rows[~np.isin(rows["state"], (*_DRIVEN, states.TRIPPED))]
    bad = idle[(idle["duty_a_q15"] != 0) | (idle["target_a_ma"] != 0)]
    if len(bad):
        got = f"duty {bad['duty_a_q15'][0]} in state {states.NAMES[bad['state'][0]]}"
        return Broken(name, int(bad["tick"][0]), got, "no drive outside running, paused, stopping")
    # off for decay_ticks in a row: the current must be gone
    on = np.flatnonzero(wires["enable"])
    last_on = int(on[-1]) if len(on) else -1
    late = np.flatnonzero(wires["current_a"][last_on + 1 + trace.decay_ticks :] > GONE_A)
    if len(late):
        tick = last_on + 1 + trace.decay_ticks + int(late[0])
        got = f"{wires['current_a'][tick] * 1e3:.0f} mA"
        return Broken(name, tick, got, f"gone {trace.decay_ticks} ticks after enable dropped")
    return None


def crossed_limit_ends_running(trace: Trace) -> Broken | None:
    """No sample that shows a hard limit crossed is still driven: the interlock acts in that tick."""
    rows, limit = trace.samples, trace.limits
    chamber, outlet = rows["chamber_pa"].astype(int), rows["outlet_pa"].astype(int)
    current = np.maximum(abs(rows["coil_a_ma"].astype(int)), abs(rows["coil_b_ma"].astype(int)))
    driven = np.isin(rows["state"], _DRIVEN) | (rows["duty_a_q15"] != 0)
    for what, value, bound in (
        ("outlet_reverse", outlet - chamber, limit["outlet_reverse_hard_pa"]),
        ("inlet_reverse", chamber - rows["inlet_pa"], limit["inlet_reverse_hard_pa"]),
        ("chamber_high", chamber, limit["chamber_high_hard_pa"]),
        ("chamber_low", -chamber, -limit["chamber_low_hard_pa"]),
        ("outlet_high", outlet, limit["outlet_high_hard_pa"]),
        ("outlet_low", -outlet, -limit["outlet_low_hard_pa"]),
        ("over_current", current, limit["over_current_ma"]),
    ):
        bad = np.flatnonzero(driven & (value >= bound))
        if len(bad):
            got = f"{what} {value[bad[0]]} in state {states.NAMES[rows['state'][bad[0]]]}"
            tick = int(rows["tick"][bad[0]])
            return Broken("crossed_limit_ends_running", tick, got, f"below {bound}, or no drive")
    hot = rows["winding_cc"].astype(int) * 10 >= limit["hot_hard_mc"]
    bad = np.flatnonzero(hot & np.isin(rows["state"], _DRIVEN))
    if len(bad):
        got = f"coil_hot {rows['winding_cc'][bad[0]] / 100:.2f} degC while driven"
        most = f"below {limit['hot_hard_mc'] / 1000:g} degC"
        return Broken("crossed_limit_ends_running", int(rows["tick"][bad[0]]), got, most)
    return None


def category_0_drops_at_once(trace: Trace) -> Broken | None:
    """From the tick of a category 0 trip on: target 0, duty 0, enable off."""
    for trip in trace.trips:
        if trip["stop_category"] != 0:
            continue
        after = trace.samples[trace.samples["tick"] >= trip["tick"]]
        bad = after[(after["target_a_ma"] != 0) | (after["duty_a_q15"] != 0)]
        wires = trace.wires[trace.wires["tick"] >= trip["tick"]]
        on = wires[(wires["enable"] != 0) | (wires["duty_a_q15"] != 0)]
        if len(bad) or len(on):
            tick = int(min([*bad["tick"][:1], *on["tick"][:1]]))
            got = f"still driven after {trip['name']}"
            bound = f"target, duty and enable 0 from tick {trip['tick']} on"
            return Broken("category_0_drops_at_once", tick, got, bound)
    return None


def open_cutout_drops_enable(trace: Trace) -> Broken | None:
    """A tick that saw the external cut-out open decides no drive, whatever else goes on."""
    bad = trace.wires[(trace.wires["inputs"] & 2 != 0) & (trace.wires["enable"] != 0)]
    if not len(bad):
        return None
    tick = int(bad["tick"][0])
    return Broken("open_cutout_drops_enable", tick, "enable is on", "off while the cut-out is open")


def margin_stays(trace: Trace) -> Broken | None:
    """The true margin of each valve never falls below zero, coil off or on; see above for blinding."""
    blind = min(
        (fault.start_tick for fault in trace.case.faults if fault.blinds_pressures()), default=None
    )
    wires = trace.wires if blind is None else trace.wires[trace.wires["tick"] < blind]
    bad = wires[wires["min_margin_pa"] < 0.0]
    if not len(bad):
        return None
    got = f"{trace.wires['min_margin_pa'][-1] if blind is None else bad['min_margin_pa'][-1]:.0f} Pa"
    return Broken("margin_stays", int(bad["tick"][0]), f"margin down to {got}", "never below 0 Pa")


def coil_stays_cool(trace: Trace) -> Broken | None:
    """The winding's true temperature stays below its hard limit and COIL_ALLOWANCE_C."""
    if any(fault.blinds_current() for fault in trace.case.faults):
        return None
    peak_c = trace.truth["peak_coil_c"]
    bound_c = trace.limits["hot_hard_mc"] / 1000.0 + COIL_ALLOWANCE_C
    if peak_c <= bound_c:
        return None
    tick = int(trace.wires["tick"][-1]) if len(trace.wires) else 0
    return Broken("coil_stays_cool", tick, f"{peak_c:.1f} degC", f"at most {bound_c:.1f} degC")


def cycles_have_no_hole(trace: Trace) -> Broken | None:
    """Cycle numbers run from 1 on, each once; what the board lost is told as a gap."""
    told = [(row["cycle"], row["cycle"], row["tick"]) for row in trace.cycles]
    told += [(first, last, 0) for first, last in trace.gaps]
    expected = 1
    for first, last, tick in sorted(told):
        if first != expected:
            bound = f"cycle {expected}"
            return Broken("cycles_have_no_hole", tick, f"cycle {first}", bound)
        expected = last + 1
    return None


def one_end(trace: Trace) -> Broken | None:
    """A run ends once, and latches at most one first-out trip."""
    tick = int(trace.wires["tick"][-1]) if len(trace.wires) else 0
    if len(trace.ends) != 1:
        return Broken("one_end", tick, f"{len(trace.ends)} ends", "one")
    if len(trace.trips) > 1:
        return Broken("one_end", tick, f"{len(trace.trips)} trips", "one first-out at most")
    return None


INVARIANTS: tuple[Callable[[Trace], Broken | None], ...] = (
    current_only_while_allowed,
    crossed_limit_ends_running,
    category_0_drops_at_once,
    open_cutout_drops_enable,
    margin_stays,
    coil_stays_cool,
    cycles_have_no_hole,
    one_end,
)


def judge(trace: Trace) -> list[Broken]:
    """Every invariant that this trace breaks."""
    return [broken for hold in INVARIANTS if (broken := hold(trace)) is not None]
