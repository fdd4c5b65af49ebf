"""Runs made up for the tests, shaped like a board's messages: every value differs from the next."""

from __future__ import annotations

import hashlib
import struct
from pathlib import Path

from lodeboard.wire import messages
from lodestroke.logbook import Logbook, Writer, new_run

CONFIGS = Path(__file__).parents[3] / "hil_configs"
NONCE = 0xDEADBEEF
CYCLE_FIELDS = next(fields for _, name, _, fields in messages.UP if name == "cycle")
TRIP_FIELDS = next(fields for _, name, _, fields in messages.UP if name == "trip")


def cycle(number: int, entry: int | None = None) -> dict[str, int]:
    """A cycle's account with its number; other fields count on from it."""
    row = {name: number * 100 + at for at, name in enumerate(CYCLE_FIELDS)}
    return row | {"entry": entry or number, "cycle": number, "step": number % 3}


def trip(entry: int) -> dict[str, int]:
    """Outlet reverse pressure at its limit (code 1, category 0)."""
    row = {name: entry + at for at, name in enumerate(TRIP_FIELDS)}
    return row | {"entry": entry, "code": 1, "stop_category": 0, "value": 2510, "limit": 2500}


def samples(count: int, first: int = 0) -> bytes:
    """Packed sample rows with a slow wave in them."""
    return b"".join(
        struct.pack(
            messages.SAMPLE_FORMAT, tick, tick % 1200, 0, 1200, tick % 32767,
            (tick * 7) % 2000 - 300, (tick * 3) % 900, 0, 2500 + tick % 50, 255, 3,
        )
        for tick in range(first, first + count)
    )


def finished_run(log: Logbook, cycles: int = 60, rows: int = 20_000) -> str:
    """A closed endurance run with something in every table, over two segments."""
    rig = (CONFIGS / "bench-sim.toml").read_text(encoding="utf-8")
    run = new_run(
        log, "endure", title="made up", place="twin", sources={"rig": rig},
        meta={
            "files": {"rig": "bench-sim.toml"},
            "sha256": {"rig": hashlib.sha256(rig.encode()).hexdigest()},
        },
    )
    with Writer(log, run) as writer:
        writer.begin(NONCE, 0, 1)
        for number in range(1, cycles // 2 + 1):
            writer.cycle(cycle(number))
        writer.samples(samples(rows))
        writer.flush()
        writer.checkup(cycles // 2, "cracking", {"ok": True, "outlet_cracking_pa": 301.5})
        writer.begin(NONCE, cycles // 2, 2)
        for number in range(cycles // 2 + 1, cycles + 1):
            writer.cycle(cycle(number))
        writer.samples(samples(500))
        writer.mark({"entry": cycles + 1, "tick": 77, "mark": 4, "step": 1})
        writer.trip(trip(cycles + 2), recorder=samples(1280))
        writer.gap(cycles, "the board restarted", unnumbered_most=3)
        writer.note("a note, with a comma")
        writer.flush()
        writer.finish("stopped", {"cycles_done": cycles, "trips": [{"code": 1}]})
    return run
