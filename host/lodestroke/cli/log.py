"""`lodestroke log`: list, show, export and verify runs."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from typing import Any

import click

from ..errors import Exit, LodestrokeError
from .common import emit_json, fail, json_option, open_log, say


@click.group()
def command() -> None:
    """List, show, export and verify the runs of the logbook."""


@command.command("list")
@json_option
@click.pass_context
def list_(ctx: click.Context, as_json: bool) -> None:
    """Every run, newest first."""
    from ..logbook import reader

    try:
        logbook = open_log(ctx, create=False)
        rows = reader.runs(logbook)
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json({"logbook": logbook.name, "runs": [_brief(row) for row in rows]})
        return
    _print_table(
        logbook.name,
        ("run", "kind", "title", "started (UTC)", "place", "cycles", "end"),
        [
            (
                row["id"],
                row["kind"],
                row["title"],
                _second(row["started"]),
                row["place"],
                row["counts"].get("cycles", 0),
                row["end"] or "open",
            )
            for row in rows
        ],
    )


def _brief(row: dict[str, Any]) -> dict[str, Any]:
    return {
        key: row[key]
        for key in ("id", "kind", "title", "started", "ended", "place", "end", "resumes", "summary")
    }


@command.command()
@click.argument("run")
@json_option
@click.pass_context
def show(ctx: click.Context, run: str, as_json: bool) -> None:
    """One run: what it was, its trips, check-ups, gaps and notes."""
    from ..logbook import reader

    try:
        logbook = open_log(ctx, create=False)
        row = reader.run(logbook, run)
        parts = {
            name: getattr(reader, name)(logbook, row["id"])
            for name in ("trips", "checkups", "marks", "gaps", "notes")
        }
        cycles = reader.last_cycle(logbook, row["id"])
    except LodestrokeError as error:
        fail(error, as_json)
    for trip in parts["trips"]:
        trip["recorder_bytes"] = len(trip.pop("recorder") or b"")  # as stored
    answer = {**_brief(row), "meta": row["meta"], "last_cycle": cycles, **parts}
    if as_json:
        emit_json(answer)
        return
    _show(answer)


# columns of show's tables, with their units
_SHOWN = {
    "trips": ("trip_serial", "name", "segment", "tick", "value", "limit", "stop_category", "step"),
    "checkups": ("after_cycle", "item", "result"),
    "marks": ("mark", "segment", "tick", "step"),
    "gaps": ("after_cycle", "first_cycle", "last_cycle", "unnumbered_most", "why"),
    "notes": ("at", "kind", "text"),
}


def _show(answer: dict[str, Any]) -> None:
    """A run for people: its figures, then a table of each kind of row that it has."""
    facts = {key: value for key, value in answer.items() if key not in _SHOWN and key != "meta"}
    for part in ("summary", "meta"):
        for name, value in (answer[part] or {}).items():
            if name not in _SHOWN:
                facts.setdefault(name, value)
    for name in ("summary", "run"):
        facts.pop(name, None)
    rows = [(name, _text(value)) for name, value in facts.items()]
    _print_table(f"run {answer['id']}", ("what", "value"), rows)
    for part, names in _SHOWN.items():
        if answer[part]:
            cells = [[_text(row[name]) for name in names] for row in answer[part]]
            _print_table(part, names, cells)


def _text(value: Any) -> str:
    if isinstance(value, dict):
        return "\n".join(f"{name} {_text(entry)}" for name, entry in value.items())
    return "" if value is None else str(value)


def _second(at: str) -> str:
    return at[:19].replace("T", " ")


def _print_table(title: str, names: Sequence[str], rows: Sequence[Sequence[Any]]) -> None:
    """A table on standard output; titles and notes are shown as they are, brackets and all."""
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(title=Text(title))
    for name in names:
        table.add_column(name, overflow="fold")
    for row in rows:
        table.add_row(*(Text(str(cell)) for cell in row))
    Console(width=None if sys.stdout.isatty() else 160).print(table)


@command.command()
@click.argument("run")
@click.option("--format", "fmt", default="csv", show_default=True, help="csv or parquet.")
@click.option("--out", required=True, metavar="FOLDER", help="Where the files go.")
@click.option("--force", is_flag=True, help="Overwrite files that are there.")
@json_option
@click.pass_context
def export(ctx: click.Context, run: str, fmt: str, out: str, force: bool, as_json: bool) -> None:
    """A run as files, one per table, every column with its unit in its name."""
    from ..logbook.export import export as write

    try:
        files = write(open_log(ctx, create=False), run, fmt, out, force=force)
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json({"files": [str(path) for path in files]})
    for path in files:
        say(f"wrote {path}")


@command.command()
@click.argument("run", required=False)
@json_option
@click.pass_context
def verify(ctx: click.Context, run: str | None, as_json: bool) -> None:
    """Prove the logbook, or one run of it, whole."""
    from ..logbook import reader
    from ..logbook.verify import verify as prove

    try:
        logbook = open_log(ctx, create=False)
        problems = prove(logbook, reader.resolve(logbook, run) if run else None)
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json({"logbook": logbook.name, "whole": not problems, "problems": problems})
    else:
        click.echo("\n".join(problems) if problems else f"{logbook.name} is whole")
    if problems:
        raise SystemExit(int(Exit.LOGBOOK))
