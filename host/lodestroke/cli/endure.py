"""`lodestroke endure`: an endurance plan on a board, unattended, resumable."""

from __future__ import annotations

import click

from ..errors import Exit, LodestrokeError
from .common import (
    NotConfirmed,
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
@click.argument("plan", type=click.Path())
@click.option("--port", help="Serial port; otherwise the rig's USB serial number.")
@click.option("--resume", is_flag=True, help="Carry on the newest open run of this rig and plan.")
@click.option("--clear", metavar="TRIP", help="Clear this latched trip first, by its name.")
@click.option("--yes", is_flag=True, help="The cautions have been read: energise without asking.")
@click.option(
    "--cutout-fitted", is_flag=True, help="An independent thermal cut-out is in the coil's supply."
)
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    rig: str,
    plan: str,
    port: str | None,
    resume: bool,
    clear: str | None,
    yes: bool,
    cutout_fitted: bool,
    as_json: bool,
) -> None:
    """Run an endurance plan on the board; one run, also when resumed."""
    from ..flash import bundle_id_for
    from ..margin import prove_plan
    from ..rig import load_rig
    from ..runner import endure
    from ..schedule import load_plan, load_schedule

    try:
        loaded = load_rig(rig)
        test = load_plan(plan)
        schedule = load_schedule(test.schedule)
        prove_plan(test, loaded)  # the heat of the whole plan, before anything is opened
        name = board_port(loaded, port)
        _ask_for_cutout(loaded.board.kind, cutout_fitted)
        confirm_energising(loaded.board.kind, yes)
        logbook = open_log(ctx)
        bar = Progress(test.title, test.target_cycles, "cycles")
        try:
            summary = endure(
                logbook,
                loaded,
                test,
                schedule,
                name,
                bundle_id_for(loaded),
                resume=resume,
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
            f"run {summary['run']}: {summary['end']}, {summary['cycles_done']} of "
            f"{summary['target_cycles']} cycles, {summary['resumes']} resumes, "
            f"{len(summary['gaps'])} gaps, logged in {logbook.name}"
        )
    if summary["end"] == "interrupted":
        book = f"--logbook {ctx.obj['logbook']} " if ctx.obj.get("logbook") else ""
        say(f"resume it: lodestroke {book}endure {rig} {plan} --port {name} --resume")
        raise SystemExit(int(Exit.INTERRUPTED))
    if summary["end"].startswith("tripped"):
        raise SystemExit(int(Exit.TRIPPED))


def _ask_for_cutout(kind: str, fitted: bool) -> None:
    if kind != "virtual" and not fitted:
        fail(
            NotConfirmed(
                "an unattended bench needs an independent thermal cut-out in the coil's supply",
                at="--cutout-fitted",
                got="not said",
                bound="said",
                try_="fit one that opens by itself; then add --cutout-fitted",
            )
        )
