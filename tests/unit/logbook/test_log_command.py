"""`lodestroke log`: answers on stdout, talk on stderr, errors in five parts with their exit code."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import made
import pytest

from lodestroke.errors import Exit
from lodestroke.logbook import open_logbook


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A logbook with one finished run of 60 cycles."""
    path = tmp_path_factory.mktemp("log") / "bench.db"
    with open_logbook(path) as log:
        made.finished_run(log)
    return path


def log(path: Path, *arguments: str, code: Exit = Exit.DONE) -> subprocess.CompletedProcess[str]:
    """The command as a user starts it."""
    done = subprocess.run(
        [sys.executable, "-m", "lodestroke.cli.main", "--logbook", str(path), "log", *arguments],
        capture_output=True, text=True, check=False,
    )
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr
    return done


def test_list_shows_runs_and_gives_one_json_object(bench: Path) -> None:
    assert "r0001" in log(bench, "list").stdout
    answer = json.loads(log(bench, "list", "--json").stdout)
    assert [(row["id"], row["kind"], row["end"]) for row in answer["runs"]] == [
        ("r0001", "endure", "stopped")]


def test_show_tells_trips_with_their_figures(bench: Path) -> None:
    answer = json.loads(log(bench, "show", "last", "--json").stdout)
    assert (answer["last_cycle"], answer["summary"]["cycles_done"]) == (60, 60)
    assert (answer["trips"][0]["value"], answer["trips"][0]["limit"]) == (2510, 2500)
    shown = log(bench, "show", "1").stdout
    assert "outlet_reverse" in shown
    assert "a note, with a comma" in shown


def test_export_says_on_stderr_what_it_wrote(bench: Path, tmp_path: Path) -> None:
    done = log(bench, "export", "r0001", "--format", "csv", "--out", str(tmp_path))
    assert (done.stdout, "cycles.csv" in done.stderr) == ("", True)
    again = log(bench, "export", "r0001", "--out", str(tmp_path), code=Exit.LOGBOOK)
    assert "--force" in again.stderr


def test_verify_answers_with_its_exit_code(bench: Path, tmp_path: Path) -> None:
    assert "whole" in log(bench, "verify").stdout
    damaged = tmp_path / "damaged.db"
    damaged.write_bytes(bench.read_bytes())
    with open_logbook(damaged) as book, book.write() as connection:
        connection.exec_driver_sql("delete from cycles where cycle = 7")
    answer = json.loads(log(damaged, "verify", "--json", code=Exit.LOGBOOK).stdout)
    assert answer["whole"] is False
    assert any("without a gap on record: 7" in text for text in answer["problems"])


@pytest.mark.parametrize(
    "arguments", [["show", "r0404"], ["export", "r0404", "--out", "o"], ["verify", "r0404"]]
)
def test_unknown_run_is_told_in_five_parts(bench: Path, arguments: list[str]) -> None:
    said = log(bench, *arguments, code=Exit.LOGBOOK).stderr
    assert all(part in said for part in ("no such run", "at ", "got ", "bound ", "try "))


def test_missing_logbook_is_not_made(tmp_path: Path) -> None:
    done = log(tmp_path / "none.db", "list", "--json", code=Exit.LOGBOOK)
    assert json.loads(done.stdout)["error"] == "LogbookError"
    assert list(tmp_path.iterdir()) == []
