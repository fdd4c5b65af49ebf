"""Clock, rings and the account of a cycle."""

from __future__ import annotations

import struct

from hypothesis import given
from hypothesis import strategies as st

from lodeboard import clock
from lodeboard.cycles import Cycles
from lodeboard.rings import ROW_BYTES, ROWS, Journal, Samples
from lodeboard.wire import messages

TIMES = st.integers(0, clock.MASK_US)


@given(TIMES, st.integers(-(1 << 29), (1 << 29) - 1))
def test_time_differences_are_right_over_the_wrap(then_us, span_us):
    now_us = (then_us + span_us) & clock.MASK_US
    assert clock.us_since(now_us, then_us) == span_us


@given(TIMES, st.integers(0, 1 << 29))
def test_time_after_a_span_wraps(then_us, span_us):
    assert clock.us_after(then_us, span_us) == (then_us + span_us) & clock.MASK_US


def push(samples: Samples, n: int) -> None:
    for k in range(n):
        samples.push(k, 0, 0, 0, k, 0, 0, 2200, 255, 3)


def tick_at(samples: Samples, at: int) -> int:
    return struct.unpack_from("<I", samples.rows, at)[0]


def test_samples_stream_every_nth_row_in_order():
    samples = Samples()
    samples.every = 10
    push(samples, 95)
    seen = []
    while (at := samples.peek()) >= 0:
        seen.append(tick_at(samples, at))
        samples.pop()
    assert seen == list(range(0, 95, 10))
    assert samples.dropped == 0


@given(st.integers(1, 7), st.integers(1, 3 * ROWS))
def test_overrun_samples_are_counted_and_the_stream_stays_on_its_grid(every, n):
    samples = Samples()
    samples.every = every
    push(samples, n)
    seen = []
    while (at := samples.peek()) >= 0:
        seen.append(tick_at(samples, at))
        samples.pop()
    wanted = list(range(0, n, every))
    assert seen == wanted[len(wanted) - len(seen):]
    assert samples.dropped == len(wanted) - len(seen)
    assert all(tick >= n - ROWS for tick in seen)


def test_recorder_holds_the_last_rows_oldest_first():
    samples = Samples()
    push(samples, ROWS + 300)
    ticks = [tick_at(samples, samples.recorded_at(row)) for row in range(samples.recorded())]
    assert ticks == list(range(300, ROWS + 300))
    assert samples.recorded_at(ROWS) == -1
    assert struct.calcsize(messages.SAMPLE_FORMAT) == ROW_BYTES


def cycle_once(cycles: Cycles, tick: int) -> None:
    cycles.begin(tick)
    cycles.step(100, 50, -50, 100, 900, False)
    cycles.step(-20, 60, 80, -20, -1000, True)
    cycles.close(2500, 4)


def body(journal: Journal, entry: int) -> dict[str, int]:
    at = journal.at(entry)
    code, length = journal.rows[at], journal.rows[at + 1]
    form, fields = next((f, n) for c, _, f, n in messages.UP if c == code)
    return dict(zip(fields, struct.unpack(form, journal.rows[at + 2 : at + 2 + length]), strict=True))


def test_cycle_account_holds_extremes_means_and_held_ticks():
    journal = Journal()
    cycles = Cycles(journal)
    cycles.start(41)
    cycle_once(cycles, 7)
    fields = body(journal, 1)
    assert fields["cycle"] == 42
    assert (fields["chamber_max_pa"], fields["chamber_min_pa"], fields["chamber_mean_pa"]) == (100, -20, 40)
    assert (fields["outlet_max_pa"], fields["outlet_mean_pa"]) == (60, 55)
    assert (fields["outlet_reverse_max_pa"], fields["inlet_reverse_max_pa"]) == (80, 100)
    assert (fields["held_ticks"], fields["coil_peak_ma"], fields["duration_ticks"]) == (1, 1000, 2)


@given(st.integers(0, 200), st.integers(0, 60))
def test_full_journal_becomes_one_gap_and_no_cycle_is_lost_silently(pumped, kept):
    journal_numbers: list[int] = []
    gaps: list[int] = []
    journal = Journal()
    cycles = Cycles(journal)
    cycles.start(0)

    def read(upto: int) -> None:
        for entry in range(journal.saved + 1, upto + 1):
            fields = body(journal, entry)
            if "first_cycle" in fields:
                gaps.extend(range(fields["first_cycle"], fields["last_cycle"] + 1))
            else:
                journal_numbers.append(fields["cycle"])
        journal.keep_until(upto)

    for n in range(pumped):
        cycle_once(cycles, n)
    read(min(kept, journal.newest))
    cycle_once(cycles, 999)
    read(journal.newest)
    cycle_once(cycles, 1000)
    read(journal.newest)
    cycle_once(cycles, 1001)
    read(journal.newest)
    assert sorted(journal_numbers + gaps) == list(range(1, pumped + 4))
    assert journal_numbers == sorted(journal_numbers)
