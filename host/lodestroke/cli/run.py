"""`lodestroke run`: a schedule on a board."""

from __future__ import annotations

import click

from ..errors import Exit, LodestrokeError
from .common import (
    Progress,
    board_port,
    confirm_energising,
    emit_json,
    fail,
    json_option,
    open_log,
    say,
)


@click.command()
@click.argument("rig", type=click.Path())
@click.argument("schedule", type=click.Path())
@click.option("--port", help="Serial port; otherwise the rig's USB serial number.")
@click.option("--clear", metavar="TRIP", help="Clear this latched trip first, by its name.")
@click.option("--yes", is_flag=True, help="The cautions have been read: energise without asking.")
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    rig: str,
    schedule: str,
    port: str | None,
    clear: str | None,
    yes: bool,
    as_json: bool,
) -> None:
    """Run a schedule on the board and log it."""
    from .. import trips
    from ..flash import bundle_id_for
    from ..rig import load_rig
    from ..runner import run
    from ..schedule import compile_program, load_schedule

    try:
        loaded = load_rig(rig)
        plan = load_schedule(schedule)
        total = compile_program(plan, loaded).cycles
        name = board_port(loaded, port)
        confirm_energising(loaded.board.kind, yes)
        logbook = open_log(ctx)
        bar = Progress(plan.title, total, "cycles")
        try:
            summary = run(
                logbook,
                loaded,
                plan,
                name,
                bundle_id_for(loaded),
                clear=clear,
                say=say,
                progress=lambda outcome: bar.to(outcome.cycles_done),
            )
        finally:
            bar.close()
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json(summary)
    else:
        click.echo(
            f"run {summary['run']}: {summary['end']}, {summary['cycles_done']} cycles, "
            f"{summary['duration_s']} s, logged in {logbook.name}"
        )
    for trip in summary["trips"]:
        say("tripped: " + trips.sentence(trip))
    if summary["end"] == "interrupted":
        raise SystemExit(int(Exit.INTERRUPTED))
    if summary["trips"]:
        raise SystemExit(int(Exit.TRIPPED))
