"""Constants that a board's compiler folds say the same as the tables that they stand for."""

from __future__ import annotations

import struct

import pytest

from lodeboard import board, cycles, interlocks, limits, program, rings, sensors, states, tick
from lodeboard.wire import messages

PLACES = {name.upper(): at for name, at in limits.INDEX.items()}
PLACES |= {name.upper(): at for at, name in enumerate(limits.CHANNELS)}
STATES = {name.upper(): number for number, name in enumerate(states.NAMES)}
TABLES = [
    (interlocks, PLACES), (sensors, PLACES), (tick, PLACES | STATES | {"CYCLE": program.CYCLE}),
]
OTHER = {"_MOST_MA"}                 # numbers of their own


@pytest.mark.parametrize(("module", "table"), TABLES, ids=lambda part: getattr(part, "__name__", ""))
def test_folded_constants_say_what_the_tables_say(module, table):
    folded = {name: value for name, value in vars(module).items()
              if name.startswith("_") and name.isupper() and isinstance(value, int)}
    assert folded
    for name, value in folded.items():
        if name not in OTHER:
            assert value == table[name[1:]], f"{module.__name__}.{name}"


def test_lengths_say_what_the_tables_say():
    assert limits._N_FIELDS == limits.N_FIELDS
    assert limits.CHANNEL_STRIDE == 1 << 3          # sensors.py shifts
    assert program.RUNS == 0                        # tick.py asks for anything else
    forms = {code: form for code, _, form, _ in messages.UP}
    assert forms[0x90] == cycles._CYCLE_FORMAT
    assert forms[0x91] == board._MARK_FORMAT
    assert forms[0x92] == board._TRIP_FORMAT
    assert forms[0x93] == board._END_FORMAT
    assert struct.calcsize(board._TRIP_FORMAT) == board._TRIP_BYTES
    assert struct.calcsize(board._END_FORMAT) == board._END_BYTES
    assert struct.calcsize(board._MARK_FORMAT) == board._MARK_BYTES
    assert struct.calcsize(cycles._CYCLE_FORMAT) == cycles._CYCLE_BYTES
    assert rings._SAMPLE == messages.SAMPLE_FORMAT
