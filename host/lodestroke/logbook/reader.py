"""Reading runs: rows as dictionaries, samples as numpy records. Only clear_requests writes."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from typing import Any

import numpy as np
import sqlalchemy as sa
from sqlalchemy.exc import SQLAlchemyError

from ..errors import LogbookError
from ..rows import SAMPLE, sample_rows
from . import chunks, schema
from .open import Logbook, worded

Row = dict[str, Any]


def _all(logbook: Logbook, query: sa.Select[Any]) -> list[Row]:
    try:
        with logbook.engine.connect() as connection:
            return [dict(row) for row in connection.execute(query).mappings()]
    except SQLAlchemyError as fault:
        raise worded(logbook.name, fault) from fault


def runs(logbook: Logbook) -> list[Row]:
    """Every run, newest first, without its sources."""
    wanted = [column for column in schema.runs.c if column.name != "sources"]
    return _all(logbook, sa.select(*wanted).order_by(schema.runs.c.serial.desc()))


def resolve(logbook: Logbook, name: str) -> str:
    """A run's id from its id or from "last". Raises LogbookError with what there is."""
    listing = [row["id"] for row in runs(logbook)]
    if name == "last" and listing:
        return str(listing[0])
    if name in listing:
        return name
    raise LogbookError(
        "no such run",
        at=logbook.name,
        got=name,
        bound="last, " + ", ".join(listing[:6]) if listing else "a run; the logbook is empty",
        try_="lodestroke log list" if listing else "run something first: lodestroke demo",
    )


def run(logbook: Logbook, run_id: str) -> Row:
    """One run, whole. Accepts "last"."""
    found = _all(
        logbook, sa.select(schema.runs).where(schema.runs.c.id == resolve(logbook, run_id))
    )
    return found[0]


def _of(logbook: Logbook, table: sa.Table, run_id: str, *order: str) -> list[Row]:
    return _all(
        logbook,
        sa.select(table)
        .where(table.c.run == run_id)
        .order_by(*(table.c[name] for name in order or ("id",))),
    )


def cycles(logbook: Logbook, run_id: str, after: int = 0) -> list[Row]:
    """Cycles in order of their number, from after + 1 on."""
    table = schema.cycles
    return _all(
        logbook,
        sa.select(table)
        .where(table.c.run == run_id, table.c.cycle > after)
        .order_by(table.c.cycle),
    )


def last_cycle(logbook: Logbook, run_id: str) -> int:
    """The highest cycle number on disk, 0 for none."""
    rows = _all(
        logbook,
        sa.select(sa.func.max(schema.cycles.c.cycle).label("last")).where(
            schema.cycles.c.run == run_id
        ),
    )
    return int(rows[0]["last"] or 0)


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
    """Notes in order."""
    return _of(logbook, schema.notes, run_id)


def recorder(trip: Row) -> np.ndarray:
    """The flight recorder's rows of a trip, dtype SAMPLE; empty when none was kept.

    Raises ValueError when the stored rows are damaged.
    """
    if not trip["recorder"]:
        return np.empty(0, SAMPLE)
    rows = zlib.decompress(trip["recorder"])
    if zlib.crc32(rows) != trip["recorder_crc32"]:
        raise ValueError("checksum differs")
    return sample_rows(rows)


def sample_chunks(logbook: Logbook, run_id: str) -> Iterator[tuple[Row, np.ndarray]]:
    """Chunk by chunk: the chunk's row and its samples. Raises LogbookError for a damaged one."""
    numbers = _all(
        logbook,
        sa.select(schema.chunks.c.id)
        .where(schema.chunks.c.run == run_id)
        .order_by(schema.chunks.c.number),
    )
    for number in numbers:
        row = _all(logbook, sa.select(schema.chunks).where(schema.chunks.c.id == number["id"]))[0]
        try:
            rows = chunks.unpack(row["data"], row["sha256"])
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


def stop_requested(logbook: Logbook, run_id: str) -> bool:
    """Whether somebody asked for this run to stop since its last resume."""
    query = (
        sa.select(schema.requests.c.id)
        .where(schema.requests.c.run == run_id, schema.requests.c.what == "stop")
        .limit(1)
    )
    return bool(_all(logbook, query))


def clear_requests(logbook: Logbook, run_id: str) -> None:
    """A run begins or resumes: what was asked before no longer counts."""
    try:
        with logbook.engine.begin() as connection:
            connection.execute(schema.requests.delete().where(schema.requests.c.run == run_id))
    except SQLAlchemyError as fault:
        raise worded(logbook.name, fault) from fault
