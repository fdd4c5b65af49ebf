"""Is a logbook whole? Every check that the stored sums and numbers allow, problems in words."""

from __future__ import annotations

import sqlalchemy as sa
from sqlalchemy.exc import SQLAlchemyError

from . import chunks, reader, schema
from .open import Logbook


def verify(logbook: Logbook, run: str | None = None) -> list[str]:
    """Problems found, each one line; an empty list means that the logbook is whole."""
    problems = _database(logbook)
    if problems:
        return problems
    for row in reader.runs(logbook):
        if run in (None, row["id"]):
            problems += [f"run {row['id']}: {text}" for text in _run(logbook, row)]
    return problems


def _database(logbook: Logbook) -> list[str]:
    if logbook.engine.dialect.name != "sqlite":
        return []
    try:
        with logbook.engine.connect() as connection:
            rows = connection.execute(sa.text("PRAGMA integrity_check")).scalars().all()
    except SQLAlchemyError as fault:
        return [f"the database file is damaged: {str(fault).splitlines()[0]}"]
    return [f"the database file is damaged: {text}" for text in rows if text != "ok"]


def _run(logbook: Logbook, run: reader.Row) -> list[str]:
    return _cycles(logbook, run) + _chain(logbook, run) + _recorders(logbook, run)


def _cycles(logbook: Logbook, run: reader.Row) -> list[str]:
    """Cycles count from 1 without hole or repeat, except for gaps on record."""
    numbers = [row["cycle"] for row in reader.cycles(logbook, run["id"])]
    excused: set[int] = set()
    for gap in reader.gaps(logbook, run["id"]):
        if gap["first_cycle"] is not None:
            excused |= set(range(gap["first_cycle"], gap["last_cycle"] + 1))
    missing = sorted(set(range(1, max(numbers, default=0) + 1)) - set(numbers) - excused)
    problems = []
    if missing:
        problems.append(f"cycles missing without a gap on record: {_short(missing)}")
    if len(numbers) != len(set(numbers)):
        problems.append("a cycle stands twice")
    counted = (run["summary"] or {}).get("cycles_done")
    if counted is not None and run["ended"] and counted != max(numbers, default=0):
        problems.append(f"its summary counts {counted} cycles, its rows {max(numbers, default=0)}")
    return problems


def _chain(logbook: Logbook, run: reader.Row) -> list[str]:
    """Chunks numbered from 1, each whole, chained to the end that the run remembers."""
    problems = []
    chain = ""
    number = 0
    for row in reader._of(logbook, schema.chunks, run["id"], "number"):
        number += 1
        if row["number"] != number:
            problems.append(f"chunk {number} of the samples is missing")
            number = row["number"]
        try:
            rows = chunks.unpack(row["data"], row["sha256"])
            if len(rows) != 28 * row["rows"]:
                problems.append(f"chunk {number} holds {len(rows) // 28} rows, not {row['rows']}")
        except ValueError as fault:
            problems.append(f"chunk {number} of the samples: {fault}")
        chain = chunks.link(chain, row["sha256"])
        if chain != row["chain"]:
            problems.append(f"chunk {number} of the samples is not the one that followed here")
            chain = row["chain"]
    if number != run["chunks"]:
        problems.append(f"{run['chunks']} chunks of samples were written, the last is {number}")
    elif chain != run["chain"]:
        problems.append("the chain of sample chunks does not end where the run remembers")
    return problems


def _recorders(logbook: Logbook, run: reader.Row) -> list[str]:
    problems = []
    for trip in reader.trips(logbook, run["id"]):
        try:
            reader.recorder(trip)
        except Exception as fault:
            problems.append(f"flight recorder of trip {trip['trip_serial']}: {fault}")
    return problems


def _short(numbers: list[int]) -> str:
    text = ", ".join(str(number) for number in numbers[:8])
    return text + (f" and {len(numbers) - 8} more" if len(numbers) > 8 else "")
