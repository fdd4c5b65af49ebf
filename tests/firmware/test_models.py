"""Thermal estimate and regulator against the physics that they stand for, solved another way."""

from __future__ import annotations

import math

import numpy as np
import pytest
from benches import RIG, Bench
from scipy.linalg import expm
from test_small_int import checked_limits

from lodeboard import clock
from lodeboard.regulator import Regulator
from lodeboard.thermal import Coil
from lodestroke.rig import limits_values

V = limits_values(RIG)
COIL = RIG.coils[0]
AMBIENT_C = RIG.ambient.temperature


def exact_winding_c(power_w: float, seconds: float) -> float:
    """Two lumped nodes under constant power, by the matrix exponential: dT/dt = A T + b."""
    leak, out = 1 / COIL.winding_to_body, 1 / COIL.body_to_air
    a = np.array([[-leak / COIL.winding_heat, leak / COIL.winding_heat],
                  [leak / COIL.body_heat, -(leak + out) / COIL.body_heat]])
    b = np.array([power_w / COIL.winding_heat, 0.0])
    rise = np.linalg.solve(a, (expm(a * seconds) - np.eye(2)) @ b)
    return float(AMBIENT_C + rise[0])


def estimated_winding_c(current_ma: int, seconds: float, alpha_ppm: int = 0) -> float:
    coil = Coil()
    coil.load(checked_limits())
    coil.alpha_ppm = alpha_ppm
    coil.r20_mohm = V["r20_mohm"]
    for _ in range(round(seconds / RIG.board.tick)):
        coil.step(current_ma)
    return coil.winding_mc / 1000


@pytest.mark.parametrize("seconds", [5.0, 40.0, 150.0])
def test_estimate_follows_the_exact_two_node_network(seconds):
    current_ma = 800
    power_w = (current_ma / 1000) ** 2 * COIL.resistance
    exact = exact_winding_c(power_w, seconds)
    estimate = estimated_winding_c(current_ma, seconds)
    # coefficients are whole numbers: within 3 % of the rise, and 0.3 K for what rounding hides
    assert estimate == pytest.approx(exact, abs=0.3 + 0.03 * (exact - AMBIENT_C))


def test_estimate_counts_the_copper_that_gets_hotter():
    cold = estimated_winding_c(1000, 60.0)
    warm = estimated_winding_c(1000, 60.0, V["alpha_ppm"])
    # at some 45 K of rise copper (3930 ppm/K, IEC 60028) has about a tenth more resistance
    assert 1.02 < (warm - AMBIENT_C) / (cold - AMBIENT_C) < 1.3


def test_estimate_cools_to_ambient_and_no_further():
    coil = Coil()
    coil.load(checked_limits())
    coil.winding_mcq = coil.body_mcq = 90_000 << 10
    for _ in range(64 * 60_000):
        coil.ticks = 63                       # every step updates
        coil.step(0)
        if coil.winding_mc < V["ambient_mc"] + 1000:
            break
    assert V["ambient_mc"] <= coil.winding_mc < V["ambient_mc"] + 1000


def closed_loop(targets: list[int], resistance: float) -> list[float]:
    """Current in mA of an R-L coil under the regulator, exact over each tick of constant voltage."""
    regulator = Regulator()
    regulator.load(checked_limits())
    ohm = resistance + RIG.driver.source_resistance
    decay = math.exp(-RIG.board.tick * ohm / COIL.inductance)
    current, seen = 0.0, []
    for target in targets:
        duty = regulator.step(target, round(current))
        volts = duty / 32768 * RIG.driver.supply
        current = current * decay + (1 - decay) * 1000 * volts / ohm
        if RIG.driver.bridge == "half":
            current = max(0.0, current)
        seen.append(current)
    return seen


@pytest.mark.parametrize("error", [0.8, 1.0, 1.3])
def test_current_settles_on_its_target_without_much_overshoot(error):
    target = round(RIG.limits.current * 400)
    seen = closed_loop([target] * 400, COIL.resistance * error)
    assert seen[-1] == pytest.approx(target, abs=3)
    assert max(seen) < target * (1.05 if error == 1.0 else 1.3)


def test_integral_does_not_wind_up_where_the_supply_is_not_enough():
    high = round(RIG.limits.current * 1000)
    seen = closed_loop([high] * 400 + [high // 4] * 60, COIL.resistance * 10)
    assert max(seen[:400]) < high                        # clamped all the time
    assert seen[-1] == pytest.approx(min(high // 4, seen[399]), rel=0.1)


def test_a_run_crosses_the_clock_s_wrap_unharmed():
    bench = Bench()
    bench.go()
    assert bench.hal.time_us > clock.MASK_US - 2_100_000
    bench.ticks(2500)
    assert bench.hal.time_us < 1_000_000
    assert bench.state == "running"
    assert bench.board.late_ticks == 0
    assert bench.board.worst_gap_us == 1000
