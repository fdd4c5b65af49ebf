"""The sequencer against an independent reading of random nested programs, tick by tick."""

from __future__ import annotations

import binascii
import struct
from dataclasses import dataclass, field
from fractions import Fraction

import pytest
from benches import records
from hypothesis import example, given, settings
from hypothesis import strategies as st
from i30 import I30, listed

from lodeboard import limits, program
from lodeboard.program import CLOSE, CYCLE, END, LOOP, MARK, NEXT, SEG

MA = st.integers(-3000, 3000)
SEGMENT = st.tuples(st.just(SEG), st.just(0), st.integers(0, 250), MA, MA, st.integers(1, 40))
MOMENT = st.one_of(
    st.tuples(st.sampled_from([CYCLE, CLOSE]), st.just(0), st.integers(0, 250), *[st.just(0)] * 3),
    st.tuples(st.just(MARK), st.just(0), st.integers(0, 250), st.just(0), st.just(0),
              st.integers(0, 65535)))


@st.composite
def blocks(draw, depth: int = 0):
    """A list of records and of (turns, block) loops; each block takes time."""
    kinds = [MOMENT, SEGMENT]
    if depth < 4:
        kinds.append(st.tuples(st.integers(1, 4), blocks(depth=depth + 1)))
    rows = draw(st.lists(st.one_of(kinds), max_size=4))
    rows.insert(draw(st.integers(0, len(rows))), draw(SEGMENT))
    return rows


def flat(block) -> list[tuple[int, ...]]:
    """The block as the board's records."""
    rows: list[tuple[int, ...]] = []
    for row in block:
        if len(row) == 2:
            rows += [(LOOP, 0, 0, 0, 0, row[0]), *flat(row[1]), (NEXT, 0, 0, 0, 0, 0)]
        else:
            rows.append(row)
    return rows


@dataclass
class Heard:
    """One tick: exact targets, and what happened before it."""

    a: Fraction
    b: Fraction
    step: int
    cycle: int = 0
    mark: int = -1


@dataclass
class Reader:
    """Plays a block recursively, with exact fractions."""

    ticks: list[Heard] = field(default_factory=list)
    at: tuple[Fraction, Fraction] = (Fraction(0), Fraction(0))
    cycle: int = 0
    mark: int = -1

    def play(self, block) -> None:
        for row in block:
            if len(row) == 2:
                for _ in range(row[0]):
                    self.play(row[1])
            elif row[0] == SEG:
                self.segment(row)
            elif row[0] == MARK:
                self.mark = row[5]
            elif self.cycle != CYCLE:
                self.cycle = row[0]

    def segment(self, row) -> None:
        _, _, step, a, b, n = row
        start = self.at
        for k in range(1, n + 1):
            here = [first + Fraction(k, n) * (last - first)
                    for first, last in zip(start, (a, b), strict=True)]
            self.ticks.append(Heard(here[0], here[1], step, self.cycle, self.mark))
            self.cycle, self.mark = 0, -1
        self.at = (Fraction(a), Fraction(b))


def sealed(rows) -> program.Sequencer:
    store = program.Program()
    data = records(rows)
    assert store.blob.put(0, data, len(data))
    assert store.seal(len(data), binascii.crc32(data), b"\0" * 8)
    return program.Sequencer(store, limits.Limits())


@settings(max_examples=150, deadline=None)
@given(blocks())
@example([(3, [(CYCLE, 0, 1, 0, 0, 0), (2, [(SEG, 0, 2, -3000, 3000, 7), (SEG, 0, 3, 3000, -3000, 1)])])])
def test_sequencer_plays_nested_loops_as_the_reference_does(block):
    reader = Reader()
    reader.play(block)
    if len(reader.ticks) > 3000:
        reader.ticks = reader.ticks[:3000]
    sequencer = sealed([*flat(block), (END, 0, 9, 0, 0, 0)])
    store = sequencer.program
    for name in ("op", "arg", "step", "a_ma", "b_ma", "n"):
        setattr(store, name, listed(getattr(store, name)[: store.count]))
    for wanted in reader.ticks:
        sequencer.cycle_mark, sequencer.mark = 0, -1
        assert sequencer.step() == program.RUNS
        # linear, rounded towards minus infinity; exact where the fraction is whole
        assert (sequencer.a_ma, sequencer.b_ma) == (wanted.a // 1, wanted.b // 1)
        assert sequencer.step_now == wanted.step
        assert (sequencer.cycle_mark, sequencer.mark) == (wanted.cycle, wanted.mark)
    if len(reader.ticks) < 3000:
        assert sequencer.step() == program.ENDED


@pytest.mark.parametrize("n", [16_383, 16_384, 100_001])
def test_long_segment_ends_exactly_and_never_turns_back(n):
    sequencer = sealed([(SEG, 0, 0, -1500, 2999, n), (END, 0, 0, 0, 0, 0)])
    before = (0, 0)
    for k in range(1, n + 1):
        assert sequencer.step() == program.RUNS
        here = (sequencer.a_ma, sequencer.b_ma)
        assert here[0] <= before[0]
        assert here[1] >= before[1]
        assert abs(here[1] - Fraction(2999 * k, n)) <= 2
        before = here
    assert before == (-1500, 2999)
    assert sequencer.step() == program.ENDED


def test_sequencer_without_an_end_is_broken_not_lost():
    sequencer = sealed([(SEG, 0, 0, 100, 0, 2), (END, 0, 0, 0, 0, 0)])
    sequencer.program.count = 1               # as if memory had lost the END
    assert [sequencer.step() for _ in range(3)] == [program.RUNS, program.RUNS, program.BROKEN]


@pytest.mark.parametrize("op", [LOOP, NEXT])
def test_loops_that_memory_has_broken_end_the_program(op):
    sequencer = sealed([(SEG, 0, 0, 100, 0, 1)] * 8 + [(END, 0, 0, 0, 0, 0)])
    for at in range(8):
        sequencer.program.op[at] = op
        sequencer.program.n[at] = 2
    assert sequencer.step() == program.BROKEN


def test_records_are_twelve_bytes_as_documented():
    assert struct.calcsize(program.RECORD_FORMAT) == program.RECORD_BYTES == 12


def test_share_is_checked_by_the_small_integer_too():
    assert program._share(I30(3000), I30(1), I30(3)) == 1000
