"""Driver, sagging supply, winding and body: the right-hand side integrated by SciPy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from system_values import RIG, bench, value

from lodestroke.plant import Params, Plant, params_from_rig, rhs
from lodestroke.plant import layout as k
from lodestroke.plant.coil import interpolate, steady_winding_c
from lodestroke.plant.system import bus_voltage

HUGE = 1e30  # an inductance that keeps a current, a heat capacity that keeps a temperature


def electric(params: Params, drive: np.ndarray, start: dict[int, float], times: list[float]) -> np.ndarray:
    """Currents and temperatures (the first six places) at the times, shape (6, times)."""
    plant = Plant(params)
    y0 = plant.y.copy()
    for place, number in start.items():
        y0[place] = number

    def f(_t: float, z: np.ndarray) -> np.ndarray:
        y, dy = y0.copy(), np.zeros_like(y0)
        y[: k.TB_B + 1] = z
        rhs(y, params.p, plant.m, drive, params.table_a, params.table_b, dy)
        return dy[: k.TB_B + 1]

    found = solve_ivp(f, (0.0, times[-1]), y0[: k.TB_B + 1], method="LSODA", t_eval=times,
                      rtol=1e-11, atol=1e-13)
    return found.y


def test_current_rises_as_the_outside_value_says_after_a_step():
    v, expected, source = value("drive.step.long")
    params = bench(SUPPLY=v["voltage_V"], R_SOURCE=0.0, R20_A=v["resistance_ohm"], ALPHA_A=0.0,
                   L_A=v["inductance_H"])
    found = electric(params, np.array([1.0, 0.0, 1.0]), {}, v["times_s"])
    assert found[k.I_A] == pytest.approx(expected, rel=1e-7), source


@pytest.mark.parametrize("name", ["drive.sag.a", "drive.sag.b"])
def test_supply_sags_behind_its_resistance_as_the_outside_value_says(name):
    v, (bus, current, _), source = value(name)
    params = bench(SUPPLY=v["supply_V"], R_SOURCE=v["source_ohm"], R20_A=v["coil_ohm"], ALPHA_A=0.0)
    drive = np.array([v["duty"], 0.0, 1.0])
    found = electric(params, drive, {}, [1.0])
    assert found[k.I_A, -1] == pytest.approx(current, rel=1e-8), source
    y = Plant(params).y
    y[k.I_A] = current
    assert bus_voltage(y, params.p, drive) == pytest.approx(bus, rel=1e-8), source


def test_two_coils_share_one_sagging_supply():
    v, (_, first, second), source = value("drive.sag.two_coils")
    params = bench(SUPPLY=v["supply_V"], R_SOURCE=v["source_ohm"], R20_A=v["coil1_ohm"],
                   R20_B=v["coil2_ohm"], ALPHA_A=0.0, ALPHA_B=0.0)
    found = electric(params, np.array([v["duty1"], v["duty2"], 1.0]), {}, [1.0])
    assert found[k.I_A, -1] == pytest.approx(first, rel=1e-8), source
    assert found[k.I_B, -1] == pytest.approx(second, rel=1e-8), source


def test_current_of_a_full_bridge_is_driven_to_zero_in_the_outside_time_and_stays_there():
    v, (time_ms, _, _), source = value("drive.decay.fast_decay")
    params = bench(FULL_BRIDGE=1.0, SUPPLY=v["opposing_V"], DIODE=0.0, R20_A=v["resistance_ohm"],
                   ALPHA_A=0.0, L_A=v["inductance_H"], TICK_S=1e-5, SUBSTEPS=10)
    plant = Plant(params)
    plant.y[k.I_A] = v["current_A"]
    ticks = 0
    while plant.y[k.I_A] > 0.0:
        plant.step(0, 0, 0)
        ticks += 1
    # one tick, and what is left below the current at which the model's diode stops
    slack = 0.01 + 1e3 * 5e-3 * v["inductance_H"] / v["opposing_V"]
    assert ticks * 1e-2 == pytest.approx(time_ms, abs=slack), source
    plant.step(0, 0, 0)
    assert plant.y[k.I_A] == 0.0


@pytest.mark.parametrize("name", ["heat.two_node.heating.b", "heat.two_node.cooling"])
def test_winding_and_body_follow_the_two_node_value_at_constant_power(name):
    v, expected, source = value(name)
    params = bench(WB_A=v["Rwb_K_per_W"], BA_A=v["Rba_K_per_W"], CW_A=v["Cw_J_per_K"],
                   CB_A=v["Cb_J_per_K"], AMBIENT_C=v["ambient_degC"], R20_A=1.0, ALPHA_A=0.0, L_A=HUGE)
    start = {k.I_A: v["power_W"] ** 0.5, k.TW_A: v["start_winding_degC"], k.TB_A: v["start_body_degC"]}
    found = electric(params, np.array([0.0, 0.0, 1.0]), start, v["times_s"])
    got = found[[k.TW_A, k.TB_A]].T
    assert got == pytest.approx(np.array(expected), rel=1e-7), source


def test_steady_winding_temperature_meets_the_outside_value():
    v, (_, _, winding, _), source = value("heat.two_node.constants.a")
    got = steady_winding_c(v["power_W"], v["ambient_degC"], v["Rwb_K_per_W"], v["Rba_K_per_W"])
    assert got == pytest.approx(winding, rel=1e-9), source


def test_fields_of_two_coils_add_where_the_rig_puts_them():
    v, expected, source = value("coil.pair.opposed")
    coils = [RIG.coils[0].model_copy(update={
        "turns": v["turns"], "length": v["length_m"], "inner_radius": v["inner_radius_m"],
        "outer_radius": v["outer_radius_m"], "position": side * v["centre_spacing_m"] / 2.0})
        for side in (-1, 1)]
    params = params_from_rig(RIG.model_copy(update={"coils": coils}))
    assert params.p[k.COILS] == 2
    at = (params.p[k.TABLE_FROM], params.p[k.TABLE_STEP], v["z_from_middle_m"])
    got = v["current_A"] * (interpolate(params.table_a, *at) - interpolate(params.table_b, *at))
    assert got == pytest.approx(expected, rel=1e-8), source
