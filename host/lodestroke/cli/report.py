"""`lodestroke report RUN`: a page of a run."""

from __future__ import annotations

import click

from ..errors import LodestrokeError
from .common import fail, open_log, say


@click.command()
@click.argument("run")
@click.option("--out", metavar="FILE", help="Where the page goes; report-RUN.html otherwise.")
@click.pass_context
def command(ctx: click.Context, run: str, out: str | None) -> None:
    """Write a self-contained page of a run; `last` stands for the newest."""
    from ..logbook import reader
    from ..report import write_report

    try:
        logbook = open_log(ctx, create=False)
        run_id = reader.resolve(logbook, run)
        page = write_report(logbook, run_id, out or f"report-{run_id}.html")
    except LodestrokeError as error:
        fail(error)
    click.echo(page)
    say(f"open it in a browser: {page.resolve().as_uri()}")
