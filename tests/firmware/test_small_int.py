"""Nothing in the tick leaves the small integers of a 32-bit board, at the corners and at random."""

from __future__ import annotations

import pytest
from benches import RIG, Bench
from hypothesis import example, given, settings
from hypothesis import strategies as st
from i30 import I30, OutOfSmallInt, listed

from lodeboard import clock, limits, program, thermal
from lodeboard.regulator import Regulator
from lodestroke.rig import limits_values

V = limits_values(RIG)
FULL = {"chamber": RIG.sensors.chamber.counts_full, "outlet": RIG.sensors.outlet.counts_full,
        "coil_a": RIG.sensors.coil_a.counts_full}


def test_the_checking_integer_catches_what_a_board_would_allocate():
    with pytest.raises(OutOfSmallInt):
        I30(70000) * 70000
    with pytest.raises(OutOfSmallInt):
        70000 * I30(70000) >> 16
    with pytest.raises(OutOfSmallInt):
        I30((1 << 30) - 1) + 1
    assert type(5 - I30(7)) is I30


def checked_limits() -> limits.Limits:
    store = limits.Limits()
    store.values = listed(V[name] for name in limits.FIELDS)
    store.active = listed(store.values)
    return store


@given(st.integers(0, clock.MASK_US), st.integers(0, clock.MASK_US), st.integers(0, 1 << 29))
@example(clock.MASK_US, 0, 1 << 29)
@example(0, clock.MASK_US, 0)
def test_clock_stays_small(a_us, b_us, span_us):
    assert -(1 << 29) <= clock.us_since(I30(a_us), I30(b_us)) < 1 << 29
    assert 0 <= clock.us_after(I30(a_us), I30(span_us)) <= clock.MASK_US


@given(st.lists(st.integers(-32000, 32000), min_size=64, max_size=256))
@example([32000] * 256)
@example([3400] * 256)
def test_coil_temperature_estimate_stays_small(currents_ma):
    # 32 A through this coil would melt it at once: the estimate must saturate, not wrap
    coil = thermal.Coil()
    coil.load(checked_limits())
    most = V["over_current_ma"]
    for current in currents_ma:
        coil.step(I30(max(-most, min(most, current))))
    assert coil.winding_mc <= 300_000


def test_coil_temperature_estimate_stays_small_at_its_ceiling():
    coil = thermal.Coil()
    coil.load(checked_limits())
    coil.winding_mcq = I30(300_000 << 10)
    coil.body_mcq = I30(0)
    coil.winding_mc = I30(300_000)
    for _ in range(640):
        coil.step(I30(V["over_current_ma"]))
    assert 0 < coil.winding_mc <= 300_000


@given(st.lists(st.tuples(st.integers(-3000, 3000), st.integers(-4000, 4000)), max_size=200))
@example([(3000, -4000)] * 200)
@example([(-3000, 4000)] * 200)
def test_regulator_stays_small_and_inside_its_clamps(steps):
    regulator = Regulator()
    regulator.load(checked_limits())
    for target, current in steps:
        duty = regulator.step(I30(target), I30(current))
        assert V["duty_min_q15"] <= duty <= V["duty_max_q15"]


@given(st.integers(-60000, 60000), st.integers(2, program.MAX_TICKS), st.floats(0, 1))
@example(60000, 16383, 0.9999)
@example(-60000, 16384, 0.9999)
@example(60000, program.MAX_TICKS, 1.0)
def test_share_of_a_segment_stays_small_and_inside_the_segment(span_ma, n, place):
    k = min(n - 1, max(1, int(place * n)))
    share = program._share(I30(span_ma), I30(k), I30(n))
    assert min(0, span_ma) <= share <= max(0, span_ma)
    assert abs(share - span_ma * k / n) <= 1 + abs(span_ma) / 4096


COUNTS = st.fixed_dictionaries({name: st.integers(0, full) for name, full in FULL.items()})
CORNERS = [
    {name: (full if bits >> n & 1 else 0) for n, (name, full) in enumerate(FULL.items())}
    for bits in range(8)
]


def checked_bench() -> Bench:
    """A running board in which every number that the tick touches checks itself."""
    bench = Bench()
    bench.go()
    bench.ticks(100)
    board = bench.board
    board.limits.values = listed(board.limits.values)
    board.limits.active = listed(board.limits.active)
    board.limits.shadow = listed(board.limits.shadow)
    board.sensors.counts = listed(board.sensors.counts)
    board.sensors.values = listed(board.sensors.values)
    bench.hal.counts = listed(bench.hal.counts)
    store = board.program
    for name in ("op", "arg", "step", "a_ma", "b_ma", "n", "shadow"):
        setattr(store, name, listed(getattr(store, name)[: store.count]))
    return bench


@settings(max_examples=60, deadline=None)
@given(st.lists(COUNTS, min_size=1, max_size=12))
@example(CORNERS)
@example(CORNERS[::-1])
def test_whole_tick_stays_small_for_any_counts(script):
    bench = checked_bench()
    for counts in script:
        for name, count in counts.items():
            bench.hal.counts[limits.CHANNELS.index(name)] = I30(count)
        for _ in range(3):
            bench.board.heard()
            bench.loop.step()
    # whatever the sensors said: enable is on only where the state allows it
    assert bench.hal.last_drive[2] == 0 or bench.state in ("running", "paused", "stopping", "tripped")


def test_every_channel_scale_fits_at_full_count():
    for name, full in FULL.items():
        assert full * V[f"{name}_gain"] < 1 << 30
