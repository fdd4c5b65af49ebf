"""`lodestroke dry-run`: what would happen, before anything is energised."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from ..errors import Exit, LodestrokeError, ProofFailed
from .common import Progress, emit_json, fail, json_option, open_log, say


@click.command()
@click.argument("rig", type=click.Path())
@click.argument("schedule", type=click.Path())
@click.option(
    "--seed",
    type=click.IntRange(0),
    default=0,
    show_default=True,
    help="0 is the nominal pump; others vary it.",
)
@click.option(
    "--on",
    "place",
    default="twin",
    show_default=True,
    help="twin, or virtual: the real interpreter in lock-step.",
)
@click.option("--out", metavar="FOLDER", help="Write dry-run.json, samples.csv and a page there.")
@click.option("--replay", metavar="FILE", help="A case of `prove`: its pump (not --seed), its faults.")
@json_option
@click.pass_context
def command(
    ctx: click.Context,
    rig: str,
    schedule: str,
    seed: int,
    place: str,
    out: str | None,
    replay: str | None,
    as_json: bool,
) -> None:
    """Run a schedule in simulated time and say what would happen.

    Exit code 3 when an interlock trips, 8 when a replayed case breaks an invariant. Logged only
    where --logbook names a logbook.
    """
    from ..plant import warm_up
    from ..rig import load_rig
    from ..runner import dry_run
    from ..runner.signals import StopFlag
    from ..schedule import compile_program, load_schedule

    try:
        loaded = load_rig(rig)
        plan = load_schedule(schedule)
        faulty = _faults(replay, loaded) if replay else None
        cycles = compile_program(plan, loaded).cycles
        with StopFlag() as flag:
            warm_up(loaded, say)
            bar = Progress(plan.title, cycles, "cycles")
            try:
                shown = dry_run(
                    loaded,
                    plan,
                    seed=faulty.case.plant_seed if faulty else seed,
                    on=place,
                    harness=faulty,
                    stop=lambda: "interrupted" if flag.raised else "",
                    progress=lambda outcome: bar.to(outcome.cycles_done),
                )
            finally:
                bar.close()
        files = _write(Path(out), shown, loaded) if out else []
        if ctx.obj["logbook"]:
            _log(ctx, shown, loaded, plan)
    except LodestrokeError as error:
        fail(error, as_json)
    _tell(shown.result, as_json, files)
    if faulty:
        _judge(shown, faulty, loaded, replay or "")
    if shown.result["end"] == "interrupted":
        raise SystemExit(int(Exit.INTERRUPTED))
    if shown.result["trips"]:
        raise SystemExit(int(Exit.TRIPPED))


def _faults(replay: str, rig: Any) -> Any:
    from ..prove import Faulty, read_case

    return Faulty(read_case(replay, rig), rig)


def _judge(shown: Any, faulty: Any, rig: Any, replay: str) -> None:
    """Hold the invariants against a replayed case; ends with PROOF_FAILED when one breaks."""
    from ..prove import judge, trace_of

    found = judge(trace_of(rig, shown, faulty))
    for broken in found:
        error = ProofFailed(
            f"an invariant did not hold: {broken.invariant.replace('_', ' ')}",
            at=f"{replay}, tick {broken.tick}",
            got=broken.got,
            bound=broken.bound,
            try_="look at the samples: add --out FOLDER",
        )
        say(error.text())
    if found:
        raise SystemExit(int(Exit.PROOF_FAILED))


def _log(ctx: click.Context, shown: Any, rig: Any, schedule: Any) -> None:
    from ..flash import bundle_id_for
    from ..runner import log_dry_run

    logbook = open_log(ctx)
    run = log_dry_run(logbook, shown, rig, schedule, bundle_id_for(rig))
    say(f"logged as {run} in {logbook.name}")


def _tell(result: dict[str, Any], as_json: bool, files: list[Path]) -> None:
    from .. import trips

    if as_json:
        emit_json(result)
    else:
        for key in (
            "end",
            "cycles",
            "duration_s",
            "delivered_ul",
            "mean_flow_ul_min",
            "peak_chamber_pa",
            "peak_outlet_pa",
            "min_margin_pa",
            "peak_coil_c",
            "seed",
            "trace_sha256",
        ):
            click.echo(f"{key:<18} {result[key]}")
    for trip in result["trips"]:
        say("tripped: " + trips.sentence(trip))
        say(f"margin that was left: {result['min_margin_pa']} Pa")
    for path in files:
        say(f"wrote {path}")


def _write(folder: Path, shown: Any, rig: Any) -> list[Path]:
    """The dry-run as files. Raises LodestrokeError when the folder cannot be written."""
    import json

    import pyarrow as pa
    import pyarrow.csv

    from ..report import dry_run_page

    try:
        folder.mkdir(parents=True, exist_ok=True)
        answer = folder / "dry-run.json"
        answer.write_text(json.dumps(shown.result, indent=2) + "\n", encoding="utf-8")
        table = pa.table({name: shown.samples[name] for name in shown.samples.dtype.names})
        samples = folder / "samples.csv"
        pa.csv.write_csv(table, str(samples))
        return [
            answer,
            samples,
            dry_run_page(shown.result, shown.samples, shown.cycles, rig, folder / "dry-run.html"),
        ]
    except OSError as fault:
        raise CannotWrite(folder, fault) from fault


class CannotWrite(LodestrokeError):
    """The folder for the answer cannot be written."""

    exit_code = Exit.BAD_INPUT

    def __init__(self, folder: Path, fault: OSError) -> None:
        super().__init__(
            "the dry-run's files cannot be written",
            at=f"--out {folder}",
            got=str(fault),
            bound="a folder that can be written",
            try_="name another folder",
        )
