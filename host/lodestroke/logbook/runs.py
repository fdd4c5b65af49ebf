"""Opening runs, and asking for one to be stopped."""

from __future__ import annotations

from datetime import datetime, timezone
from typing import Any

import sqlalchemy as sa
from sqlalchemy.exc import IntegrityError

from ..errors import LogbookError
from . import journal, schema
from .open import Logbook

KINDS = ("dry-run", "run", "endure")


def now_iso() -> str:
    """UTC, to the millisecond."""
    return datetime.now(timezone.utc).isoformat(timespec="milliseconds")


def new_run(
    logbook: Logbook,
    kind: str,
    *,
    title: str = "",
    place: str = "",
    meta: dict[str, Any] | None = None,
    sources: dict[str, str] | None = None,
) -> str:
    """Open a run of one of KINDS and return its id, "r0001" and so on; safe with several writers.

    meta: names, hashes, versions, seed; sources: the full texts of rig, schedule and plan by role.
    Raises LogbookError.
    """
    if kind not in KINDS:
        raise ValueError(f"a run is one of {', '.join(KINDS)}, not {kind!r}")
    row: dict[str, Any] = {
        "kind": kind,
        "title": title,
        "place": place,
        "started": now_iso(),
        "meta": meta or {},
        "sources": sources or {},
        "resume": {},
        "resumes": 0,
        "chunks": 0,
        "counts": {},
        "lease_until": 0.0,
    }
    for _ in range(50):
        try:
            with logbook.write() as connection:
                last = connection.execute(sa.select(sa.func.max(schema.runs.c.serial))).scalar()
                serial = int(last or 0) + 1
                run = f"r{serial:04d}"
                row |= {"id": run, "serial": serial, "chain": run}
                connection.execute(
                    schema.runs.insert(), {**row, "made_crc32": journal.made_sum(row)}
                )
            return run
        except LogbookError as fault:
            if not isinstance(fault.__cause__, IntegrityError):
                raise  # else another writer took the number: take the next
    raise LogbookError(
        "no run number could be had",
        at=logbook.name,
        got="50 tries",
        bound="a free number",
        try_="look who else writes this logbook",
    )


def request_stop(logbook: Logbook, run: str) -> None:
    """Ask whoever executes this run (an id, or "last") to stop it. Raises LogbookError."""
    from .names import resolve

    row = {"run": resolve(logbook, run), "what": "stop", "at": now_iso()}
    with logbook.write() as connection:
        connection.execute(schema.requests.insert(), row)


def stop_requested(logbook: Logbook, run: str) -> bool:
    """Whether somebody asked for this run to stop since it began or was last resumed."""
    asked = schema.requests.c
    with logbook.read() as connection:
        found = connection.execute(
            sa.select(asked.id).where(asked.run == run, asked.what == "stop").limit(1)
        ).first()
    return found is not None


def clear_requests(logbook: Logbook, run: str) -> None:
    """A run begins or resumes: what was asked before no longer counts."""
    with logbook.write() as connection:
        connection.execute(schema.requests.delete().where(schema.requests.c.run == run))
