"""Dry-runs: a schedule on the twin or on the lock-step virtual board, and what would happen."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from .. import trips
from ..errors import LinkTimeout, ScheduleError
from ..link import Client
from ..logbook import Logbook, Writer, new_run
from ..rows import sample_rows
from . import record, session
from .collect import Collector, Memory, Outcome

if TYPE_CHECKING:
    from ..rig import Rig
    from ..schedule import Schedule

PLACES = ("twin", "virtual")
_DRY_TOKEN = 1
_SILENCES_MOST = 8  # how often a host that was cut off comes back


@dataclass(frozen=True)
class DryRun:
    """What a dry-run showed: the figures of --json, every sample, cycles, marks, trips."""

    result: dict[str, Any]
    samples: np.ndarray
    cycles: list[dict[str, int]]
    marks: list[dict[str, int]]
    trips: list[dict[str, int]]
    gaps: list[tuple[int, int]] = field(default_factory=list)
    ends: list[dict[str, int]] = field(default_factory=list)


class Harness(Protocol):
    """Something between plant and board, fitted before the run: injected faults, say."""

    def fit(self, engine: Any) -> None:
        """Take its place."""
        ...

    @property
    def silent(self) -> bool:
        """Whether the host is cut off now."""
        ...

    @property
    def cut(self) -> bool:
        """Whether the host has been cut off so far."""
        ...


def open_engine(rig: Rig, seed: int, on: str) -> Any:
    """A simulated board in lock-step. Raises Unavailable where there is no interpreter."""
    if on == "twin":
        from ..twin.engine import TwinEngine

        return TwinEngine(rig, seed)
    if on == "virtual":
        from ..virtual.lockstep_engine import VirtualEngine

        return VirtualEngine(rig, seed)
    raise ScheduleError(
        "unknown place for a dry-run",
        at="--on",
        got=on,
        bound=", ".join(PLACES),
        try_="choose one of these",
    )


def dry_run(
    rig: Rig,
    schedule: Schedule,
    *,
    seed: int = 0,
    on: str = "twin",
    stop: Callable[[], str] = lambda: "",
    progress: Callable[[Outcome], None] = lambda outcome: None,
    harness: Harness | None = None,
) -> DryRun:
    """Run a schedule in simulated time. Raises ScheduleError, Unavailable, LinkError."""
    from ..schedule import compile_program

    program = compile_program(schedule, rig)
    engine = open_engine(rig, seed, on)
    try:
        client = Client(engine.port)
        client.hello()
        session.load(client, rig, program, every_ticks=1)
        before = engine.plant.truth()
        if harness is not None:
            harness.fit(engine)
        session.start(client, rig, program, _DRY_TOKEN)
        sink = Memory()
        collector = Collector(client, sink, _DRY_TOKEN, stop=stop, progress=progress)
        outcome = _collect(collector, engine, harness)
        truth = engine.plant.truth()
    finally:
        engine.close()
    rows = bytes(sink.rows)
    result = _figures(rig, outcome, rows, before, truth)
    result.update(
        seed=seed,
        on=on,
        schedule=schedule.title,
        rig=rig.title,
        cycles_planned=program.cycles,
        ticks_planned=program.ticks,
    )
    return DryRun(
        result,
        sample_rows(rows),
        sink.cycles,
        sink.marks,
        outcome.trips,
        sink.gaps,
        outcome.ends,
    )


def _collect(collector: Collector, engine: Any, harness: Harness | None) -> Outcome:
    """Collect to the end; a host that the harness cuts off comes back once its cable is in."""
    for _ in range(_SILENCES_MOST):
        try:
            return collector.run()
        except LinkTimeout:
            if harness is None or not harness.cut:
                raise
        while harness.silent:
            engine.advance()
        collector.client.hello(collector.client.saved_entry)
        collector.heard_at = collector.client.port.now_s()
    return collector.run()


def _figures(
    rig: Rig, outcome: Outcome, rows: bytes, before: dict[str, float], truth: dict[str, float]
) -> dict[str, Any]:
    duration_s = outcome.end_tick * rig.board.tick
    delivered_ul = (truth["delivered_m3"] - before["delivered_m3"]) * 1e9
    return {
        "ticks": len(rows) // 28,
        "cycles": outcome.cycles_done,
        "duration_s": round(duration_s, 6),
        "delivered_ul": round(delivered_ul, 4),
        "mean_flow_ul_min": round(delivered_ul / duration_s * 60.0, 3) if duration_s else 0.0,
        "peak_chamber_pa": round(truth["peak_chamber_pa"], 1),
        "peak_outlet_pa": round(truth["peak_outlet_pa"], 1),
        "min_margin_pa": round(truth["min_margin_pa"], 1),
        "collapsed": bool(truth["collapses_inlet"] + truth["collapses_outlet"]),
        "peak_coil_c": round(truth["peak_coil_c"], 3),
        "trips": [trips.as_json(trip) for trip in outcome.trips],
        "end": outcome.asked_to_stop or outcome.why,
        "trace_sha256": hashlib.sha256(rows).hexdigest(),
    }


def log_dry_run(
    logbook: Logbook, dry: DryRun, rig: Rig, schedule: Schedule, bundle_id: bytes
) -> str:
    """A dry-run as a run of the logbook, seed and hashes with it; its id. Raises LogbookError."""
    files = {"schedule": schedule.source}
    sources = record.sources_of(rig, **files)
    meta = record.describe(rig, sources, files, bundle_id, seed=dry.result["seed"])
    run_id = new_run(
        logbook,
        "dry-run",
        title=schedule.title,
        place=str(dry.result["on"]),
        meta=meta,
        sources=sources,
    )
    with Writer(logbook, run_id) as writer:
        writer.begin(0, 0, 1)
        for fields in dry.cycles:
            writer.cycle(fields)
        for fields in dry.marks:
            writer.mark(fields)
        for fields in dry.trips:
            writer.trip(fields)
        writer.samples(dry.samples.tobytes())
        writer.finish(
            str(dry.result["end"]),
            {**dry.result, "run": run_id, "cycles_done": dry.result["cycles"]},
        )
    return run_id
