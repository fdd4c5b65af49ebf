"""Runs as files: CSV or Parquet, one per table, every column with its unit in its name."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

from ..errors import LogbookError
from ..rows import SAMPLE
from . import reader
from .open import Logbook

FORMATS = ("csv", "parquet")

_I, _T = pa.int64(), pa.string()
_CYCLES = [
    (name, _I)
    for name in (
        "cycle",
        "tick",
        "duration_ticks",
        "chamber_max_pa",
        "chamber_min_pa",
        "chamber_mean_pa",
        "outlet_max_pa",
        "outlet_mean_pa",
        "outlet_reverse_max_pa",
        "inlet_reverse_max_pa",
        "held_ticks",
        "coil_peak_ma",
        "winding_cc",
        "step",
    )
]
_TRIPS = [
    ("trip_serial", _I),
    ("code", _I),
    ("name", _T),
    ("channel", _I),
    ("stop_category", _I),
    ("tick", _I),
    ("value", _I),
    ("limit", _I),
    ("step", _I),
    ("at", _T),
]
_MARKS = [("tick", _I), ("mark", _I), ("step", _I)]
_GAPS = [
    ("after_cycle", _I),
    ("first_cycle", _I),
    ("last_cycle", _I),
    ("unnumbered_most", _I),
    ("why", _T),
    ("at", _T),
]
_CHECKUPS = [
    ("after_cycle", _I),
    ("item", _T),
    ("at", _T),
    ("quantity", _T),
    ("value", pa.float64()),
    ("text", _T),
]
# units that a bare column name does not carry: spelled out in the files
_RENAME = {
    "at": "at_utc",
    "winding_cc": "winding_centi_degc",
    "tick": "tick_index",
    "cycle": "cycle",
}


def export(
    logbook: Logbook, run: str, fmt: str, folder: str | Path, *, force: bool = False
) -> list[Path]:
    """Write a run's tables into a folder; the files written. Raises LogbookError."""
    if fmt not in FORMATS:
        raise LogbookError(
            "unknown format",
            at="--format",
            got=fmt,
            bound=", ".join(FORMATS),
            try_="choose one of these",
        )
    run = reader.resolve(logbook, run)
    out = Path(folder)
    names = ("cycles", "trips", "checkups", "marks", "gaps", "samples")
    targets = {name: out / f"{name}.{fmt}" for name in names}
    try:
        out.mkdir(parents=True, exist_ok=True)
        for target in targets.values():
            if target.exists() and not force:
                raise LogbookError(
                    "a file of that name is there already",
                    at=str(target),
                    got="an existing file",
                    bound="a new file",
                    try_="name another folder with --out, or use --force",
                )
        tables = _tables(logbook, run)
        for name, (columns, rows) in tables.items():
            _write(targets[name], fmt, [_table(columns, rows)], _schema(columns))
        batches = (
            _samples(row["segment"], rows) for row, rows in reader.sample_chunks(logbook, run)
        )
        _write(targets["samples"], fmt, batches, _SAMPLE_SCHEMA)
    except OSError as fault:
        raise LogbookError(
            "the export cannot be written",
            at=str(out),
            got=str(fault),
            bound="a folder that can be written, with room on its disk",
            try_="name another with --out",
        ) from fault
    return list(targets.values())


def _tables(
    logbook: Logbook, run: str
) -> dict[str, tuple[list[tuple[str, pa.DataType]], list[reader.Row]]]:
    flat = []
    for row in reader.checkups(logbook, run):
        for quantity, value in row["result"].items():
            number = isinstance(value, int | float) and not isinstance(value, bool)
            flat.append(
                {
                    **row,
                    "quantity": quantity,
                    "value": float(value) if number else None,
                    "text": None if number else str(value),
                }
            )
    return {
        "cycles": (_CYCLES, reader.cycles(logbook, run)),
        "trips": (_TRIPS, reader.trips(logbook, run)),
        "checkups": (_CHECKUPS, flat),
        "marks": (_MARKS, reader.marks(logbook, run)),
        "gaps": (_GAPS, reader.gaps(logbook, run)),
    }


def _schema(columns: list[tuple[str, pa.DataType]]) -> pa.Schema:
    return pa.schema([(_RENAME.get(name, name), kind) for name, kind in columns])


def _table(columns: list[tuple[str, pa.DataType]], rows: list[reader.Row]) -> pa.Table:
    arrays = [pa.array([row[name] for row in rows], kind) for name, kind in columns]
    return pa.Table.from_arrays(arrays, schema=_schema(columns))


_SAMPLE_SCHEMA = pa.schema(
    [("segment", pa.int64())]
    + [(_RENAME.get(name, name), pa.int64()) for name in SAMPLE.names or ()]
)


def _samples(segment: int, rows) -> pa.Table:  # type: ignore[no-untyped-def]
    arrays = [pa.array([segment] * len(rows), pa.int64())]
    arrays += [pa.array(rows[name].astype("int64")) for name in SAMPLE.names or ()]
    return pa.Table.from_arrays(arrays, schema=_SAMPLE_SCHEMA)


def _write(target: Path, fmt: str, tables: Iterable[pa.Table], schema: pa.Schema) -> None:
    """Table by table into a temporary file, then into place: a reader never sees half of it."""
    part = target.with_name(target.name + f".{os.getpid()}.part")
    try:
        if fmt == "csv":
            with pa.csv.CSVWriter(str(part), schema) as writer:
                for table in tables:
                    writer.write_table(table)
        else:
            with pa.parquet.ParquetWriter(str(part), schema) as writer:
                for table in tables:
                    writer.write_table(table)
        os.replace(part, target)
    finally:
        part.unlink(missing_ok=True)
