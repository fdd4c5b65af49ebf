"""`lodestroke prove`: searches for what could go wrong, in simulated time."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from ..errors import Exit, LodestrokeError, ProofFailed, ScheduleError
from .common import Progress, emit_json, fail, json_option, say

if TYPE_CHECKING:
    from ..prove import Case, Proof, Trace
    from ..rig import Rig
    from ..schedule import Schedule


@click.command()
@click.argument("rig", type=click.Path())
@click.argument("schedule", type=click.Path())
@click.option("--tries", type=click.IntRange(1, 1_000_000), default=60, show_default=True,
              help="Pumps and faults to try.")
@click.option("--seed", type=click.IntRange(0), default=0, show_default=True,
              help="The same seed tries the same cases.")
@click.option("--out", metavar="FILE", default="lodestroke-case.toml", show_default=True,
              help="Where a failing case goes; only written when there is one.")
@json_option
def command(rig: str, schedule: str, tries: int, seed: int, out: str, as_json: bool) -> None:
    """Vary the pump within its tolerances, inject faults, and hold the invariants.

    Exit code 8 when one breaks; the smallest case found is written for `dry-run --replay`.
    """
    from ..prove import search, write_case
    from ..rig import load_rig
    from ..runner.signals import StopFlag
    from ..schedule import compile_program, load_schedule

    try:
        loaded, plan = load_rig(rig), load_schedule(schedule)
        ticks = compile_program(plan, loaded).ticks
        _place_for(Path(out))
        bar = Progress(plan.title, tries, "cases")
        with StopFlag() as flag:
            try:
                proof = search(
                    loaded,
                    ticks,
                    lambda case: run_case(loaded, plan, case),
                    tries=tries,
                    seed=seed,
                    stop=lambda: flag.raised,
                    progress=lambda now: bar.to(now.cases),
                )
            finally:
                bar.close()
        answer = _answer(proof, loaded, plan, seed)
        if proof.case is not None and proof.broken is not None:
            remark = (
                f"{proof.broken.invariant} breaks: {proof.broken.figures()}\n"
                f"rig {Path(rig).name}, schedule {Path(schedule).name}; replay it:\n"
                "lodestroke dry-run RIG SCHEDULE --replay THIS"
            )
            answer["file"] = str(write_case(Path(out), proof.case, remark))
    except LodestrokeError as error:
        fail(error, as_json)
    _tell(answer, as_json)
    if proof.broken is not None:
        say(_failure(proof, rig, schedule, out).text())
        raise SystemExit(int(Exit.PROOF_FAILED))
    if proof.interrupted:
        say(f"interrupted: the invariants held in {proof.cases} cases, {tries} were asked for")
        raise SystemExit(int(Exit.INTERRUPTED))


def run_case(rig: Rig, schedule: Schedule, case: Case, on: str = "twin") -> Trace:
    """One case as a dry-run, with everything that the invariants look at."""
    from ..prove import Faulty, trace_of
    from ..runner import dry_run

    faulty = Faulty(case, rig)
    dry = dry_run(rig, schedule, seed=case.plant_seed, on=on, harness=faulty)
    return trace_of(rig, dry, faulty)


def _place_for(out: Path) -> None:
    """Told before the search, not after it: a failing case must have somewhere to go."""
    if out.is_dir() or not out.resolve().parent.is_dir():
        raise ScheduleError(
            "a failing case could not be written",
            at=f"--out {out}",
            got="a folder" if out.is_dir() else "no such folder",
            bound="a file in a folder that exists",
            try_="name another file",
        )


def _answer(proof: Proof, rig: Rig, schedule: Schedule, seed: int) -> dict[str, Any]:
    from ..prove import INVARIANTS

    some = proof.least_margin_pa != float("inf")
    broken, case = proof.broken, proof.case
    return {
        "end": "failed" if broken else "interrupted" if proof.interrupted else "held",
        "rig": rig.title,
        "schedule": schedule.title,
        "seed": seed,
        "tries": proof.tries,
        "cases": proof.cases,
        "shrink_runs": proof.shrink_runs,
        "invariants": [hold.__name__ for hold in INVARIANTS],
        "outcomes": dict(proof.outcomes.most_common()),
        "faults": dict(proof.fault_kinds.most_common()),
        "least_margin_pa": round(proof.least_margin_pa, 1) if some else None,
        "peak_coil_c": round(proof.peak_coil_c, 3) if proof.outcomes else None,
        "broken": broken.__dict__ if broken else None,
        "case": case.model_dump() if case else None,
        "file": None,
    }


def _tell(answer: dict[str, Any], as_json: bool) -> None:
    if as_json:
        emit_json(answer)
        return
    for key in ("end", "cases", "tries", "seed", "least_margin_pa", "peak_coil_c"):
        click.echo(f"{key:<18} {answer[key]}")
    for key in ("outcomes", "faults"):
        told = ", ".join(f"{name} {count}" for name, count in answer[key].items())
        click.echo(f"{key:<18} {told or 'none'}")


def _failure(proof: Proof, rig: str, schedule: str, out: str) -> ProofFailed:
    broken = proof.broken
    assert broken is not None
    return ProofFailed(
        f"an invariant did not hold: {broken.invariant.replace('_', ' ')}",
        at=f"{schedule}, tick {broken.tick}, after {proof.cases} cases",
        got=broken.got,
        bound=broken.bound,
        try_=f"lodestroke dry-run {rig} {schedule} --replay {out}",
    )
