"""`dry-run` as typed."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import TYPE_CHECKING

from lodestroke.errors import Exit

if TYPE_CHECKING:
    from conftest import Run

CONFIGS = Path(__file__).resolve().parents[3] / "hil_configs"
SIM = CONFIGS / "bench-sim.toml"
GENTLE = CONFIGS / "schedules" / "gentle.toml"
OVERDRIVE = CONFIGS / "schedules" / "overdrive.toml"


def test_json_is_the_only_thing_on_standard_output(lodestroke: Run) -> None:
    ended = lodestroke("dry-run", SIM, GENTLE, "--json", "--seed", 4)
    assert ended.code == 0
    answer = json.loads(ended.out)
    assert (answer["seed"], answer["cycles"], answer["trips"]) == (4, 20, [])


def test_a_trip_ends_with_its_code_its_words_and_the_margin_left(lodestroke: Run) -> None:
    ended = lodestroke("dry-run", SIM, OVERDRIVE, "--json")
    assert ended.code == Exit.TRIPPED
    (trip,) = json.loads(ended.out)["trips"]
    assert {"code", "tick", "channel", "value", "limit", "stop_category"} <= set(trip)
    assert "reverse pressure across the outlet valve" in ended.err
    assert "margin that was left" in ended.err


def test_out_keeps_answer_samples_and_page(lodestroke: Run, tmp_path: Path) -> None:
    folder = tmp_path / "deep" / "gentle"
    ended = lodestroke("dry-run", SIM, GENTLE, "--out", folder)
    assert ended.code == 0
    answer = json.loads((folder / "dry-run.json").read_text(encoding="utf-8"))
    with (folder / "samples.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == answer["ticks"]
    assert int(rows[-1]["tick"]) == answer["ticks"] - 1
    page = (folder / "dry-run.html").read_text(encoding="utf-8")
    assert answer["trace_sha256"] in page
    assert "<script src=" not in page  # self-contained


def test_without_json_each_figure_stands_on_a_line_of_its_own(lodestroke: Run) -> None:
    ended = lodestroke("dry-run", SIM, GENTLE)
    figures = dict(line.split(None, 1) for line in ended.out.splitlines())
    assert figures["end"] == "finished"
    assert len(figures["trace_sha256"]) == 64


def test_a_named_logbook_keeps_the_dry_run_with_its_trip_and_samples(
    lodestroke: Run, tmp_path: Path
) -> None:
    book = tmp_path / "bench.db"
    ended = lodestroke("--logbook", book, "dry-run", SIM, OVERDRIVE, "--seed", 7, "--json")
    assert ended.code == Exit.TRIPPED
    answer = json.loads(ended.out)
    shown = json.loads(lodestroke("--logbook", book, "log", "show", "last", "--json").out)
    assert "dry-run" in json.dumps(shown)
    assert answer["trace_sha256"] in json.dumps(shown)
    assert lodestroke("--logbook", book, "log", "verify").code == 0
    page = tmp_path / "page.html"
    assert lodestroke("--logbook", book, "report", "last", "--out", page).code == 0
    assert page.stat().st_size > 10_000


def test_a_seed_below_zero_is_bad_input(lodestroke: Run) -> None:
    assert lodestroke("dry-run", SIM, GENTLE, "--seed", -1).code == Exit.BAD_INPUT
