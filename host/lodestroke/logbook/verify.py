"""Is a logbook whole? Every check that the stored sums and numbers allow, problems in words."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator

import sqlalchemy as sa
from sqlalchemy.exc import SQLAlchemyError

from ..errors import LogbookError
from . import chunks, journal, reader, schema
from .open import Logbook

_PAGE = 20_000


def verify(logbook: Logbook, run: str | None = None) -> list[str]:
    """Problems found, each one line; an empty list means that the logbook (or the run) is whole."""
    problems = _database(logbook)
    if problems:
        return problems
    for row in reader.runs(logbook):
        if run in (None, row["id"]):
            problems += [f"run {row['id']}: {text}" for text in _guarded(logbook, row)]
    return problems


def _guarded(logbook: Logbook, run: reader.Row) -> list[str]:
    """A run's problems, also when a damaged row stops the looking."""
    problems: list[str] = []
    try:
        for text in _run(logbook, run):
            problems.append(text)
    except LogbookError as fault:
        problems.append(f"{fault.what}: {fault.got}")
    except (TypeError, ValueError, AttributeError) as fault:  # a number that is text by now, say
        problems.append(f"a row cannot be understood: {fault}")
    return problems


def _database(logbook: Logbook) -> list[str]:
    """What SQLite finds by itself: pages, indexes, and rows whose run is gone."""
    if logbook.engine.dialect.name != "sqlite":
        return []
    try:
        with logbook.engine.connect() as connection:
            rows = connection.execute(sa.text("PRAGMA integrity_check")).scalars().all()
            lost = connection.execute(sa.text("PRAGMA foreign_key_check")).all()
    except SQLAlchemyError as fault:
        text = str(getattr(fault, "orig", fault)).splitlines()[0]
        return [f"the database file is damaged: {text}"]
    problems = [f"the database file is damaged: {text}" for text in rows if text != "ok"]
    tables = sorted({row[0] for row in lost})
    return problems + [f"rows of {table} belong to a run that is not there" for table in tables]


def _run(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    yield from _own_row(logbook, run)
    yield from _cycles(logbook, run)
    yield from _rows(logbook, run)
    yield from _counts(logbook, run)
    yield from _chain(logbook, run)
    for trip in reader.trips(logbook, run["id"]):
        try:
            reader.recorder(trip)
        except ValueError as fault:
            yield f"flight recorder of trip {trip['trip_serial']}: {fault}"
    for note in reader.notes(logbook, run["id"]):
        if note["kind"] == "problem":
            yield f"noted at {note['at'][:19]}: {note['text']}"


def _own_row(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    """What the run was and how it ended; its kept texts still have the sums taken of them."""
    whole = reader.run(logbook, run["id"])
    if journal.made_sum(whole) != whole["made_crc32"]:
        yield "what it was made from was altered since"
    if bool(whole["ended"]) != (whole["closed_crc32"] is not None):
        yield "it is neither open nor closed"
    elif whole["ended"] and journal.closed_sum(whole) != whole["closed_crc32"]:
        yield "how it ended was altered since"
    sums = whole["meta"].get("sha256") or {}
    for role, text in whole["sources"].items():
        if role in sums and hashlib.sha256(text.encode()).hexdigest() != sums[role]:
            yield f"the kept {role} file is not the one that was run: its SHA-256 differs"


def _cycles(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    """Cycles count from 1 without hole or repeat, except for gaps on record."""
    excused: set[int] = set()
    for gap in reader.gaps(logbook, run["id"]):
        if gap["first_cycle"] is not None and gap["last_cycle"] is not None:
            excused |= set(range(gap["first_cycle"], gap["last_cycle"] + 1))
    table = schema.cycles.c
    missing: list[int] = []
    last = 0
    with logbook.read() as connection:
        query = sa.select(table.cycle).where(table.run == run["id"]).order_by(table.cycle)
        for number in connection.execute(query.execution_options(yield_per=_PAGE)).scalars():
            if number <= last:
                yield f"cycle {number} stands twice or counts from below 1"
            missing += [lost for lost in range(last + 1, number) if lost not in excused]
            last = max(last, number)
    if missing:
        yield f"cycles missing without a gap on record: {_short(missing)}"
    counted = (run["summary"] or {}).get("cycles_done")
    if counted is not None and run["ended"] and counted != last:
        yield f"its summary counts {counted} cycles, its rows {last}"


def _rows(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    """Each row still has the checksum that it was written with."""
    for name, table in schema.COUNTED.items():
        bad: list[int] = []
        wanted = [column for column in table.c if column.name != "recorder"]
        with logbook.read() as connection:
            query = sa.select(*wanted).where(table.c.run == run["id"]).order_by(table.c.id)
            rows = connection.execute(query.execution_options(yield_per=_PAGE)).mappings()
            for row in rows:
                if journal.row_sum(table, dict(row)) != row["crc32"]:
                    bad.append(row["cycle"] if name == "cycles" else row["id"])
        if bad:
            yield f"{name} altered since they were written: {_short(bad)}"


def _counts(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    """As many rows as the run's account says were written, and as its summary says."""
    with logbook.read() as connection:
        totals = journal.totals(connection, run["id"])
    for name, found in totals.items():
        written = run["counts"].get(name, 0)
        if found != written:
            yield f"{written} {name} were written, {found} are there"
    listed = (run["summary"] or {}).get("trips")
    if run["ended"] and isinstance(listed, list) and len(listed) > totals["trips"]:
        yield f"its summary lists {len(listed)} trips, its rows {totals['trips']}"


def _chain(logbook: Logbook, run: reader.Row) -> Iterator[str]:
    """Chunks numbered from 1, each whole, chained from the run's id to where the run remembers."""
    chain = run["id"]
    number = 0
    for row in reader.stored_chunks(logbook, run["id"]):
        number += 1
        if row["number"] != number:
            yield f"chunk {_span(number, row['number'] - 1)} of the samples is missing"
            number = row["number"]
        yield from (f"chunk {number} of the samples: {text}" for text in _chunk(row))
        chain = chunks.link(
            chain, row["sha256"], number, row["segment"], row["first_tick"], row["last_tick"]
        )
        if chain != row["chain"]:
            yield f"chunk {number} of the samples is not the one that followed here"
            chain = row["chain"]
    if number != run["chunks"]:
        yield f"{run['chunks']} chunks of samples were written, the last is {number}"
    elif chain != run["chain"]:
        yield "the chain of sample chunks does not end where the run remembers"


def _chunk(row: reader.Row) -> Iterator[str]:
    try:
        rows = chunks.unpack(row["data"], row["sha256"], row["codec"])
    except ValueError as fault:
        yield str(fault)
        return
    if len(rows) != row["row_bytes"] * row["rows"]:
        yield f"holds {len(rows)} bytes, not {row['rows']} rows of {row['row_bytes']}"
    elif chunks.ticks(rows) != (row["first_tick"], row["last_tick"]):
        yield "its ticks are not those it was filed under"


def _span(first: int, last: int) -> str:
    return str(first) if first == last else f"{first} to {last}"


def _short(numbers: list[int]) -> str:
    text = ", ".join(str(number) for number in numbers[:8])
    return text + (f" and {len(numbers) - 8} more" if len(numbers) > 8 else "")
