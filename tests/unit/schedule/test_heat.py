"""The static heat bound against closed forms and solvers of the two-node network.

Values: two-node balance Cw dTw/dt = P - (Tw - Tb)/Rwb, Cb dTb/dt = (Tw - Tb)/Rwb - (Tb - Ta)/Rba;
computed by modes at 50 digits, matrix exponential and an ODE solver, which agree.
"""

from __future__ import annotations

import numpy as np
import pytest

from lodeboard import program as board
from lodestroke.rig import Rig
from lodestroke.rig.models_pump import Coil
from lodestroke.schedule import Schedule, compile_program
from lodestroke.schedule.bounds import heat_bound
from lodestroke.schedule.heat import HeatBound, TwoNode, hot_resistance, steady_winding_c


def coil(wb: float, ba: float, cw: float, cb: float, ohm: float = 5.25) -> Coil:
    return Coil(turns=1, length=0.01, inner_radius=0.002, outer_radius=0.004, resistance=ohm,
                inductance=0.001, winding_to_body=wb, body_to_air=ba, winding_heat=cw, body_heat=cb)


A = coil(3.5, 14, 6, 38)
B = coil(8.2, 21, 3.4, 25)


@pytest.mark.parametrize(("part", "power", "expected"), [
    (A, 2.4, (18.0499209519, 618.950079048, 65 - 23, 56.6 - 23)),      # heat.two_node.constants.a
    (B, 1.3, (24.3998748871, 599.880125113, 64.96 - 27, 54.3 - 27)),   # heat.two_node.constants.b
])
def test_time_constants_and_steady_state(
    part: Coil, power: float, expected: tuple[float, ...]
) -> None:
    node = TwoNode(part)
    assert (*node.time_constants(), *node.steady(power)) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(("seconds", "winding", "body"), [
    (2, 27.7380074581, 27.0036263482), (20, 32.5186044598, 27.2855974858),
    (200, 43.5746331426, 33.9109896063), (2000, 63.8960346425, 53.2854834456),
])
def test_heating_at_constant_power(seconds: float, winding: float, body: float) -> None:
    # heat.two_node.heating.b: 1.3 W from 27 degC
    state = TwoNode(B).step(seconds, 1.3) @ np.array([0.0, 0.0, 1.0])
    assert state[:2] + 27 == pytest.approx([winding, body], rel=1e-8)


@pytest.mark.parametrize(("seconds", "winding", "body"), [
    (5, 88.0927261938, 62.7204655825), (60, 64.7680935359, 62.250776188),
    (600, 40.0489925539, 39.4705471255),
])
def test_cooling_from_hot(seconds: float, winding: float, body: float) -> None:
    # heat.two_node.cooling: from 95 and 62 degC in 23 degC
    state = TwoNode(A).step(seconds, 0.0) @ np.array([72.0, 39.0, 1.0])
    assert state[:2] + 23 == pytest.approx([winding, body], rel=1e-8)


def test_resistance_rises_with_temperature_as_copper_does() -> None:
    # IEC 60028: 6.4 ohm at 20 degC is 8.03488 ohm at 85 degC (0.00393 per K)
    assert hot_resistance(coil(1, 1, 1, 1, 6.4), 85.0) == pytest.approx(8.03488, rel=1e-9)


def test_steady_temperature_at_constant_current_and_its_runaway() -> None:
    # heat.constant_current.mild, .close, .beyond: 17.5 K/W, 5.25 ohm, 23 degC; runaway at
    # 1/sqrt(Rth R20 alpha20) = 1.66419820316 A
    assert steady_winding_c(A, 0.62**2, 23.0) == pytest.approx(64.4920109906, rel=1e-9)
    assert steady_winding_c(A, 1.35**2, 23.0) == pytest.approx(518.438629558, rel=1e-9)
    assert steady_winding_c(A, 1.9**2, 23.0) == float("inf")
    assert steady_winding_c(A, 1.6641982**2, 23.0) < float("inf")
    assert steady_winding_c(A, 1.6641983**2, 23.0) == float("inf")


def pulses(times: int, on_s: float, off_s: float, ma: int) -> list[tuple[int, ...]]:
    """Square pulses as records, 1 ms ticks; edges of one tick."""
    return [(board.LOOP, 0, 0, 0, 0, times), (board.SEG, 0, 0, ma, 0, 1),
            (board.SEG, 0, 0, ma, 0, round(1000 * on_s) - 1), (board.SEG, 0, 0, 0, 0, 1),
            (board.SEG, 0, 0, 0, 0, round(1000 * off_s) - 1), (board.NEXT, 0, 0, 0, 0, 0),
            (board.END, 0, 0, 0, 0, 0)]


def test_peak_under_pulses_is_that_of_the_periodic_state() -> None:
    # heat.duty.two_node.b: 4 W for 5 s of 12 s, 25 degC: 75.3954546306 degC at the pulse's end
    power, limit = 4.0, 80.0
    ma = round(1000 * (power / hot_resistance(B, limit)) ** 0.5)
    power = (ma / 1000) ** 2 * hot_resistance(B, limit)
    bound = HeatBound(pulses(2000, 5.0, 7.0, ma), 0.001, B, False, limit)  # type: ignore[arg-type]
    assert 25 + bound.run() * 4.0 / power == pytest.approx(75.3954546306, abs=0.02)


def test_loop_by_doubling_equals_turn_by_turn() -> None:
    rows = pulses(37, 5.0, 7.0, 800)
    flat = [row for _ in range(37) for row in rows[1:5]] + [rows[-1]]
    looped = HeatBound(rows, 0.001, B, False, 100.0)  # type: ignore[arg-type]
    plain = HeatBound(flat, 0.001, B, False, 100.0)  # type: ignore[arg-type]
    assert looped.run() == pytest.approx(plain.run(), rel=1e-12)
    assert looped.state == pytest.approx(plain.state, rel=1e-12)


def test_bound_is_never_below_a_fine_step_by_step_solution(bench: Rig) -> None:
    """Explicit steps of one tick with resistance following temperature stay below the bound."""
    plan = Schedule(waves={"w": {"current": 1.8, "rate": 2.0, "duty": 0.4}},
                    steps=[{"wave": "w", "cycles": 20}, {"rest": 3.0},
                           {"ramp": {"to": 2.0, "over": 2.0}}, {"rest": 1.0}])
    program = compile_program(plan, bench)
    from lodestroke.schedule.expand import expand

    part, room = bench.coils[0], bench.ambient.temperature
    winding = body = peak = room
    for ma in expand(program).a_ma:
        power = (ma / 1000) ** 2 * hot_resistance(part, winding)
        across = (winding - body) / part.winding_to_body
        body += 0.001 * (across - (body - room) / part.body_to_air) / part.body_heat
        winding += 0.001 * (power - across) / part.winding_heat
        peak = max(peak, winding)
    bound = heat_bound(program, bench)[0]
    assert peak <= bound <= room + 1.5 * (peak - room)
