"""Uncertainty helpers against published values; check-ups against traces of known truth."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from lodestroke.analysis import checkups, cycles, uncertainty
from lodestroke.rig import load_rig
from lodestroke.rows import SAMPLE

RIG = load_rig(Path(__file__).resolve().parents[3] / "hil_configs" / "bench-sim.toml")
VALUES = {v["id"]: v for v in json.loads(
    Path(__file__).with_name("values.json").read_text(encoding="utf-8"))}


def close(value_id: str, got: float) -> None:
    value = VALUES[value_id]
    assert got == pytest.approx(value["expected"], rel=value.get("rel_tol") or 1e-9,
                                abs=value.get("abs_tol") or 0.0), value["source"]


def test_type_a_meets_the_guides_twenty_readings():
    readings = np.array(VALUES["gum.typeA.mean"]["inputs"]["readings_degC"])
    mean, u = uncertainty.type_a(readings)
    close("gum.typeA.mean", mean)
    close("gum.typeA.s", u * math.sqrt(len(readings)))


def test_line_meets_a_certified_fit_and_the_guides_thermometer():
    v = VALUES["strd.norris.b0"]["inputs"]
    fit = uncertainty.line(np.array(v["x"]), np.array(v["y"]))
    close("strd.norris.b0", fit.intercept)
    close("strd.norris.b1", fit.slope)
    close("strd.norris.residual_sd", fit.residual_sd)
    v = VALUES["gum.h3.y1"]["inputs"]
    fit = uncertainty.line(np.array(v["thermometer_reading_degC"]) - 20.0, np.array(v["correction_degC"]))
    close("gum.h3.y1", fit.intercept)
    close("gum.h3.y2", fit.slope)
    close("gum.h3.u_y1", fit.u_intercept)
    close("gum.h3.s", fit.residual_sd)


def test_a_line_through_one_place_is_refused():
    with pytest.raises(ValueError, match="different x"):
        uncertainty.line(np.array([2.0, 2.0]), np.array([1.0, 3.0]))


def trace(n: int, **columns) -> np.ndarray:
    rows = np.zeros(n, SAMPLE)
    rows["tick"] = np.arange(n)
    for name, values in columns.items():
        rows[name] = np.round(values).astype(int)
    return rows


def noise(n: int, seed: int, sd: float = 4.0) -> np.ndarray:
    return np.random.default_rng(seed).normal(0.0, sd, n)


@pytest.mark.parametrize("truth", [180.0, 300.0, 420.0])
def test_cracking_is_recovered_from_a_ramp_whose_valve_opens(truth):
    n = 2000
    target = np.concatenate([np.linspace(0, 1200, 850), np.linspace(1200, 0, 850), np.zeros(300)])
    chamber = np.concatenate([np.linspace(0, 1500, 850), np.linspace(1500, -800, 850), np.full(300, -120)])
    outlet = np.full(n, 200.0)
    opened = np.flatnonzero(chamber - outlet >= truth)[0]
    outlet[opened:] += 60.0 * (1 - np.exp(-np.arange(n - opened) / 80.0))
    chamber[opened:850] = outlet[opened:850] + 0.7 * truth
    chamber[850:1700] = np.linspace(chamber[849], -800, 850)
    inlet_opens = 850 + np.flatnonzero(-chamber[850:] >= 300)[0]
    chamber[inlet_opens:] = -120.0
    rows = trace(n, target_a_ma=target, chamber_pa=chamber + noise(n, 1), outlet_pa=outlet + noise(n, 2))
    result = checkups.evaluate("cracking", rows, RIG)
    assert result["ok"], result["why"]
    assert result["outlet_cracking_pa"] == pytest.approx(truth, abs=2 * result["u_outlet_cracking_pa"])
    assert result["inlet_cracking_pa"] == pytest.approx(300.0, abs=2 * result["u_inlet_cracking_pa"])


def test_cracking_says_so_when_no_valve_opened():
    n = 2000
    ramp = np.concatenate([np.linspace(0, 1200, 850), np.linspace(1200, 0, 850), np.zeros(300)])
    rows = trace(n, target_a_ma=ramp, chamber_pa=0.1 * ramp + noise(n, 1), outlet_pa=200 + noise(n, 2))
    result = checkups.evaluate("cracking", rows, RIG)
    assert not result["ok"]
    assert "did not open" in result["why"]


def test_stroke_volume_is_recovered_from_outlet_pressure_with_what_ran_out_meanwhile():
    # three strokes of 5 µl each into a vessel that drains through its restriction all the time
    n, tick_s = 2040, RIG.board.tick
    compliance, restriction, head = RIG.outlet.compliance, RIG.outlet.restriction, RIG.outlet.head
    pressure, volume = np.zeros(n), 5e-9
    p = head
    target = np.zeros(n)
    for k in range(n):
        if k % 680 < 240:
            target[k] = 1000
        inflow = volume / 0.1 if 20 <= k % 680 < 120 else 0.0
        p += (inflow - (p - head) / restriction) / compliance * tick_s
        pressure[k] = p
    rows = trace(n, target_a_ma=target, outlet_pa=pressure + noise(n, 3))
    result = checkups.evaluate("stroke_volume", rows, RIG)
    assert result["strokes"] == 3
    assert result["stroke_volume_ul"] == pytest.approx(5.0, abs=2 * result["u_stroke_volume_ul"])
    assert result["u_stroke_volume_ul"] < 1.0


def test_resistance_and_temperature_are_recovered_from_a_steady_current():
    # hot winding of the guide's resistance method: R2/R1 and (R2/R1)(k + t1) - k, k = 235
    ohm, current = 9.0, 0.9
    duty = current * ohm / (RIG.driver.supply - RIG.driver.source_resistance * current * 0.27)
    n = 700
    on = np.arange(n) < 520
    rows = trace(n, target_a_ma=on * 900, coil_a_ma=on * 900 + noise(n, 4),
                 duty_a_q15=on * duty * 32767)
    result = checkups.evaluate("coil_resistance", rows, RIG)
    assert result["coil_resistance_ohm"] == pytest.approx(ohm, abs=2 * result["u_coil_resistance_ohm"])
    hot = ohm / 8.0 * 255.0 - 235.0
    assert result["winding_degc"] == pytest.approx(hot, abs=2 * result["u_winding_degc"])


@pytest.mark.parametrize("value_id", ["wire.inferred.cold_start", "wire.inferred.warm_start"])
def test_inferred_temperature_uses_the_published_constant(value_id):
    v = VALUES[value_id]["inputs"]
    got = v["R2_ohm"] / v["R1_ohm"] * (checkups.K_COPPER + v["t1_degC"]) - checkups.K_COPPER
    close(value_id, got)


def test_zero_flow_reads_what_the_outlet_says():
    n = 1000
    rows = trace(n, outlet_pa=RIG.outlet.head + 80 - 0.01 * np.arange(n) + noise(n, 5))
    result = checkups.evaluate("zero_flow", rows, RIG)
    assert result["zero_flow_ul_per_min"] == pytest.approx(
        75.0 * 60e9 / RIG.outlet.restriction, abs=2 * result["u_zero_flow_ul_per_min"])
    assert result["outlet_drift_pa_per_s"] == pytest.approx(-10.0, abs=1.5)


@pytest.mark.parametrize("item", ["cracking", "stroke_volume", "coil_resistance", "zero_flow"])
def test_too_few_samples_give_a_reason_and_no_number(item):
    result = checkups.evaluate(item, trace(10), RIG)
    assert result["ok"] is False
    assert "samples" in result["why"]


def rows_of(n: int) -> list[dict[str, int]]:
    return [{"cycle": k + 1, "duration_ticks": 250, "outlet_mean_pa": 500, "outlet_max_pa": 700,
             "outlet_reverse_max_pa": 1200, "inlet_reverse_max_pa": 1500, "chamber_max_pa": 1500,
             "chamber_min_pa": -700, "winding_cc": 2500 + k, "held_ticks": 0, "coil_peak_ma": 900}
            for k in range(n)]


def test_margins_take_two_standard_uncertainties_off_the_collapse_pressure():
    margin = cycles.margins_pa(rows_of(3), RIG)
    u = math.hypot(RIG.sensors.outlet.uncertainty, RIG.sensors.chamber.uncertainty)
    assert margin["outlet"][0] == pytest.approx(RIG.valves.outlet[0].collapse - 1200 - 2 * u)
    assert margin["inlet"][0] == pytest.approx(
        RIG.valves.inlet[0].collapse - 1500 - 2 * RIG.sensors.chamber.uncertainty)


def test_summary_counts_time_volume_and_flow():
    figures = cycles.summary(rows_of(40), RIG)
    assert figures["cycles"] == 40
    assert figures["pumping_s"] == pytest.approx(10.0)
    flow = (500 - RIG.outlet.head) / RIG.outlet.restriction * 60e9
    assert figures["mean_flow_ul_per_min"] == pytest.approx(flow, abs=0.01)
    assert figures["volume_ul"] == pytest.approx(flow / 6.0, abs=0.01)
    assert cycles.summary([], RIG) == {}


def test_trend_finds_a_known_slope_inside_its_confidence():
    x = np.arange(1, 201, dtype=float)
    y = 40.0 - 0.002 * x + noise(200, 9, 0.05)
    found = cycles.trend(x, y)
    assert found is not None
    assert abs(found["per_1000"] + 2.0) < 1.5 * found["half_width_95"]
    assert cycles.trend(x[:5], y[:5]) is None
