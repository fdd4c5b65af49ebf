"""The whole pump: balances, another solver, determinism, and the two-node heat of coil and board."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from lodeboard import limits as board_limits
from lodeboard import thermal
from lodestroke.plant import Plant, params_from_rig, rhs
from lodestroke.plant import layout as k
from lodestroke.rig import limits_blob, load_rig

RIG = load_rig(Path(__file__).resolve().parents[2] / "hil_configs" / "bench-sim.toml")
VALUES = {v["id"]: v for v in json.loads(
    Path(__file__).with_name("values.json").read_text(encoding="utf-8"))}


def duty_for(current_a: float) -> int:
    return round(current_a * 8.15 / RIG.driver.supply * 32767)


def pump(plant: Plant, cycles: int, current_a: float = 1.0, on: int = 100, period: int = 250) -> None:
    duty = duty_for(current_a)
    for tick in range(cycles * period):
        plant.step(duty if tick % period < on else 0, 0, 1)


def test_plant_matches_radau_over_a_stretch_without_events():
    # SciPy's Radau on the same right-hand side: the slug rings against the closed chamber
    plant = Plant(params_from_rig(RIG))
    duty = duty_for(0.3)
    params = plant.params
    y0, modes = plant.y.copy(), plant.m.copy()
    for _ in range(60):
        plant.step(duty, 0, 1)
    assert plant.m[k.MODE_IN] == modes[k.MODE_IN] == k.CLOSED
    assert plant.m[k.MODE_OUT] == modes[k.MODE_OUT] == k.CLOSED
    drive = np.array([duty / 32767.0, 0.0, 1.0])

    def f(_t: float, y: np.ndarray) -> np.ndarray:
        dy = np.zeros_like(y)
        rhs(y, params.p, modes, drive, params.table_a, params.table_b, dy)
        return dy

    found = solve_ivp(f, (0.0, 0.06), y0, method="Radau", rtol=1e-10, atol=1e-14)
    for place, scale in ((k.I_A, 1.0), (k.X, 1e-3), (k.P_CH, 1e3), (k.Q, 1e-5), (k.TW_A, 1.0)):
        assert plant.y[place] == pytest.approx(found.y[place, -1], abs=2e-6 * scale)


def test_halving_the_substep_moves_a_cycle_little():
    results = []
    for factor in (1, 2, 4):
        params = params_from_rig(RIG)
        params.p[k.SUBSTEPS] *= factor
        plant = Plant(params)
        pump(plant, 8)
        results.append(plant.truth())
    coarse, middle, fine = (r["delivered_m3"] for r in results)
    # valves switch between substeps: first order in the substep until events are located
    assert abs(coarse - fine) / fine < 0.02
    assert abs(middle - fine) < abs(coarse - fine)


def test_volume_balance_closes():
    plant = Plant(params_from_rig(RIG))
    pump(plant, 40)
    y, p = plant.y, plant.params.p
    chamber = y[k.P_CH] * p[k.C_CH]
    assert y[k.X] * p[k.AREA] + y[k.V_IN] - y[k.V_OUT] == pytest.approx(chamber, abs=1e-6 * y[k.V_OUT])
    outlet = (y[k.P_OUT] - p[k.HEAD_OUT]) * p[k.C_OUT]
    assert y[k.V_OUT] - y[k.V_LOAD] == pytest.approx(outlet, abs=1e-6 * y[k.V_OUT])


def test_same_seed_same_numbers_and_other_seeds_other_pumps():
    traces = {}
    for seed in (0, 0, 1, 2):
        plant = Plant.from_rig(RIG, seed)
        counts = []
        for tick in range(400):
            plant.step(duty_for(1.2) if tick < 200 else 0, 0, 1)
            counts.append(plant.counts.copy())
        key = np.concatenate(counts).tobytes()
        assert traces.setdefault(seed, key) == key
    assert len(set(traces.values())) == 3


def test_noise_has_the_stated_standard_deviation():
    plant = Plant(params_from_rig(RIG), seed=7)
    readings = []
    for _ in range(4000):
        plant.step(0, 0, 0)
        readings.append(int(plant.counts[0]))
    sensor = RIG.sensors.chamber
    counts_per_pa = (sensor.counts_high - sensor.counts_low) / (sensor.high - sensor.low)
    noise_counts = sensor.noise * counts_per_pa
    # standard error of a standard deviation: s / sqrt(2 n) (JCGM 100, E.4.3), five of them; and
    # rounding adds 1/12 count squared
    expected = (noise_counts**2 + 1 / 12) ** 0.5
    assert np.std(readings) == pytest.approx(expected, abs=5 * expected / (2 * 4000) ** 0.5)


def test_overdrive_without_interlocks_collapses_the_outlet_valve_and_it_re_forms():
    plant = Plant(params_from_rig(RIG))
    duty = duty_for(2.8)
    for tick in range(24 * 344):
        plant.step(duty if tick % 344 < 172 else 0, 0, 1)
    truth = plant.truth()
    assert truth["collapses_outlet"] >= 1
    assert truth["min_margin_pa"] < 0
    for _ in range(2000):
        plant.step(0, 0, 0)
    assert plant.m[k.MODE_OUT] == k.CLOSED


def test_half_bridge_never_drives_current_backwards_and_power_off_lets_it_decay():
    plant = Plant(params_from_rig(RIG))
    for _ in range(30):
        plant.step(duty_for(2.0), 0, 1)
    assert plant.y[k.I_A] == pytest.approx(2.0, rel=0.02)
    for _ in range(30):
        plant.step(0, 0, 0)
        assert plant.y[k.I_A] >= 0.0
    assert plant.y[k.I_A] == 0.0


def test_coil_heat_of_the_right_hand_side_meets_the_two_node_value_at_constant_voltage():
    value = VALUES["heat.two_node.constant_voltage.a"]
    v = value["inputs"]
    params = params_from_rig(RIG)
    p = params.p.copy()
    p[k.R20_A], p[k.L_A], p[k.ALPHA_A] = v["R20_ohm"], 1e-2, v["alpha20_per_K"]
    p[k.WB_A], p[k.CW_A] = v["Rwb_K_per_W"], v["Cw_J_per_K"]
    p[k.BA_A], p[k.CB_A] = v["Rba_K_per_W"], v["Cb_J_per_K"]
    p[k.SUPPLY], p[k.R_SOURCE], p[k.AMBIENT_C] = v["voltage_V"], 0.0, v["ambient_degC"]
    p[k.M_S] = 1.0                      # a slug that hardly feels the field: heat is what we look at
    plant = Plant(params)
    y0 = plant.y.copy()
    y0[k.TW_A : k.TB_B + 1] = v["ambient_degC"]
    y0[k.I_A] = v["voltage_V"] / v["R20_ohm"]
    y0[k.P_OUT] = p[k.HEAD_OUT]
    drive = np.array([1.0, 0.0, 1.0])

    def f(_t: float, y: np.ndarray) -> np.ndarray:
        dy = np.zeros_like(y)
        rhs(y, p, plant.m, drive, params.table_a, params.table_b, dy)
        return dy[: k.TB_A + 1]

    def thin(t: float, z: np.ndarray) -> np.ndarray:
        y = y0.copy()
        y[: k.TB_A + 1] = z
        return f(t, y)

    found = solve_ivp(thin, (0.0, v["times_s"][-1]), y0[: k.TB_A + 1], method="LSODA",
                      t_eval=v["times_s"], rtol=1e-9, atol=1e-10)
    for n, (winding, body) in enumerate(value["expected"]):
        assert found.y[k.TW_A, n] == pytest.approx(winding, abs=2e-3), value["source"]
        assert found.y[k.TB_A, n] == pytest.approx(body, abs=2e-3), value["source"]


def test_the_boards_estimate_follows_the_two_node_value_at_constant_current_from_the_safe_side():
    value = VALUES["heat.two_node.constant_current.a"]
    v = value["inputs"]
    coil = RIG.coils[0].model_copy(update={
        "resistance": v["R20_ohm"], "temperature_coefficient": v["alpha20_per_K"],
        "winding_to_body": v["Rwb_K_per_W"], "winding_heat": v["Cw_J_per_K"],
        "body_to_air": v["Rba_K_per_W"], "body_heat": v["Cb_J_per_K"]})
    rig = RIG.model_copy(update={
        "coils": [coil], "ambient": RIG.ambient.model_copy(update={"temperature": v["ambient_degC"]})})
    blob, crc32 = limits_blob(rig)
    store = board_limits.Limits()
    assert store.blob.put(0, blob, len(blob))
    assert store.seal(len(blob), crc32, rig.fingerprint)
    estimate = thermal.Coil()
    estimate.load(store)
    ticks = 0
    for (winding, _), time_s in zip(value["expected"][:3], v["times_s"][:3], strict=True):
        while ticks < round(time_s * 1000):
            estimate.step(round(v["current_A"] * 1000))
            ticks += 1
        rise = winding - v["ambient_degC"]
        got = estimate.winding_mc / 1000.0 - v["ambient_degC"]
        assert -0.02 * rise - 0.2 <= got - rise <= 0.12 * rise + 0.5, value["source"]
