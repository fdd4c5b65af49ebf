"""`lodestroke log`: list, show, export and verify runs."""

from __future__ import annotations

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
    from rich.console import Console
    from rich.table import Table

    table = Table("run", "kind", "title", "started (UTC)", "place", "end", title=logbook.name)
    for row in rows:
        table.add_row(
            row["id"],
            row["kind"],
            row["title"],
            row["started"][:19],
            row["place"],
            row["end"] or "open",
        )
    Console().print(table)


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
        trip["recorder"] = len(trip["recorder"] or b"")
    answer = {**_brief(row), "meta": row["meta"], "last_cycle": cycles, **parts}
    if as_json:
        emit_json(answer)
        return
    for key, value in answer.items():
        if isinstance(value, list):
            click.echo(f"{key}: {len(value)}")
            for item in value:
                click.echo(
                    "  "
                    + ", ".join(
                        f"{name}={entry}"
                        for name, entry in item.items()
                        if name not in ("id", "run", "nonce", "recorder_crc32")
                    )
                )
        elif isinstance(value, dict):
            click.echo(f"{key}:")
            for name, entry in value.items():
                click.echo(f"  {name}: {entry}")
        else:
            click.echo(f"{key}: {value}")


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
