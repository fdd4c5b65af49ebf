"""The worst stroke through the plant, and its bounds, against closed forms and another integration."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from lodestroke.margin import interlocks, strike
from lodestroke.margin.field import greatest_push_pa, push_pa, return_pa
from lodestroke.margin.stroke import collapse_pa, drawing_pa
from lodestroke.rig import Rig, load_rig

CONFIGS = Path(__file__).parents[3] / "hil_configs"


def changed(rig: Rig, **sections: dict[str, object]) -> Rig:
    """The rig with keys of some sections replaced."""
    return rig.model_copy(update={
        name: getattr(rig, name).model_copy(update=keys) for name, keys in sections.items()})


@pytest.fixture(scope="module")
def bench() -> Rig:
    return load_rig(CONFIGS / "bench-sim.toml")


def test_push_against_a_shut_outlet_is_the_integral_of_its_own_equations(bench: Rig) -> None:
    """I q' = push + spring - p - R q, C p' = q, x' = q/A from the middle: solve_ivp, DOP853.

    Source: Newton's law with Poiseuille drag (Bruus 2008); i(t) = I held at once is what the plant's
    L/R of 0.6 ms comes close to, so the current is taken from the plant.
    """
    from scipy.integrate import solve_ivp

    case = strike.Case("push", 0.0, 1.0, bench.outlet.head, "outlet")
    course = strike.run(bench, case)
    area, squeeze = bench.channel.area_m2, bench.chamber.compliance
    slug, radius = bench.slug, bench.channel.radius
    inertance = slug.density * slug.length / area
    drag = 8 * slug.viscosity * slug.length / (math.pi * radius**4)   # type: ignore[operator]

    def slope(t: float, y: list[float]) -> list[float]:
        n = min(len(course.current_a) - 2, int(t / strike.STEP_S))
        share = t / strike.STEP_S - n
        now = course.current_a[n] * (1 - share) + course.current_a[n + 1] * share
        push = push_pa(bench, bench.coils[0], y[0], now) + return_pa(bench, y[0], 0.0)
        return [y[1] / area, (push - y[2] - drag * y[1]) / inertance, y[1] / squeeze]

    end = 0.012                              # before the inlet opens on the swing back
    other = solve_ivp(slope, (0, end), [0.0, 0.0, drawing_pa(bench)], "DOP853", rtol=1e-9, atol=1e-15)
    assert course.chamber_pa[round(end / strike.STEP_S)] == pytest.approx(other.y[2][-1], rel=2e-3)


def test_trip_cuts_the_current_a_tick_after_the_lagged_reading(bench: Rig) -> None:
    slow = changed(bench, board={"tick": 0.002})
    plain = strike.pushes(slow, 1.5, level_pa=1000.0, lags=(0.0, 0.0),
                          judge=lambda chamber, outlet: chamber)[0]
    crossing = plain.first_s(1000.0)
    assert plain.off_s == pytest.approx(crossing + 0.002, abs=1e-9)
    lagged = strike.pushes(slow, 1.5, level_pa=1000.0, lags=(0.003, 0.0),
                           judge=lambda chamber, outlet: chamber)[0]
    assert lagged.off_s is not None
    assert plain.off_s is not None
    # a ramp is trailed by tau (1 - exp(-t/tau)) at most: first-order response (sense.lag.ramp)
    assert plain.off_s < lagged.off_s <= plain.off_s + 0.003 + strike.STEP_S
    after = [i for t, i in zip(plain.time_s, plain.current_a, strict=True) if t > plain.off_s + 0.004]
    assert max(after) == 0.0
    assert max(lagged.chamber_pa) > max(plain.chamber_pa)


def test_energy_bound_is_that_of_a_driven_oscillator(bench: Rig) -> None:
    # from rest at p0 under a constant drive P without drag: the swing's top is 2 P - p0
    assert strike.energy_bound_pa(bench, 0.0, 1000.0, 2000.0, 1.0) == pytest.approx(4000.0)
    # cut at the very level: the radius of the free circle there, sqrt(p² + (q/wC)²)
    speed = math.sqrt(2000.0**2 - 1000.0**2)
    assert strike.energy_bound_pa(bench, 0.0, 1000.0, 2000.0, 0.0) == pytest.approx(
        math.hypot(1000.0, speed))
    assert strike.energy_bound_pa(bench, 0.0, 4000.0, 2000.0, 1.0) == 4000.0    # never gets there


@pytest.mark.parametrize("current", [0.6, 1.2, 1.8, 2.4, 3.0])
def test_bound_is_above_the_worst_stroke_at_every_current(bench: Rig, current: float) -> None:
    for guard in interlocks.guards(bench):
        reached = interlocks.reached_pa(bench, guard, current)
        assert reached <= interlocks.bound_pa(bench, guard) * (1 + 1e-6) or reached < guard.hard_pa


def test_margin_falls_as_filter_lag_and_tick_grow(bench: Rig) -> None:
    def margin(rig: Rig) -> float:
        rows = {row["interlock"]: row for row in interlocks.interlock_margins(rig, 1.3)}
        return float(rows["inlet_reverse"]["stroke_reaches_pa"])

    sensors = bench.sensors.model_copy(update={
        "chamber": bench.sensors.chamber.model_copy(update={"lag": 0.002})})
    assert margin(bench) < margin(changed(bench, board={"tick": 0.002}))
    assert margin(bench) < margin(bench.model_copy(update={"sensors": sensors}))


def test_volume_from_stop_to_stop_bounds_a_push_into_a_shut_chamber(bench: Rig) -> None:
    # A x travel / C = 113.1 ul / 1.8e-11 m3/Pa = 6.283 kPa, from the pressure at which the inlet shuts
    most = drawing_pa(bench) + math.pi * 0.0015**2 * 0.016 / 1.8e-11
    for course in strike.pushes(bench, 3.0):
        assert max(course.chamber_pa) <= most * (1 + 1e-9)
    assert max(max(course.chamber_pa) for course in strike.pushes(bench, 3.0)) == pytest.approx(
        most, rel=1e-3)                      # full current goes all the way


def test_current_that_holds_is_where_the_margin_ends(bench: Rig) -> None:
    for row in interlocks.interlock_margins(bench):
        holds = row["holds_up_to_a"]
        if holds < bench.limits.current:
            below, above = (
                {other["interlock"]: other for other in interlocks.interlock_margins(bench, i)}
                for i in (0.99 * holds, 1.02 * holds))
            assert below[row["interlock"]]["margin_pa"] >= -1e-9 > above[row["interlock"]]["margin_pa"]
        else:
            assert row["margin_pa"] >= 0.0


def test_gentle_current_leaves_every_margin_above_zero(bench: Rig) -> None:
    assert all(row["margin_pa"] > 0.0 for row in interlocks.interlock_margins(bench, 1.2))


def test_twin_that_trips_at_full_current_stays_above_the_priced_worst(bench: Rig) -> None:
    """The overdrive schedule through the firmware reaches less than the worst stroke of its current."""
    from lodestroke.runner import dry_run
    from lodestroke.schedule import load_schedule

    shown = dry_run(bench, load_schedule(CONFIGS / "schedules" / "overdrive.toml"), seed=0).result
    assert shown["trips"]
    worst = {row["interlock"]: row["stroke_reaches_pa"]
             for row in interlocks.interlock_margins(bench, 2.8)}
    assert collapse_pa(bench.valves.outlet) - shown["min_margin_pa"] < worst["outlet_reverse"]
    assert shown["peak_chamber_pa"] < worst["inlet_reverse"]


def test_second_coil_pulls_back_until_it_is_cut(bench: Rig) -> None:
    coil = bench.coils[0].model_copy(update={"position": -0.010})
    two = bench.model_copy(update={
        "coils": [bench.coils[0], coil],
        "spring": bench.spring.model_copy(update={"kind": "none", "volume": None})})
    free = strike.release(two, 2.0, two.outlet.head, "inlet")
    cut = strike.release(two, 2.0, two.outlet.head, "inlet", level_pa=-500.0, lags=(0.0, 0.0),
                         judge=lambda chamber, outlet: -chamber)
    assert free.off_s is None
    assert cut.off_s is not None
    assert min(free.chamber_pa) < min(cut.chamber_pa)
    assert greatest_push_pa(two) == pytest.approx(greatest_push_pa(bench))
