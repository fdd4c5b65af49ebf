"""Exported files, read back by others: Python's csv module and pyarrow."""

from __future__ import annotations

import csv
from pathlib import Path

import made
import pyarrow.parquet
import pytest

from lodestroke.errors import LogbookError
from lodestroke.logbook import Logbook, Writer, columns, new_run, reader
from lodestroke.logbook.export import NAMES, export

# the endings that carry a unit, and the columns that are counts, names or text
UNITS = ("_pa", "_ma", "_ms", "_degc", "_q8", "_q15", "_ticks", "_utc")
PLAIN = {
    "cycle", "segment", "step", "tick", "state", "mark", "code", "name", "channel", "channel_name",
    "stop_category", "trip_serial", "value", "limit", "value_unit", "item", "quantity", "text",
    "after_cycle", "first_cycle", "last_cycle", "unnumbered_most", "why",
}


@pytest.fixture
def run(log: Logbook) -> str:
    """A finished run of 60 cycles and 20,500 samples."""
    return made.finished_run(log)


def rows_of(file: Path) -> list[dict[str, str]]:
    """A CSV file by the standard library (RFC 4180)."""
    with file.open(newline="", encoding="utf-8") as text:
        return list(csv.DictReader(text))


def test_cycles_file_has_a_row_a_cycle_with_units(log: Logbook, run: str, tmp_path: Path) -> None:
    export(log, run, "csv", tmp_path / "out")
    rows = rows_of(tmp_path / "out" / "cycles.csv")
    assert [int(row["cycle"]) for row in rows] == list(range(1, 61))
    tenth, source = rows[9], made.cycle(10)
    assert int(tenth["chamber_max_pa"]) == source["chamber_max_pa"]
    assert float(tenth["duration_ms"]) == source["duration_ticks"] * 1.0  # bench-sim: 1 kHz
    assert float(tenth["winding_degc"]) == pytest.approx(source["winding_cc"] / 100)
    assert [row["segment"] for row in rows] == ["1"] * 30 + ["2"] * 30


def test_samples_file_holds_every_sample_in_order(log: Logbook, run: str, tmp_path: Path) -> None:
    export(log, run, "csv", tmp_path)
    rows = rows_of(tmp_path / "samples.csv")
    stored = reader.samples(log, run)
    assert [int(row["tick"]) for row in rows] == stored["tick"].tolist()
    assert [int(row["chamber_pa"]) for row in rows] == stored["chamber_pa"].tolist()
    assert {row["segment"] for row in rows} == {"1", "2"}


def test_other_files_hold_what_the_run_met(log: Logbook, run: str, tmp_path: Path) -> None:
    export(log, run, "csv", tmp_path)
    (trip,) = rows_of(tmp_path / "trips.csv")
    assert (trip["name"], trip["value"], trip["limit"], trip["value_unit"]) == (
        "outlet_reverse", "2510", "2500", "Pa")
    checks = {row["quantity"]: row for row in rows_of(tmp_path / "checkups.csv")}
    assert checks["outlet_cracking_pa"]["value"] == "301.5"
    assert checks["ok"]["text"] == "True"
    assert rows_of(tmp_path / "marks.csv")[0]["mark"] == "4"
    assert rows_of(tmp_path / "gaps.csv")[0]["why"] == "the board restarted"
    assert len(rows_of(tmp_path / "recorder.csv")) == 1280


def test_parquet_files_hold_the_same_as_csv(log: Logbook, run: str, tmp_path: Path) -> None:
    export(log, run, "csv", tmp_path)
    export(log, run, "parquet", tmp_path)
    for name in NAMES:
        plain = rows_of(tmp_path / f"{name}.csv")
        table = pyarrow.parquet.read_table(tmp_path / f"{name}.parquet")
        assert table.num_rows == len(plain)
        if plain:
            assert table.column_names == list(plain[0])
            for column in {"cycle", "tick", "after_cycle"} & set(table.column_names):
                assert table[column].to_pylist() == [int(row[column]) for row in plain]


def test_every_column_carries_its_unit(log: Logbook, run: str, tmp_path: Path) -> None:
    names = {field.name for name in columns.TABLES for field in columns.schema(name)}
    names |= {field.name for field in columns.sample_schema("segment")}
    assert {name for name in names - PLAIN if not name.endswith(UNITS)} == set()


def test_run_of_no_rig_is_exported_without_milliseconds(log: Logbook, tmp_path: Path) -> None:
    run = new_run(log, "run")
    with Writer(log, run) as writer:
        writer.cycle(made.cycle(1))
        writer.samples(made.samples(3))
        writer.flush()
    export(log, run, "csv", tmp_path)
    export(log, run, "parquet", tmp_path)
    row = rows_of(tmp_path / "cycles.csv")[0]
    assert (row["duration_ms"], row["duration_ticks"]) == ("", "103")
    assert [row["time_ms"] for row in rows_of(tmp_path / "samples.csv")] == [""] * 3


def test_empty_run_is_exported_as_headings(log: Logbook, tmp_path: Path) -> None:
    files = export(log, new_run(log, "run"), "csv", tmp_path)
    assert [file.name for file in files] == [f"{name}.csv" for name in NAMES]
    assert (tmp_path / "cycles.csv").read_text().startswith('"cycle",')


def test_files_that_are_there_are_kept_unless_forced(
    log: Logbook, run: str, tmp_path: Path
) -> None:
    (tmp_path / "samples.csv").write_text("mine")
    with pytest.raises(LogbookError, match="there already"):
        export(log, run, "csv", tmp_path)
    assert [one.name for one in tmp_path.glob("*.csv*")] == ["samples.csv"]
    assert (tmp_path / "samples.csv").read_text() == "mine"
    export(log, run, "csv", tmp_path, force=True)
    assert len(rows_of(tmp_path / "samples.csv")) == 20_500


def test_damaged_chunk_stops_the_export_and_nothing_half_written_stays(
    log: Logbook, run: str, tmp_path: Path
) -> None:
    with log.write() as connection:
        connection.exec_driver_sql("update chunks set data = x'00' where number = 2")
    with pytest.raises(LogbookError, match="chunk of samples is damaged") as caught:
        export(log, run, "csv", tmp_path / "out")
    assert "chunk 2" in caught.value.got
    assert list((tmp_path / "out").iterdir()) == []


def test_unknown_format_and_folder_that_is_a_file_are_refused(
    log: Logbook, run: str, tmp_path: Path
) -> None:
    with pytest.raises(LogbookError) as caught:
        export(log, run, "xlsx", tmp_path)
    assert caught.value.bound == "csv, parquet"
    (tmp_path / "file").write_text("x")
    with pytest.raises(LogbookError, match="cannot be written"):
        export(log, run, "csv", tmp_path / "file")
    with pytest.raises(LogbookError, match="cannot be written"):
        export(log, run, "csv", tmp_path / "file" / "deeper")


def test_long_run_is_exported_page_by_page(log: Logbook, tmp_path: Path) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        for number in range(1, 2501):
            writer.cycle(made.cycle(number))
        writer.flush()
    pages = [len(page) for page in reader.cycle_pages(log, run, 1000)]
    assert pages == [1000, 1000, 500]
