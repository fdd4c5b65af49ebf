"""`run`: one schedule on a board, logged."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

from .. import trips
from ..errors import LodestrokeError
from ..link import Client
from ..logbook import Logbook, Writer, new_run, reader
from . import record, session
from .collect import Collector, Outcome, fetch_recorder
from .leftovers import drain, settle
from .signals import StopFlag

if TYPE_CHECKING:
    from ..link import Port
    from ..rig import Rig
    from ..schedule import Schedule

EVERY_TICKS = 10  # live samples: a hundred a second


def run(
    logbook: Logbook,
    rig: Rig,
    schedule: Schedule,
    port: str | Port,
    bundle_id: bytes,
    *,
    clear: str | None = None,
    say: Callable[[str], None] = lambda text: None,
    progress: Callable[[Outcome], None] = lambda outcome: None,
) -> dict[str, Any]:
    """Run a schedule on the board at a port; the run's summary.

    Raises LodestrokeError of every kind; a run that was begun is closed on record first.
    """
    from ..schedule import compile_program

    program = compile_program(schedule, rig)
    client = session.connect(port, rig)
    try:
        info = client.hello()
        session.check_board(info, bundle_id, client.port.name)
        settle(logbook, client, drain(client), say)
        session.clear_trip(client, session.look(client), clear)
        session.load(client, rig, program, EVERY_TICKS)
        files = {"schedule": schedule.source}
        sources = record.sources_of(rig, **files)
        meta = record.describe(rig, sources, files, bundle_id, info.board_id)
        run_id = new_run(
            logbook,
            "run",
            title=schedule.title,
            place=client.port.name,
            meta=meta,
            sources=sources,
        )
        with Writer(logbook, run_id) as writer:
            return _execute(logbook, writer, client, rig, program, progress)
    finally:
        client.close()


def _execute(
    logbook: Logbook,
    writer: Writer,
    client: Client,
    rig: Rig,
    program: Any,
    progress: Callable[[Outcome], None],
) -> dict[str, Any]:
    token = session.new_token()
    assert client.info is not None
    writer.begin(client.info.boot_nonce, client.saved_entry, 1)
    writer.resume_state({"nonce": client.info.boot_nonce, "token": token, "kind": "run"})
    writer.flush()
    outcome = Outcome()
    with StopFlag() as flag:

        def stop() -> str:
            if flag.raised:
                return "interrupted"
            return "stop requested" if reader.stop_requested(logbook, writer.run) else ""

        collector = Collector(client, writer, token, stop=stop, progress=progress)
        outcome = collector.outcome
        try:
            if not flag.raised:
                session.start(client, rig, program, token)
                outcome = collector.run()
            else:
                outcome.asked_to_stop = "interrupted"
            fetch_recorder(client, writer, outcome)
        except LodestrokeError as fault:
            session.quench(client)
            _close(writer, outcome, rig, fault.what)
            raise
    return _close(writer, outcome, rig, outcome.asked_to_stop or outcome.why)


def _close(writer: Writer, outcome: Outcome, rig: Rig, end: str) -> dict[str, Any]:
    summary = {
        "run": writer.run,
        "end": end,
        "cycles_done": outcome.cycles_done,
        "ticks": outcome.end_tick,
        "duration_s": round(outcome.end_tick * rig.board.tick, 6),
        "trips": [trips.as_json(trip) for trip in outcome.trips],
    }
    writer.finish(end, summary)
    return summary
