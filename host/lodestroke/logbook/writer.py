"""Writing a run. Only the runner writes; a flush is one transaction, on disk before it returns."""

from __future__ import annotations

import contextlib
import zlib
from typing import Any

import sqlalchemy as sa

from lodeboard import trips as trip_table

from ..errors import LogbookError
from . import chunks, journal, lease, schema
from .open import Logbook
from .runs import now_iso


class Writer:
    """The one writer of a run, held by a lease. Use as a context manager.

    Rows are buffered until flush(). One that fails (a full disk) keeps them for the next.
    """

    def __init__(self, logbook: Logbook, run: str) -> None:
        self.logbook = logbook
        self.run = run
        self.rows: list[tuple[sa.Table, dict[str, Any]]] = []
        self.buffer = chunks.Buffer()
        self.recorders: dict[tuple[int, int], bytes] = {}
        self.values: dict[str, Any] = {}  # columns of the run's own row
        self.segment = 0
        self.nonce = 0
        self.entry = 0  # highest journal entry buffered
        self.flushed_entry = 0
        self.owner = lease.take(logbook, run)

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

    def trip(self, fields: dict[str, int], recorder: bytes | None = None) -> None:
        """A trip record; its recorder's rows with it, or later with recorder()."""
        name = trip_table.TABLE.get(fields["code"], (f"code_{fields['code']}", 0))[0]
        self._journal(schema.trips, {**fields, "name": name}, at=now_iso())
        if recorder is not None:
            self.recorder(fields["entry"], recorder)

    def seen(self, entry: int) -> None:
        """A journal entry that leaves no row of its own (the end of a program)."""
        self.entry = max(self.entry, entry)

    def recorder(self, entry: int, rows: bytes) -> None:
        """The flight recorder's rows for the trip with this entry."""
        self.recorders[(self.nonce, entry)] = rows

    def checkup(self, after_cycle: int, item: str, result: dict[str, Any]) -> None:
        """What a check-up measured; quantities carry their unit in their name."""
        row = {"after_cycle": after_cycle, "item": item, "at": now_iso(), "result": result}
        self._row(schema.checkups, row)

    def gap(
        self,
        after_cycle: int,
        why: str,
        first: int | None = None,
        last: int | None = None,
        unnumbered_most: int = 0,
    ) -> None:
        """Cycles that were or may have been pumped and are not on record."""
        self._row(
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

    def note(self, text: str) -> None:
        """Anything worth telling whoever reads the run later."""
        self._row(schema.notes, _note("note", text))

    def samples(self, rows: bytes) -> None:
        """Packed sample rows, in tick order. Raises ValueError for a part of a row."""
        self.buffer.add(self.segment, rows)

    def resume_state(self, state: dict[str, Any]) -> None:
        """What a later --resume needs; on disk with the next flush."""
        self.values["resume"] = state

    def flush(self, *, whole: bool = True) -> int:
        """Commit everything; the highest journal entry that is on disk. Raises LogbookError.

        whole=False keeps a part-filled chunk of samples back for some seconds, so that chunks stay
        large; journal rows are always written.
        """
        pieces = self.buffer.due(whole)
        with self.logbook.write() as connection:
            account = lease.renew(connection, self.logbook, self.run, self.owner)
            values = {**self.values, **self._write_rows(connection, account)}
            self._attach(connection)
            if pieces:
                values |= self._write_chunks(connection, account, pieces)
            if values:
                connection.execute(
                    schema.runs.update().where(schema.runs.c.id == self.run).values(**values)
                )
        self.rows.clear()
        self.recorders.clear()
        self.values.clear()
        self.buffer.drop(pieces)
        self.flushed_entry = max(self.flushed_entry, self.entry)
        return self.flushed_entry

    def resumed(self) -> None:
        """Count one more resume; the run is open again. On disk when it returns."""
        self.values |= {"resumes": schema.runs.c.resumes + 1, "ended": None, "end": None}
        self.values["closed_crc32"] = None
        self.flush()

    def finish(self, end: str, summary: dict[str, Any]) -> None:
        """Close the run with everything buffered: why it ended, and its figures."""
        closing = {"ended": now_iso(), "end": end, "summary": summary}
        total = journal.closed_sum({"id": self.run, **closing})
        self.values |= {**closing, "closed_crc32": total}
        self.flush()

    def release(self) -> None:
        """Give the lease back. Never raises: it lapses by itself."""
        with contextlib.suppress(LogbookError), self.logbook.write() as connection:
            lease.give_back(connection, self.run, self.owner)

    def _row(self, table: sa.Table, fields: dict[str, Any]) -> None:
        self.rows.append((table, {"run": self.run, **fields}))

    def _journal(self, table: sa.Table, fields: dict[str, Any], **more: Any) -> None:
        missing = [name for name in journal.columns(table) if name not in fields]
        if missing:
            raise ValueError(f"a row of {table.name} lacks {', '.join(missing)}")
        wanted = {name: fields[name] for name in journal.columns(table)}
        self._row(table, {**wanted, **more, "nonce": self.nonce, "segment": self.segment})
        self.entry = max(self.entry, fields["entry"])

    def _write_rows(self, connection: sa.Connection, account: sa.RowMapping) -> dict[str, Any]:
        """Buffered rows, table by table, and notes of what came twice and differs."""
        if not self.rows:
            return {}
        counts = dict(account["counts"])
        grouped: dict[str, list[dict[str, Any]]] = {}
        for table, row in self.rows:
            grouped.setdefault(table.name, []).append(row)
        notes = grouped.pop("notes", [])
        for name, rows in grouped.items():
            new, problems = journal.put(connection, schema.COUNTED[name], rows)
            counts[name] = counts.get(name, 0) + new
            notes += self._told_once(connection, problems)
        if notes:
            new, _ = journal.put(connection, schema.notes, notes)
            counts["notes"] = counts.get("notes", 0) + new
        return {"counts": counts}

    def _told_once(self, connection: sa.Connection, problems: list[str]) -> list[dict[str, Any]]:
        """Notes of problems that are not on record yet: a board may resend one many times."""
        if not problems:
            return []
        notes = schema.notes.c
        told = set(
            connection.execute(
                sa.select(notes.text).where(notes.run == self.run, notes.kind == "problem")
            ).scalars()
        )
        return [
            {"run": self.run, **_note("problem", text)} for text in problems if text not in told
        ]

    def _attach(self, connection: sa.Connection) -> None:
        trips = schema.trips
        for (nonce, entry), rows in self.recorders.items():
            connection.execute(
                trips.update()
                .where(trips.c.run == self.run, trips.c.nonce == nonce, trips.c.entry == entry)
                .values(recorder=chunks.pack(rows)[0], recorder_crc32=zlib.crc32(rows))
            )

    def _write_chunks(
        self, connection: sa.Connection, account: sa.RowMapping, pieces: list[tuple[int, bytes]]
    ) -> dict[str, Any]:
        chain, number = account["chain"], account["chunks"]
        for segment, rows in pieces:
            data, sha256 = chunks.pack(rows)
            first, last = chunks.ticks(rows)
            number += 1
            chain = chunks.link(chain, sha256, number, segment, first, last)
            connection.execute(
                schema.chunks.insert(),
                {
                    "run": self.run,
                    "number": number,
                    "segment": segment,
                    "first_tick": first,
                    "last_tick": last,
                    "rows": len(rows) // chunks.ROW_BYTES,
                    "row_bytes": chunks.ROW_BYTES,
                    "codec": chunks.CODEC,
                    "data": data,
                    "sha256": sha256,
                    "chain": chain,
                },
            )
        return {"chain": chain, "chunks": number}


def _note(kind: str, text: str) -> dict[str, Any]:
    return {"at": now_iso(), "kind": kind, "text": text}
