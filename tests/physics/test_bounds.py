"""Corners of the plant: stiff rigs, end stops, wear, sensors at their ends, where compiled code lives."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from system_values import RIG, bench

from lodestroke.errors import RigError
from lodestroke.plant import Plant, params_from_rig, warm_up
from lodestroke.plant import layout as k
from lodestroke.plant.cache import sources_hash
from lodestroke.plant.sensors import normal
from lodestroke.plant.steps import SUBSTEP_S, mode_rates


def with_coil(**values: float):
    return RIG.model_copy(update={"coils": [RIG.coils[0].model_copy(update=values)]})


def test_a_quick_coil_gets_smaller_substeps_and_settles_at_its_ohmic_current():
    params = params_from_rig(with_coil(inductance=50e-6))
    assert params.p[k.TICK_S] / params.p[k.SUBSTEPS] < SUBSTEP_S / 10
    plant = Plant(params)
    for _ in range(5):
        plant.step(9000, 0, 1)
    d = 9000 / 32767.0
    ohm = 8.0 * (1.0 + 0.00393 * (plant.y[k.TW_A] - 20.0)) + RIG.driver.source_resistance * d * d
    assert plant.y[k.I_A] == pytest.approx(d * RIG.driver.supply / ohm, rel=1e-4)


def test_a_pump_too_stiff_to_simulate_is_refused_in_five_parts():
    with pytest.raises(RigError) as refusal:
        params_from_rig(with_coil(inductance=1e-9))
    assert "coils.inductance" in refusal.value.at
    assert all((refusal.value.what, refusal.value.got, refusal.value.bound, refusal.value.try_))


def test_the_fastest_mode_of_the_bench_is_its_coils_and_the_step_stays_below_one_rate():
    rates = mode_rates(params_from_rig(RIG).p)
    assert max(rates, key=rates.__getitem__) == "coils.resistance / coils.inductance"
    assert max(rates.values()) * SUBSTEP_S < 1.0


@settings(max_examples=25, deadline=None)
@given(
    compliance=st.floats(1e-13, 1e-9), volume=st.floats(1e-8, 1e-5), inductance=st.floats(1e-4, 0.1),
    viscosity=st.floats(1e-4, 1.0), duty=st.integers(-32767, 32767), enable=st.booleans(),
)
def test_no_rig_makes_the_plant_leave_the_finite_or_the_slug_its_channel(
    compliance, volume, inductance, viscosity, duty, enable
):
    rig = with_coil(inductance=inductance).model_copy(update={
        "chamber": RIG.chamber.model_copy(update={"compliance": compliance}),
        "spring": RIG.spring.model_copy(update={"volume": volume}),
        "slug": RIG.slug.model_copy(update={"viscosity": viscosity})})
    plant = Plant(params_from_rig(rig))
    most = RIG.driver.supply / RIG.coils[0].resistance
    for tick in range(60):
        plant.step(duty if tick < 40 else 0, 0, enable)
        assert np.isfinite(plant.y).all()
        assert abs(plant.y[k.X]) <= plant.params.p[k.X_MAX]
        assert 0.0 <= plant.y[k.I_A] <= 1.01 * most


def test_volume_balance_closes_through_the_end_stops():
    plant = Plant(bench(X_MAX=4e-3))
    met = False
    for tick in range(2000):
        plant.step(20000 if tick % 250 < 100 else 0, 0, 1)
        met = met or plant.y[k.X] == plant.params.p[k.X_MAX]
    assert met
    y, p = plant.y, plant.params.p
    assert y[k.V_OUT] > 1e-8
    stored = y[k.P_CH] * p[k.C_CH]
    assert y[k.X] * p[k.AREA] + y[k.V_IN] - y[k.V_OUT] == pytest.approx(stored, abs=1e-6 * y[k.V_OUT])


def test_wear_of_liquid_and_magnet_shows_in_the_stroke():
    reached = {}
    for name, places in (("new", {}), ("thick", {"DRIFT_DRAG": 100.0}), ("thin", {"DRIFT_M_S": -0.5})):
        plant = Plant(bench(**places))
        plant.m[k.STROKES] = 1.0
        for _ in range(25):
            plant.step(9800, 0, 1)
        reached[name] = plant.y[k.X]
    assert reached["new"] > 1.2 * max(reached["thick"], reached["thin"]) > 0.0


def test_a_lost_magnetisation_stops_the_pump_and_never_turns_it_round():
    plant = Plant(bench(DRIFT_M_S=-1.0))
    plant.m[k.STROKES] = 5.0
    for _ in range(50):
        plant.step(9800, 0, 1)
    assert plant.y[k.X] == pytest.approx(0.0, abs=1e-6)    # the outlet's leak moves it a little


def test_sensors_stop_at_the_ends_of_their_converters():
    plant = Plant(params_from_rig(RIG))
    plant.y[k.P_CH] = 1e6
    for _ in range(10):
        plant.y[k.P_CH] = 1e6
        plant.step(0, 0, 0)
    assert plant.counts[0] == RIG.sensors.chamber.counts_full


def test_noise_is_decided_by_seed_channel_and_tick_alone_and_is_standard_normal():
    drawn = np.array([normal(np.uint64(3), 1, tick) for tick in range(20000)])
    again = [normal(np.uint64(3), 1, tick) for tick in reversed(range(20000))]
    assert drawn.tolist() == again[::-1]
    # five standard errors of mean, standard deviation and lag-1 correlation (JCGM 100, E.4.3)
    n = len(drawn)
    assert abs(drawn.mean()) < 5 / n**0.5
    assert abs(drawn.std() - 1.0) < 5 / (2 * n) ** 0.5
    assert abs(np.corrcoef(drawn[1:], drawn[:-1])[0, 1]) < 5 / n**0.5
    assert normal(np.uint64(4), 1, 0) != drawn[0] != normal(np.uint64(3), 2, 0)


def test_warming_up_says_nothing_when_the_cache_is_warm():
    warm_up(RIG)
    said: list[str] = []
    warm_up(RIG, said.append)
    assert said == []


def where_compiled(environment: dict[str, str], imports: str) -> Path:
    code = f"{imports}; import lodestroke.plant, numba; print(numba.config.CACHE_DIR)"
    done = subprocess.run([sys.executable, "-c", code], env={**os.environ, **environment},
                          capture_output=True, text=True, check=True, timeout=120)
    return Path(done.stdout.strip())


def test_compiled_code_lives_in_the_users_cache_under_a_hash_of_the_sources(tmp_path):
    clean = {"XDG_CACHE_HOME": str(tmp_path), "HOME": str(tmp_path), "NUMBA_CACHE_DIR": ""}
    for imports in ("import os", "import numba"):
        folder = where_compiled(clean, imports)
        assert tmp_path in folder.parents
        assert folder.name == sources_hash()
    chosen = tmp_path / "chosen"
    assert where_compiled({**clean, "NUMBA_CACHE_DIR": str(chosen)}, "import os") == chosen


def test_compiled_code_goes_to_a_temporary_folder_when_the_cache_cannot_be_written(tmp_path):
    blocked = tmp_path / "file"
    blocked.write_text("not a folder", encoding="utf-8")
    folder = where_compiled({"XDG_CACHE_HOME": str(blocked), "HOME": str(blocked), "NUMBA_CACHE_DIR": ""},
                            "import os")
    assert folder.is_dir()
    assert tmp_path not in folder.parents
    shutil.rmtree(folder)
