"""Writing runs. Only the runner writes; a flush is one transaction, on disk before it returns."""

from __future__ import annotations

import os
import platform
import socket
import time
import zlib
from datetime import datetime, timezone
from typing import Any

import sqlalchemy as sa
from sqlalchemy.exc import IntegrityError, SQLAlchemyError

from lodeboard import trips as trip_table

from ..errors import LogbookError
from . import chunks, schema
from .open import Logbook, worded

_CHUNK_ROWS = 8192
LEASE_S = 15.0


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
    """Open a run and return its id, "r0001" and so on; safe with several writers."""
    for _ in range(50):
        try:
            with logbook.engine.begin() as connection:
                last = connection.execute(sa.select(sa.func.max(schema.runs.c.serial))).scalar()
                serial = (last or 0) + 1
                run = f"r{serial:04d}"
                connection.execute(
                    schema.runs.insert(),
                    {
                        "id": run,
                        "serial": serial,
                        "kind": kind,
                        "title": title,
                        "place": place,
                        "started": now_iso(),
                        "meta": meta or {},
                        "sources": sources or {},
                        "resume": {},
                        "resumes": 0,
                        "chain": "",
                        "chunks": 0,
                        "lease_until": 0.0,
                    },
                )
            return run
        except IntegrityError:
            continue  # another writer took the number: take the next
        except SQLAlchemyError as fault:
            raise worded(logbook.name, fault) from fault
    raise LogbookError(
        "no run number could be had",
        at=logbook.name,
        got="50 tries",
        bound="a free number",
        try_="look who else writes this logbook",
    )


def request_stop(logbook: Logbook, run: str) -> None:
    """Ask whoever executes this run to stop it."""
    try:
        with logbook.engine.begin() as connection:
            connection.execute(
                schema.requests.insert(), {"run": run, "what": "stop", "at": now_iso()}
            )
    except SQLAlchemyError as fault:
        raise worded(logbook.name, fault) from fault


