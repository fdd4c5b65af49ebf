"""A byte of the logbook's file goes bad, anywhere: it is told, or it changed nothing."""

from __future__ import annotations

import random
from pathlib import Path

import log_child
import pytest

from lodestroke.errors import LogbookError
from lodestroke.logbook import Writer, new_run, open_logbook, reader
from lodestroke.logbook.export import export
from lodestroke.logbook.verify import verify

TRIES = 120
_PASSING = {"lease_owner", "lease_until", "resume"}  # of use only while a run is being written


def contents(place: Path) -> list[object]:
    """Everything that a reader can learn of the one run."""
    with open_logbook(place, create=False) as log:
        parts = [getattr(reader, name)(log, "r0001")
                 for name in ("cycles", "trips", "marks", "gaps", "notes", "checkups")]
        own = {key: value for key, value in reader.run(log, "r0001").items() if key not in _PASSING}
        return [own, *parts, reader.samples(log, "r0001").tobytes(), len(reader.runs(log))]


@pytest.fixture(scope="module")
def sound(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A small finished run, all of it in the one file."""
    place = tmp_path_factory.mktemp("sound") / "bench.db"
    with open_logbook(place) as log:
        run = new_run(log, "endure", title="small", sources={"rig": "x = 1\n" * 40})
        with Writer(log, run) as writer:
            for number in range(1, 41):
                writer.cycle(log_child.cycle(number))
                writer.samples(number.to_bytes(4, "little") + bytes(range(24)))
            writer.mark({"entry": 41, "tick": 1, "mark": 2, "step": 3})
            writer.checkup(40, "cracking", {"ok": True, "outlet_cracking_pa": 301.5})
            writer.note("as it was")
            writer.finish("target reached", {"cycles_done": 40, "trips": []})
    return place


def test_any_flipped_bits_are_told_or_change_nothing_that_can_be_read(
    sound: Path, tmp_path: Path
) -> None:
    """No exception but LogbookError, whatever the bytes; a clean verify means the same contents."""
    before, data = contents(sound), sound.read_bytes()
    used = [at for at, byte in enumerate(data) if byte]  # most of the rest is room for more rows
    dice = random.Random(22)
    told = 0
    for turn in range(TRIES):
        bad = bytearray(data)
        bad[dice.choice(used)] ^= dice.randrange(1, 256)
        place = tmp_path / f"{turn}.db"
        place.write_bytes(bytes(bad))
        try:
            with open_logbook(place, create=False) as log:
                problems = verify(log)
                if problems:
                    export_if_it_can(place, tmp_path / f"out{turn}")
        except LogbookError as fault:
            problems = [fault.text()]
        told += bool(problems)
        assert problems or contents(place) == before, f"turn {turn}"
    assert told > TRIES // 2
    print(f"{told} of {TRIES} told; the others lay where nothing is read from")


def export_if_it_can(place: Path, folder: Path) -> None:
    """An export of a damaged run works or says why not."""
    try:
        with open_logbook(place, create=False) as log:
            export(log, "last", "csv", folder)
    except LogbookError as fault:
        assert fault.try_
