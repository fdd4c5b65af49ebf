"""Dry-runs: the same trace in both simulated places, and interlocks that catch what is real."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from functools import cache
from pathlib import Path

import pytest
from boards import RIG, ROOT

from lodestroke.errors import ScheduleError
from lodestroke.rig import Rig, load_rig
from lodestroke.runner import dry_run
from lodestroke.runner.dry_run import DryRun
from lodestroke.schedule import load_schedule
from lodestroke.virtual import available

SCHEDULES = ("gentle", "rate-sweep", "overdrive")
AT_LEAST = {
    "ticks",
    "cycles",
    "duration_s",
    "delivered_ul",
    "mean_flow_ul_min",
    "peak_chamber_pa",
    "peak_outlet_pa",
    "min_margin_pa",
    "peak_coil_c",
    "trips",
    "trace_sha256",
    "seed",
}
NO_VIRTUAL = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")


@cache
def bench_sim() -> Rig:
    return load_rig(RIG)


@cache
def shown(schedule: str, seed: int, on: str = "twin") -> DryRun:
    path = ROOT / "hil_configs" / "schedules" / f"{schedule}.toml"
    return dry_run(bench_sim(), load_schedule(path), seed=seed, on=on)


@NO_VIRTUAL
@pytest.mark.slow
@pytest.mark.parametrize("schedule", SCHEDULES)
def test_the_real_interpreter_and_the_twin_write_one_trace(schedule: str) -> None:
    for seed in (0, 1, 20261201):
        twin, virtual = shown(schedule, seed).result, shown(schedule, seed, "virtual").result
        assert {**twin, "on": ""} == {**virtual, "on": ""}


def test_a_dry_run_says_all_that_it_promises_and_its_hash_is_that_of_its_samples() -> None:
    dry = shown("gentle", 1)
    assert set(dry.result) >= AT_LEAST
    assert dry.result["cycles"] == dry.result["cycles_planned"] == 20
    assert dry.result["end"] == "finished"
    assert dry.result["trips"] == []
    assert dry.result["trace_sha256"] == hashlib.sha256(dry.samples.tobytes()).hexdigest()
    assert dry.samples["tick"].tolist() == list(range(dry.result["ticks"]))


def test_a_seed_gives_the_same_trace_again_and_another_seed_another() -> None:
    first = shown("overdrive", 5).result["trace_sha256"]
    shown.cache_clear()
    assert shown("overdrive", 5).result["trace_sha256"] == first
    assert shown("overdrive", 6).result["trace_sha256"] != first


def test_delivered_volume_is_what_the_cycles_at_a_steady_outlet_pass_on() -> None:
    """Volume balance, outside the plant's own account: what left through the restriction."""
    dry, rig = shown("gentle", 2), bench_sim()
    outlet = dry.samples["outlet_pa"].astype(float)
    through_ul = ((outlet - rig.outlet.head) / rig.outlet.restriction).sum() * rig.board.tick * 1e9
    stored_ul = (outlet[-20:].mean() - outlet[:20].mean()) * rig.outlet.compliance * 1e9
    # sensor noise averages out; its calibration (offset up to 2 u over the whole run) does not
    slack = 2 * rig.sensors.outlet.uncertainty / rig.outlet.restriction * dry.result["duration_s"]
    assert dry.result["delivered_ul"] == pytest.approx(
        through_ul + stored_ul, rel=0.05, abs=slack * 1e9
    )


@pytest.mark.parametrize("seed", range(1, 21))
def test_overdrive_is_stopped_by_its_interlock_with_margin_left(seed: int) -> None:
    result = shown("overdrive", seed).result
    (trip,) = result["trips"]
    assert trip["name"] == "outlet_reverse"
    assert trip["value"] >= trip["limit"]
    assert trip["stop_category"] == 0
    assert not result["collapsed"]
    assert result["min_margin_pa"] > 0


def test_enable_drops_in_the_tick_that_saw_the_trip() -> None:
    dry = shown("overdrive", 1)
    tick = dry.result["trips"][0]["tick"]
    rows = dry.samples
    assert rows["target_a_ma"][tick - 1] >= 0
    assert rows["duty_a_q15"][tick] == 0
    assert set(rows["state"][tick:].tolist()) == {int(rows["state"][tick])}
    assert rows["state"][tick] != rows["state"][tick - 1]


LIMITS = (
    (
        'outlet_reverse = { soft = "18 cmH2O", hard = "24 cmH2O" }',
        'outlet_reverse = { soft = "89 cmH2O", hard = "90 cmH2O" }',
    ),
    (
        'outlet_high = { soft = "20 cmH2O", hard = "26 cmH2O" }',
        'outlet_high = { soft = "89 cmH2O", hard = "90 cmH2O" }',
    ),
    (
        'inlet_reverse = { soft = "40 cmH2O", hard = "48 cmH2O" }',
        'inlet_reverse = { soft = "89 cmH2O", hard = "90 cmH2O" }',
    ),
    (
        'chamber_high = { soft = "40 cmH2O", hard = "50 cmH2O" }',
        'chamber_high = { soft = "89 cmH2O", hard = "90 cmH2O" }',
    ),
    (
        'chamber_low = { soft = "-20 cmH2O", hard = "-25 cmH2O" }',
        'chamber_low = { soft = "-89 cmH2O", hard = "-90 cmH2O" }',
    ),
)


@pytest.fixture
def unguarded(tmp_path: Path) -> Rig:
    """The bench with its pressure limits raised out of the way."""
    text = RIG.read_text(encoding="utf-8")
    for old, new in LIMITS:
        assert old in text, old
        text = text.replace(old, new)
    path = tmp_path / "unguarded.toml"
    path.write_text(text, encoding="utf-8")
    return load_rig(path)


@pytest.mark.parametrize("seed", [0, 1, 2, 3, 51, 59])    # the last two: the softest of 100 chambers
def test_overdrive_collapses_a_valve_once_the_limits_are_out_of_the_way(
    unguarded: Rig, seed: int
) -> None:
    overdrive = load_schedule(ROOT / "hil_configs" / "schedules" / "overdrive.toml")
    result = dry_run(unguarded, overdrive, seed=seed).result
    assert result["collapsed"]
    assert result["min_margin_pa"] < 0


def test_a_place_that_is_none_is_refused_with_those_that_are() -> None:
    with pytest.raises(ScheduleError) as refusal:
        shown("gentle", 1, "moon")
    assert refusal.value.bound == "twin, virtual"


@pytest.mark.parametrize("place", ["twin", pytest.param("virtual", marks=NO_VIRTUAL)])
def test_a_dry_run_that_is_stopped_says_so_and_keeps_what_it_has(place: str) -> None:
    asked: list[int] = []
    stop: Callable[[], str] = lambda: "enough" if len(asked) > 2 else asked.append(1) or ""  # noqa: E731
    gentle = load_schedule(ROOT / "hil_configs" / "schedules" / "gentle.toml")
    result = dry_run(bench_sim(), gentle, on=place, stop=stop).result
    assert result["end"] == "enough"
    assert 0 < result["ticks"] < result["ticks_planned"]
