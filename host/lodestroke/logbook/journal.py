"""Rows of a run, each with its checksum, inserted once however often they are sent."""

from __future__ import annotations

import zlib
from collections.abc import Mapping
from typing import Any

import sqlalchemy as sa

from . import schema
from .open import as_json

# what makes a row the same row; a table that is not named here takes every row
KEYS = {
    "cycles": ("cycle",),
    "trips": ("nonce", "entry"),
    "marks": ("nonce", "entry"),
    "checkups": ("after_cycle", "item"),
    "gaps": ("first_cycle", "last_cycle"),
}
# may differ in a row that comes again: when it came, and under which number
_MAY_DIFFER = {"at", "nonce", "entry", "segment", "crc32", "recorder", "recorder_crc32"}
_NOT_SUMMED = {"id", "crc32", "recorder", "recorder_crc32"}
_AT_ONCE = 500  # keys in one question


def columns(table: sa.Table) -> list[str]:
    """What a caller has to give for a row."""
    return [
        column.name
        for column in table.c
        if column.name not in _NOT_SUMMED | {"run", "nonce", "segment", "at"}
    ]


def row_sum(table: sa.Table, row: Mapping[str, Any]) -> int:
    """CRC-32 (IEEE 802.3) of a row's values in column order, with the run and the table's name."""
    values = [row[column.name] for column in table.c if column.name not in _NOT_SUMMED]
    return zlib.crc32(as_json([table.name, *values], sort_keys=True).encode())


def made_sum(run: Mapping[str, Any]) -> int:
    """CRC-32 of what never changes in a run's own row."""
    names = ("id", "serial", "kind", "title", "place", "started", "meta", "sources")
    return zlib.crc32(as_json([run[name] for name in names], sort_keys=True).encode())


def closed_sum(run: Mapping[str, Any]) -> int:
    """CRC-32 of how a run ended."""
    names = ("id", "ended", "end", "summary")
    return zlib.crc32(as_json([run[name] for name in names], sort_keys=True).encode())


def put(
    connection: sa.Connection, table: sa.Table, rows: list[dict[str, Any]]
) -> tuple[int, list[str]]:
    """Insert what is not there yet: how many rows that were, and what came twice and differs."""
    keys = KEYS.get(table.name, ())
    known = _known(connection, table, rows, keys) if keys else {}
    new, problems = [], []
    for row in rows:
        key = tuple(row[name] for name in keys)
        if keys and None not in key:
            before = known.get(key)
            if before is not None:
                differing = _differing(before, row)
                if differing and table.name != "checkups":
                    what = ", ".join(
                        f"{name} {value}" for name, value in zip(keys, key, strict=True)
                    )
                    problems.append(
                        f"{table.name}, {what}: came twice and differs in {differing}; "
                        "the first is kept"
                    )
                continue
            known[key] = row
        new.append({**row, "crc32": row_sum(table, row)})
    if new:
        connection.execute(table.insert(), new)
    return len(new), problems


def _known(
    connection: sa.Connection, table: sa.Table, rows: list[dict[str, Any]], keys: tuple[str, ...]
) -> dict[tuple[Any, ...], Mapping[str, Any]]:
    """Rows on disk that could be one of these, by key."""
    found: dict[tuple[Any, ...], Mapping[str, Any]] = {}
    wanted = sorted({row[keys[-1]] for row in rows if row[keys[-1]] is not None})
    for start in range(0, len(wanted), _AT_ONCE):
        query = sa.select(table).where(
            table.c.run == rows[0]["run"],
            table.c[keys[-1]].in_(wanted[start : start + _AT_ONCE]),
        )
        for row in connection.execute(query).mappings():
            found[tuple(row[name] for name in keys)] = dict(row)
    return found


def _differing(before: Mapping[str, Any], row: dict[str, Any]) -> str:
    return ", ".join(
        f"{name} ({before[name]}, then {value})"
        for name, value in row.items()
        if name not in _MAY_DIFFER and before[name] != value
    )


def totals(connection: sa.Connection, run: str) -> dict[str, int]:
    """Rows on disk, by table."""
    return {
        name: int(
            connection.execute(
                sa.select(sa.func.count()).select_from(table).where(table.c.run == run)
            ).scalar_one()
        )
        for name, table in schema.COUNTED.items()
    }
