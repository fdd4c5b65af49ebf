"""`endure`: an endurance plan on a board, over minutes or days, as one run that can be resumed.

Between check-ups the board runs segments on its own. Everything needed to carry on is on disk with
each flush: which board (boot nonce), which GO (run token), which phase. A killed host comes back with
resume=True, takes what the board still holds, adopts a segment that still runs, and goes on.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from .. import trips
from ..errors import LinkError, LodestrokeError
from ..logbook import Logbook, Writer, new_run, reader
from . import record, session
from .bench import Bench
from .checkup import due_items, run_checkups, stop_rule
from .collect import FLUSH_S, Collector, Outcome, fetch_recorder
from .leftovers import drain, put, settle
from .pick import resumable
from .signals import StopFlag

if TYPE_CHECKING:
    from ..link import Port
    from ..rig import Rig
    from ..schedule import Plan, Schedule

EVERY_TICKS = 20


def endure(
    logbook: Logbook,
    rig: Rig,
    plan: Plan,
    schedule: Schedule,
    port: str | Port,
    bundle_id: bytes,
    *,
    resume: bool = False,
    clear: str | None = None,
    say: Callable[[str], None] = lambda text: None,
    progress: Callable[[Outcome], None] = lambda outcome: None,
) -> dict[str, Any]:
    """Run a plan to its target, or resume the newest run of it that is open; the run's summary.

    Raises LodestrokeError of every kind; what was pumped is on record first.
    """
    client = session.connect(port, rig)
    try:
        with StopFlag() as flag:
            run_id = resumable(logbook, rig, plan) if resume else None
            state = reader.run(logbook, run_id)["resume"] if run_id else {}
            info = client.hello()
            session.check_board(info, bundle_id, client.port.name)
            if run_id is None:
                settle(logbook, client, drain(client), say)
                session.clear_trip(client, session.look(client), clear)
                run_id = _new(logbook, rig, plan, client.port.name, bundle_id, info.board_id)
            with Writer(logbook, run_id) as writer:
                bench = Bench(
                    logbook, writer, client, rig, plan, schedule, bundle_id, say, progress, flag
                )
                bench.token = info.run_token
                return _guarded(bench, state, resume, clear)
    finally:
        client.close()


def _new(
    logbook: Logbook, rig: Rig, plan: Plan, port: str, bundle_id: bytes, board_id: bytes
) -> str:
    files = {"plan": plan.source, "schedule": plan.schedule}
    sources = record.sources_of(rig, **files)
    meta = record.describe(rig, sources, files, bundle_id, board_id)
    meta["target_cycles"] = plan.target_cycles
    return new_run(logbook, "endure", title=plan.title, place=port, meta=meta, sources=sources)


def _guarded(
    bench: Bench, state: dict[str, Any], resume: bool, clear: str | None
) -> dict[str, Any]:
    """The run itself; however it ends, its row says how."""
    try:
        end = _resume(bench, state, clear) if resume else ""
        while not end:
            end = _next_stretch(bench)
    except LodestrokeError as fault:
        session.quench(bench.client)  # before the disk, which may be what failed
        _close(bench, fault.what)
        raise
    return _close(bench, end)


def _resume(bench: Bench, state: dict[str, Any], clear: str | None) -> str:
    """Take up a run where disk and board say that it is; why it ended, if it has."""
    writer, client = bench.writer, bench.client
    reader.clear_requests(bench.logbook, writer.run)
    writer.resumed()
    bench.done = reader.last_cycle(bench.logbook, writer.run)
    bench.segment = state.get("segment", 0)
    info = client.info
    assert info is not None
    ours = state.get("nonce") == info.boot_nonce and state.get("token") == info.run_token
    writer.begin(info.boot_nonce, client.saved_entry, bench.segment)
    end = _adopt(bench, state) if ours else _strange(bench, state)
    if end:
        return end
    beat = session.look(client)
    if beat.state == "tripped":
        name = trips.name(beat.fields["trip_code"])
        session.clear_trip(
            client, beat, session.HOST_SILENT if name == session.HOST_SILENT else clear
        )
        writer.note(f"trip {name} cleared on resume")
    else:
        session.clear_trip(client, beat, None)
    bench.say(f"resuming {writer.run} after cycle {bench.done}")
    return ""


def _adopt(bench: Bench, state: dict[str, Any]) -> str:
    """The board is the one we left: take what it holds; stay with a segment that still runs."""
    client, writer = bench.client, bench.writer
    beat = session.look(client)
    running = beat.state in ("running", "paused", "stopping")
    if running and state.get("phase") == "cycles":
        bench.say(f"the board still runs: adopting it at cycle {beat.fields['cycle']}")
        return _collect(bench, state["token"])
    if running:
        client.command("stop")
        end_s = client.port.now_s() + 10.0
        while session.look(client).state not in ("safe", "tripped") and client.port.now_s() < end_s:
            client.poll(0.1)
    elif beat.state == "armed":
        client.command("disarm")
    put(writer, drain(client))
    client.saved(writer.flush())
    bench.done = reader.last_cycle(bench.logbook, writer.run)
    return ""


def _strange(bench: Bench, state: dict[str, Any]) -> str:
    """The board does not know our last GO: it lost its memory, served others, or never got it."""
    info = bench.client.info
    assert info is not None
    entries = drain(bench.client)
    settle(bench.logbook, bench.client, entries, bench.say)
    never_went = info.boot_nonce == state.get("nonce") and info.run_token == state.get("before")
    if state.get("phase") == "cycles" and not never_went:
        _gap(bench, time.time() - state.get("at", time.time()))
    return ""


def _gap(bench: Bench, away_s: float) -> None:
    """A board restart: what its RAM held is lost; at most what time and host silence allowed."""
    from ..schedule import compile_program

    program = compile_program(bench.schedule, bench.rig)
    cycle_s = program.ticks * bench.rig.board.tick / max(program.cycles, 1)
    most_s = min(away_s, bench.rig.limits.host_silence + 2 * FLUSH_S)
    most = min(math.ceil(most_s / cycle_s) + 1, bench.plan.target_cycles - bench.done)
    bench.writer.gap(bench.done, "the board restarted", unnumbered_most=max(most, 0))
    bench.writer.resume_state({"phase": "gap on record", "segment": bench.segment})
    bench.writer.flush()
    bench.say(f"the board restarted: a gap of at most {max(most, 0)} cycles after {bench.done}")


def _next_stretch(bench: Bench) -> str:
    """The check-ups that are due, or the cycles up to the next; why the run ends, if it does."""
    items = due_items(bench)
    if items:
        end = run_checkups(bench, items)
        return end or stop_rule(bench)
    if bench.done >= bench.plan.target_cycles:
        return "target reached"
    gaps = len(reader.gaps(bench.logbook, bench.writer.run))
    if bench.plan.stop.gaps and gaps >= bench.plan.stop.gaps:
        return f"stop rule: {gaps} gaps on record, bound {bench.plan.stop.gaps}"
    return bench.stop() or _cycles(bench)


def _cycles(bench: Bench) -> str:
    """One segment: from the cycles done to the next check-up or the target."""
    from ..schedule import compile_program

    plan = bench.plan
    last = plan.target_cycles
    if plan.checkup is not None:
        every = plan.checkup.every_cycles
        last = min(last, (bench.done // every + 1) * every)
    passes = math.ceil((last - bench.done) / plan.cycles_per_pass)
    program = compile_program(bench.schedule, bench.rig, passes)
    session.load(bench.client, bench.rig, program, EVERY_TICKS)
    token = session.new_token()
    bench.remember(token, "cycles")
    session.start(bench.client, bench.rig, program, token, bench.done, last)
    return _collect(bench, token)


def _collect(bench: Bench, token: int) -> str:
    """Collect a segment to its end; why the whole run ends, if it does."""
    collector = Collector(
        bench.client, bench.writer, token, bench.done, stop=bench.stop, progress=bench.progress
    )
    outcome = collector.outcome
    try:
        outcome = collector.run()
    finally:
        bench.done = outcome.cycles_done
        bench.trips += outcome.trips
    if outcome.why == "restarted":
        _gap(bench, 2 * FLUSH_S + 2.0)
        raise LinkError(
            "the board restarted in the middle of the run",
            at=bench.client.port.name,
            got="a new boot nonce",
            bound="a board that stays powered",
            try_="look at its supply; then endure --resume",
        )
    bench.settled(token)
    if outcome.why == "tripped":
        fetch_recorder(bench.client, bench.writer, outcome)
        return _after_trip(bench, outcome)
    return outcome.asked_to_stop


def _after_trip(bench: Bench, outcome: Outcome) -> str:
    """The plan says how many trips end the run; until then each is cleared by its name."""
    name = trips.name(outcome.trips[-1]["code"]) if outcome.trips else "unknown"
    if (
        outcome.asked_to_stop
        or len(reader.trips(bench.logbook, bench.writer.run)) >= bench.plan.stop.trips
    ):
        return "tripped: " + name
    session.clear_trip(bench.client, session.look(bench.client), name)
    bench.writer.note(f"trip {name} cleared: the plan ends at {bench.plan.stop.trips} trips")
    bench.say(f"tripped ({name}); the plan goes on")
    return ""


def _close(bench: Bench, end: str) -> dict[str, Any]:
    run_id = bench.writer.run
    bench.writer.flush()
    row = reader.run(bench.logbook, run_id)
    summary = {
        "run": run_id,
        "target_cycles": bench.plan.target_cycles,
        "cycles_done": reader.last_cycle(bench.logbook, run_id),
        "resumes": row["resumes"],
        "trips": [trips.as_json(trip) for trip in reader.trips(bench.logbook, run_id)],
        "gaps": [
            {
                key: gap[key]
                for key in ("after_cycle", "first_cycle", "last_cycle", "unnumbered_most", "why")
            }
            for gap in reader.gaps(bench.logbook, run_id)
        ],
        "checkups": len(reader.checkups(bench.logbook, run_id)),
        "end": end,
    }
    bench.writer.finish(end, summary)
    return summary
