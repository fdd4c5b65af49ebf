"""Runs as files: CSV or Parquet, one per table, every column with its unit in its name."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from pathlib import Path

import pyarrow as pa
import pyarrow.csv
import pyarrow.parquet

from ..errors import LodestrokeError, LogbookError
from . import columns, reader
from .faults import damaged
from .open import Logbook
from .source import rig_of

FORMATS = ("csv", "parquet")
NAMES = ("cycles", "trips", "checkups", "marks", "gaps", "samples", "recorder")

_File = tuple[pa.Schema, Iterable[pa.Table]]


def export(
    logbook: Logbook, run: str, fmt: str, folder: str | Path, *, force: bool = False
) -> list[Path]:
    """Write a run's tables into a folder; the files written. Raises LogbookError.

    All files are written beside their places first and moved there together at the end, so that a
    failure (a damaged chunk, a full disk) leaves what was there before. Memory stays bounded.
    """
    if fmt not in FORMATS:
        raise LogbookError(
            "unknown format",
            at="--format",
            got=fmt,
            bound=", ".join(FORMATS),
            try_="choose one of these",
        )
    files = _files(logbook, reader.run(logbook, run))
    targets = {name: Path(folder) / f"{name}.{fmt}" for name in files}
    parts = {
        name: target.with_name(f"{target.name}.{os.getpid()}.part")
        for name, target in targets.items()
    }
    try:
        _prepare(Path(folder), targets.values(), force)
        for name, (schema, tables) in files.items():
            _write(parts[name], fmt, schema, tables)
        for name, target in targets.items():
            os.replace(parts[name], target)
    except OSError as fault:
        raise LogbookError(
            "the export cannot be written",
            at=str(folder),
            got=str(fault),
            bound="a folder that can be written, with room on its disk",
            try_="name another with --out",
        ) from fault
    except (TypeError, ValueError, pa.ArrowException) as fault:  # a number that is text by now, say
        raise damaged(f"{logbook.name}, run {run}", fault) from fault
    finally:
        _sweep(parts.values())
    return list(targets.values())


def _prepare(folder: Path, targets: Iterable[Path], force: bool) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    for target in targets:
        if target.exists() and not force:
            raise LogbookError(
                "a file of that name is there already",
                at=str(target),
                got="an existing file",
                bound="a new file",
                try_="name another folder with --out, or use --force",
            )


def _sweep(parts: Iterable[Path]) -> None:
    for part in parts:
        try:
            part.unlink(missing_ok=True)
        except OSError:  # its folder could not be made in the first place
            return


def _files(logbook: Logbook, run: reader.Row) -> dict[str, _File]:
    """What goes into each file; tables are read when they are written."""
    tick_ms, run_id = _tick_ms(run), run["id"]
    rows = {
        "cycles": reader.cycle_pages(logbook, run_id),
        "trips": [reader.trips(logbook, run_id)],
        "checkups": [columns.quantities(reader.checkups(logbook, run_id))],
        "marks": [reader.marks(logbook, run_id)],
        "gaps": [reader.gaps(logbook, run_id)],
    }
    files: dict[str, _File] = {
        name: (columns.schema(name), _pages(name, pages, tick_ms)) for name, pages in rows.items()
    }
    files["samples"] = (
        columns.sample_schema("segment"),
        (
            columns.sample_table("segment", row["segment"], samples, tick_ms)
            for row, samples in reader.sample_chunks(logbook, run_id)
        ),
    )
    files["recorder"] = (
        columns.sample_schema("trip_serial"),
        _recorders(logbook, run_id, tick_ms),
    )
    return files


def _pages(
    name: str, pages: Iterable[Iterable[reader.Row]], tick_ms: float | None
) -> Iterator[pa.Table]:
    for page in pages:
        yield columns.table(name, page, tick_ms)


def _recorders(logbook: Logbook, run_id: str, tick_ms: float | None) -> Iterator[pa.Table]:
    for trip in reader.trips(logbook, run_id):
        try:
            rows = reader.recorder(trip)
        except ValueError as fault:
            raise LogbookError(
                "a flight recorder is damaged",
                at=f"{logbook.name}, run {run_id}",
                got=f"trip {trip['trip_serial']}: {fault}",
                bound="the checksum it was written with",
                try_="lodestroke log verify, then restore a copy of the logbook",
            ) from fault
        yield columns.sample_table("trip_serial", trip["trip_serial"], rows, tick_ms)


def _tick_ms(run: reader.Row) -> float | None:
    """The run's tick period from its kept rig; None when there is no rig that can be read."""
    try:
        return float(rig_of(run).board.tick) * 1000
    except (LodestrokeError, KeyError, OSError, AttributeError, TypeError):
        return None


def _write(part: Path, fmt: str, schema: pa.Schema, tables: Iterable[pa.Table]) -> None:
    kind = pa.csv.CSVWriter if fmt == "csv" else pa.parquet.ParquetWriter
    with kind(str(part), schema) as writer:
        for table in tables:
            writer.write_table(table)
