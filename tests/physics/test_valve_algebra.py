"""Valves, chamber and vessels at work against the algebra of check-valve pumps.

The slug is made a piston: an inertance so great that no pressure changes its flow, set by the test.
"""

from __future__ import annotations

import pytest
from system_values import CMH2O, RIG, bench, value

from lodestroke.plant import Params, Plant, params_from_rig
from lodestroke.plant import layout as k
from lodestroke.plant.valves import series_collapse

HUGE = 1e30
STROKE_S = 0.4
SETTLE_S = 0.2


def pump(v: dict[str, float], outlet_cmh2o: float | None = None) -> Params:
    """An ideal pump: great vessels at their heads, quick valves that do not leak."""
    places = {
        "SLUG_INERTANCE": HUGE, "SPRING_V": 0.0, "C_CH": v["chamber_compliance_m3_per_Pa"],
        "C_OUT": 1e-3, "HEAD_IN": v.get("inlet_cmH2O", 0.0) * CMH2O, "X_MAX": 1.0, "SUBSTEPS": 40,
        "HEAD_OUT": (v.get("outlet_cmH2O", 0.0) if outlet_cmh2o is None else outlet_cmh2o) * CMH2O,
    }
    for side, short in (("inlet", "IN"), ("outlet", "OUT")):
        cracking = v[f"cracking_{side}_cmH2O"]
        places[f"CRACK_{short}"] = cracking * CMH2O
        places[f"CLOSE_{short}"] = v.get(f"closing_{side}_cmH2O", cracking) * CMH2O
        places[f"LEAK_{short}"] = HUGE
        places[f"COLLAPSE_{short}"] = 1e9
    places |= {"R_IN": 1e10, "R_VO": 1e10, "L_IN": 1e7, "L_VO": 1e7}
    return bench(**places)


def stroke(plant: Plant, volume_ul: float) -> None:
    """Push (or pull) so much, then wait until the valves have closed."""
    tick = plant.params.p[k.TICK_S]
    plant.y[k.Q] = volume_ul * 1e-9 / STROKE_S
    for _ in range(round(STROKE_S / tick)):
        plant.step(0, 0, 0)
    plant.y[k.Q] = 0.0
    for _ in range(round(SETTLE_S / tick)):
        plant.step(0, 0, 0)


def delivered_ul(params: Params, stroke_ul: float) -> tuple[float, float]:
    """What the third cycle brings to the outlet and takes from the inlet, in ul."""
    plant = Plant(params)
    before = (0.0, 0.0)
    for cycle in range(3):
        if cycle == 2:
            before = plant.y[k.V_OUT], plant.y[k.V_IN]
        stroke(plant, stroke_ul)
        stroke(plant, -stroke_ul)
    return (plant.y[k.V_OUT] - before[0]) * 1e9, (plant.y[k.V_IN] - before[1]) * 1e9


@pytest.mark.parametrize("case", ["a", "b", "hysteresis.55"])
def test_a_cycle_delivers_what_the_volume_balance_says(case):
    v, expected, source = value(f"valve.delivered.{case}")
    out, into = delivered_ul(pump(v), v["stroke_volume_uL"])
    assert out == pytest.approx(expected, rel=2e-3), source
    assert into == pytest.approx(out, rel=2e-3)


def test_nothing_is_delivered_above_the_shut_off_head_and_something_below():
    v, shut_off, source = value("valve.shutoff.8uL")
    below, _ = delivered_ul(pump(v, shut_off - 2.0), v["stroke_volume_uL"])
    above, _ = delivered_ul(pump(v, shut_off + 2.0), v["stroke_volume_uL"])
    assert above == pytest.approx(0.0, abs=1e-9)
    assert below == pytest.approx(2.0 * CMH2O * v["chamber_compliance_m3_per_Pa"] * 1e9, rel=0.02), source


def test_an_open_valve_empties_the_chamber_in_the_outside_time():
    v, expected, source = value("valve.delivery_in_time")
    closing = v["closing_cmH2O"] * CMH2O
    plant = Plant(bench(
        SLUG_INERTANCE=HUGE, C_CH=v["chamber_compliance_m3_per_Pa"], C_OUT=1e-3, LEAK_IN=HUGE,
        HEAD_OUT=v["outlet_cmH2O"] * CMH2O, R_VO=v["valve_resistance_Pa_s_per_m3"], L_VO=1e7,
        CRACK_OUT=closing + 100.0, CLOSE_OUT=closing, COLLAPSE_IN=1e9, SUBSTEPS=100))
    plant.y[k.P_CH] = v["start_cmH2O"] * CMH2O
    plant.y[k.P_OUT] = v["outlet_cmH2O"] * CMH2O
    for _ in range(round(v["time_s"] / plant.params.p[k.TICK_S])):
        plant.step(0, 0, 0)
    # the valve is seen open after the first substep of 10 us, and its liquid starts within L/R
    assert plant.y[k.V_OUT] * 1e9 == pytest.approx(expected, rel=1e-3), source


@pytest.mark.parametrize("name", ["valve.series.collapse.even", "valve.series.collapse.unequal_leaks"])
def test_the_first_of_valves_in_series_collapses_where_the_outside_value_says(name):
    v, expected, source = value(name)
    got = series_collapse(v["collapse_cmH2O"], v["leak_resistance_relative"])
    assert got == pytest.approx(expected, rel=1e-12), source


def test_valves_in_series_crack_at_the_sum_and_collapse_by_their_leaks():
    v, expected, source = value("valve.series.cracking.uneven")
    first = RIG.valves.outlet[0]
    pair = [first.model_copy(update={"cracking": x * CMH2O, "leak": leak, "collapse": 60 * CMH2O})
            for x, leak in zip(v["cracking_cmH2O"], (1e13, 3e13), strict=True)]
    valves = RIG.valves.model_copy(update={"outlet": pair})
    p = params_from_rig(RIG.model_copy(update={"valves": valves})).p
    assert p[k.CRACK_OUT] == pytest.approx(expected * CMH2O), source
    assert p[k.COLLAPSE_OUT] == pytest.approx(value("valve.series.collapse.unequal_leaks")[1] * CMH2O)