class Writer:
    """The one writer of a run, held by a lease. Use as a context manager."""

    def __init__(self, logbook: Logbook, run: str) -> None:
        self.logbook = logbook
        self.run = run
        self.owner = f"{socket.gethostname()}:{os.getpid()}"
        self.rows: list[tuple[sa.Table, dict[str, Any]]] = []
        self.resume: dict[str, Any] | None = None
        self.sample_rows = bytearray()
        self.segment = 0
        self.nonce = 0
        self.entry = 0  # highest journal entry buffered
        self.flushed_entry = 0
        self.trip_bodies: dict[tuple[int, int], bytes] = {}
        self._lease()

    def __enter__(self) -> Writer:
        return self

    def __exit__(self, *_: object) -> None:
        self.release()

    def begin(self, nonce: int, entry: int, segment: int) -> None:
        """A board, by its boot nonce, and the entry up to which everything is on disk."""
        self.nonce = nonce
        self.entry = self.flushed_entry = entry
        self.segment = segment

    def cycle(self, fields: dict[str, int]) -> None:
        """A cycle's account, as the journal gave it."""
        self._journal(schema.cycles, fields)

    def mark(self, fields: dict[str, int]) -> None:
        """A mark of the schedule."""
        self._journal(schema.marks, fields)

    def trip(self, fields: dict[str, int]) -> None:
        """A trip record; attach its recorder later with recorder()."""
        name = trip_table.TABLE.get(fields["code"], (f"code_{fields['code']}", 0))[0]
        self._journal(schema.trips, {**fields, "name": name, "at": now_iso()})

    def seen(self, entry: int) -> None:
        """A journal entry that leaves no row of its own (the end of a program)."""
        self.entry = max(self.entry, entry)

    def recorder(self, entry: int, rows: bytes) -> None:
        """The flight recorder's rows for the trip with this entry."""
        self.trip_bodies[(self.nonce, entry)] = rows

    def checkup(self, after_cycle: int, item: str, result: dict[str, Any]) -> None:
        """What a check-up measured."""
        self.rows.append(
            (
                schema.checkups,
                {"after_cycle": after_cycle, "item": item, "at": now_iso(), "result": result},
            )
        )

    def gap(
        self,
        after_cycle: int,
        why: str,
        first: int | None = None,
        last: int | None = None,
        unnumbered_most: int = 0,
    ) -> None:
        """Cycles that were or may have been pumped and are not on record."""
        self.rows.append(
            (
                schema.gaps,
                {
                    "after_cycle": after_cycle,
                    "first_cycle": first,
                    "last_cycle": last,
                    "unnumbered_most": unnumbered_most,
                    "why": why,
                    "at": now_iso(),
                },
            )
        )

    def note(self, text: str) -> None:
        """Anything worth telling whoever reads the run later."""
        self.rows.append((schema.notes, {"at": now_iso(), "text": text}))

    def samples(self, rows: bytes) -> None:
        """Packed sample rows, in tick order."""
        self.sample_rows += rows

    def flush(self, *, whole: bool = True) -> int:
        """Commit everything; the highest journal entry that is on disk. Raises LogbookError.

        whole=False keeps a part-filled chunk of samples back, so that chunks stay large.
        """
        try:
            with self.logbook.engine.begin() as connection:
                for table, fields in self.rows:
                    self._insert(connection, table, {"run": self.run, **fields})
                self._attach(connection)
                self._write_chunks(connection, whole)
                until = time.time() + LEASE_S
                values: dict[str, Any] = {"lease_until": until, "lease_owner": self.owner}
                if self.resume is not None:
                    values["resume"] = self.resume
                connection.execute(
                    schema.runs.update().where(schema.runs.c.id == self.run).values(**values)
                )
        except SQLAlchemyError as fault:
            raise worded(self.logbook.name, fault) from fault
        self.rows.clear()
        self.trip_bodies.clear()
        if whole or len(self.sample_rows) >= _CHUNK_ROWS * 28:
            self.sample_rows = self.sample_rows[self._whole_bytes(whole) :]
        self.flushed_entry = max(self.flushed_entry, self.entry)
        return self.flushed_entry

    def resume_state(self, state: dict[str, Any]) -> None:
        """What a later --resume needs; on disk with the next flush."""
        self.resume = state

    def resumed(self) -> None:
        """Count one more resume."""
        with self.logbook.engine.begin() as connection:
            connection.execute(
                schema.runs.update()
                .where(schema.runs.c.id == self.run)
                .values(resumes=schema.runs.c.resumes + 1, ended=None, end=None)
            )

    def finish(self, end: str, summary: dict[str, Any]) -> None:
        """Close the run: why it ended, and its figures."""
        self.flush()
        try:
            with self.logbook.engine.begin() as connection:
                connection.execute(
                    schema.runs.update()
                    .where(schema.runs.c.id == self.run)
                    .values(ended=now_iso(), end=end, summary=summary)
                )
        except SQLAlchemyError as fault:
            raise worded(self.logbook.name, fault) from fault

    def release(self) -> None:
        """Give the lease back."""
        try:
            with self.logbook.engine.begin() as connection:
                connection.execute(
                    schema.runs.update()
                    .where(schema.runs.c.id == self.run, schema.runs.c.lease_owner == self.owner)
                    .values(lease_owner=None, lease_until=0.0)
                )
        except SQLAlchemyError:
            pass  # it lapses by itself

    def _journal(self, table: sa.Table, fields: dict[str, Any]) -> None:
        self.entry = max(self.entry, fields["entry"])
        self.rows.append((table, {**fields, "nonce": self.nonce}))

    def _insert(self, connection: sa.Connection, table: sa.Table, fields: dict[str, Any]) -> None:
        """Insert once; a row that is there already must be the same."""
        keys = _KEYS.get(table.name)
        if keys:
            found = (
                connection.execute(
                    sa.select(table).where(
                        table.c.run == self.run, *(table.c[key] == fields[key] for key in keys)
                    )
                )
                .mappings()
                .first()
            )
            if found is not None:
                differing = [
                    name
                    for name, value in fields.items()
                    if name not in ("at", "nonce", "entry") and found[name] != value
                ]
                if differing and table.name != "checkups":
                    text = (
                        f"{table.name} {[fields[key] for key in keys]} came twice and differs in "
                        + ", ".join(differing)
                    )
                    connection.execute(
                        schema.notes.insert(), {"run": self.run, "at": now_iso(), "text": text}
                    )
                return
        connection.execute(table.insert(), fields)

    def _attach(self, connection: sa.Connection) -> None:
        for (nonce, entry), rows in self.trip_bodies.items():
            data, _ = chunks.pack(rows)
            connection.execute(
                schema.trips.update()
                .where(
                    schema.trips.c.run == self.run,
                    schema.trips.c.nonce == nonce,
                    schema.trips.c.entry == entry,
                )
                .values(recorder=data, recorder_crc32=zlib.crc32(rows))
            )

    def _whole_bytes(self, whole: bool) -> int:
        size = len(self.sample_rows)
        return size if whole else size // (_CHUNK_ROWS * 28) * (_CHUNK_ROWS * 28)

    def _write_chunks(self, connection: sa.Connection, whole: bool) -> None:
        end = self._whole_bytes(whole)
        if not end:
            return
        row = connection.execute(
            sa.select(schema.runs.c.chain, schema.runs.c.chunks).where(schema.runs.c.id == self.run)
        ).one()
        chain, number = row.chain, row.chunks
        for at in range(0, end, _CHUNK_ROWS * 28):
            rows = bytes(self.sample_rows[at : min(at + _CHUNK_ROWS * 28, end)])
            data, sha256 = chunks.pack(rows)
            chain = chunks.link(chain, sha256)
            number += 1
            connection.execute(
                schema.chunks.insert(),
                {
                    "run": self.run,
                    "number": number,
                    "segment": self.segment,
                    "first_tick": int.from_bytes(rows[:4], "little"),
                    "last_tick": int.from_bytes(rows[-28:-24], "little"),
                    "rows": len(rows) // 28,
                    "data": data,
                    "sha256": sha256,
                    "chain": chain,
                },
            )
        connection.execute(
            schema.runs.update()
            .where(schema.runs.c.id == self.run)
            .values(chain=chain, chunks=number)
        )

    def _lease(self) -> None:
        """Take the run for ourselves, or say who has it."""
        try:
            with self.logbook.engine.begin() as connection:
                taken = connection.execute(
                    schema.runs.update()
                    .where(
                        schema.runs.c.id == self.run,
                        sa.or_(
                            schema.runs.c.lease_until < time.time(),
                            schema.runs.c.lease_owner.is_(None),
                            schema.runs.c.lease_owner.in_(_gone_owners(connection, self.run)),
                        ),
                    )
                    .values(lease_owner=self.owner, lease_until=time.time() + LEASE_S)
                ).rowcount
                owner = connection.execute(
                    sa.select(schema.runs.c.lease_owner).where(schema.runs.c.id == self.run)
                ).scalar_one_or_none()
        except SQLAlchemyError as fault:
            raise worded(self.logbook.name, fault) from fault
        if not taken:
            raise LogbookError(
                "another process is writing this run",
                at=f"{self.logbook.name}, run {self.run}",
                got=f"held by {owner}" if owner else "no such run",
                bound="one writer a run",
                try_="end that process first, or wait until its lease has lapsed",
            )


def _gone_owners(connection: sa.Connection, run: str) -> list[str]:
    """The run's owner, if it was a process of this machine that is no longer there."""
    owner = connection.execute(
        sa.select(schema.runs.c.lease_owner).where(schema.runs.c.id == run)
    ).scalar_one_or_none()
    if not owner or ":" not in owner:
        return []
    host, _, pid = owner.rpartition(":")
    if host != socket.gethostname() or platform.system() == "Windows":
        return []
    try:
        os.kill(int(pid), 0)
    except ProcessLookupError:
        return [owner]
    except (OSError, ValueError):
        pass
    return []


_KEYS = {
    "cycles": ("cycle",),
    "trips": ("nonce", "entry"),
    "marks": ("nonce", "entry"),
    "checkups": ("after_cycle", "item"),
}
