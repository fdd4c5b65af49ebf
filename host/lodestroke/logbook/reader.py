"""Reading runs: rows as dictionaries, samples as numpy records. Nothing here writes."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from typing import Any

import numpy as np
import sqlalchemy as sa

from ..errors import LogbookError
from ..rows import SAMPLE, sample_rows
from . import chunks, schema
from .faults import damaged
from .names import resolve
from .open import Logbook
from .runs import clear_requests, stop_requested

__all__ = [
    "Row",
    "checkups",
    "clear_requests",
    "cycle_pages",
    "cycles",
    "gaps",
    "last_cycle",
    "marks",
    "notes",
    "recorder",
    "resolve",
    "run",
    "runs",
    "sample_chunks",
    "samples",
    "stop_requested",
    "trips",
]

Row = dict[str, Any]


def _all(logbook: Logbook, query: Any) -> list[Row]:
    with logbook.read() as connection:
        return [dict(row) for row in connection.execute(query).mappings()]


def runs(logbook: Logbook) -> list[Row]:
    """Every run, newest first, without its sources."""
    wanted = [column for column in schema.runs.c if column.name != "sources"]
    return _all(logbook, sa.select(*wanted).order_by(schema.runs.c.serial.desc()))


def run(logbook: Logbook, run_id: str) -> Row:
    """One run, whole, by id or "last". Raises LogbookError."""
    query = sa.select(schema.runs).where(schema.runs.c.id == resolve(logbook, run_id))
    found = _all(logbook, query)
    if not found:
        raise damaged(
            logbook.name, LookupError(f"run {run_id} is in the index and not in the table")
        )
    return found[0]


def _of(logbook: Logbook, table: sa.Table, run_id: str, *order: str) -> list[Row]:
    return _all(
        logbook,
        sa.select(table)
        .where(table.c.run == run_id)
        .order_by(*(table.c[name] for name in order or ("id",))),
    )


def cycles(logbook: Logbook, run_id: str, after: int = 0, most: int | None = None) -> list[Row]:
    """Cycles in order of their number, from after + 1 on, at most so many."""
    table = schema.cycles
    query = sa.select(table).where(table.c.run == run_id, table.c.cycle > after)
    return _all(logbook, query.order_by(table.c.cycle).limit(most))


def cycle_pages(logbook: Logbook, run_id: str, most: int = 20_000) -> Iterator[list[Row]]:
    """The same, page by page, so that a run of a million cycles fits in memory."""
    after = 0
    while page := cycles(logbook, run_id, after, most):
        yield page
        after = page[-1]["cycle"]


def last_cycle(logbook: Logbook, run_id: str) -> int:
    """The highest cycle number on disk, 0 for none."""
    table = schema.cycles.c
    query = sa.select(sa.func.max(table.cycle).label("last")).where(table.run == run_id)
    return int(_all(logbook, query)[0]["last"] or 0)


def trips(logbook: Logbook, run_id: str) -> list[Row]:
    """Trips, oldest first; recorder still compressed."""
    return _of(logbook, schema.trips, run_id)


def checkups(logbook: Logbook, run_id: str) -> list[Row]:
    """Check-ups in order."""
    return _of(logbook, schema.checkups, run_id, "after_cycle", "id")


def marks(logbook: Logbook, run_id: str) -> list[Row]:
    """Marks in order."""
    return _of(logbook, schema.marks, run_id)


def gaps(logbook: Logbook, run_id: str) -> list[Row]:
    """Gaps in order."""
    return _of(logbook, schema.gaps, run_id)


def notes(logbook: Logbook, run_id: str) -> list[Row]:
    """Notes in order; kind "problem" marks what verify tells too."""
    return _of(logbook, schema.notes, run_id)


def recorder(trip: Row) -> np.ndarray:
    """The flight recorder's rows of a trip, dtype SAMPLE; empty when none was kept.

    Raises ValueError when the stored rows are damaged.
    """
    if not trip["recorder"]:
        return np.empty(0, SAMPLE)
    try:
        rows = zlib.decompress(trip["recorder"])
    except zlib.error as fault:
        raise ValueError(f"cannot be decompressed: {fault}") from fault
    if zlib.crc32(rows) != trip["recorder_crc32"]:
        raise ValueError("checksum differs")
    return sample_rows(rows)


def stored_chunks(logbook: Logbook, run_id: str) -> Iterator[Row]:
    """Chunk rows in order, one in memory at a time, their data as stored."""
    table = schema.chunks
    number = 0
    while True:
        query = sa.select(table).where(table.c.run == run_id, table.c.number > number)
        found = _all(logbook, query.order_by(table.c.number).limit(1))
        if not found:
            return
        number = found[0]["number"]
        yield found[0]


def sample_chunks(logbook: Logbook, run_id: str) -> Iterator[tuple[Row, np.ndarray]]:
    """Chunk by chunk: the chunk's row and its samples. Raises LogbookError for a damaged one."""
    for row in stored_chunks(logbook, run_id):
        try:
            rows = chunks.unpack(row["data"], row["sha256"], row["codec"])
        except ValueError as fault:
            raise LogbookError(
                "a chunk of samples is damaged",
                at=f"{logbook.name}, run {run_id}",
                got=f"chunk {row['number']}: {fault}",
                bound="the checksum it was written with",
                try_="lodestroke log verify, then restore a copy of the logbook",
            ) from fault
        yield row, sample_rows(rows)


def samples(logbook: Logbook, run_id: str) -> np.ndarray:
    """All samples of a run, dtype SAMPLE, in the order they were taken."""
    parts = [rows for _, rows in sample_chunks(logbook, run_id)]
    return np.concatenate(parts) if parts else np.empty(0, SAMPLE)
