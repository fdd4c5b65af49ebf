"""The short measurements that an endurance run stops for, and the stop rules that read them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from .. import trips
from ..analysis.checkups import evaluate
from ..logbook import reader
from ..rows import sample_rows
from . import session
from .collect import Collector, Memory, fetch_recorder

if TYPE_CHECKING:
    from .bench import Bench


def due_items(bench: Bench) -> list[str]:
    """Items still to be measured after the cycles done so far."""
    checkup = bench.plan.checkup
    if checkup is None or bench.done == 0 or bench.done % checkup.every_cycles:
        return []
    have = {
        row["item"]
        for row in reader.checkups(bench.logbook, bench.writer.run)
        if row["after_cycle"] == bench.done
    }
    return [item for item in checkup.items if item not in have]


def run_checkups(bench: Bench, items: list[str]) -> str:
    """Measure one item after the other; why the run ends, if it does."""
    for item in items:
        end = _run_item(bench, item)
        if end:
            return end
    return ""


class _Checkup(Memory):
    """Samples for the analysis; journal entries (a trip, a mark) go on record."""

    def __init__(self, bench: Bench) -> None:
        super().__init__()
        self.writer = bench.writer

    def mark(self, fields: dict[str, int]) -> None:
        self.writer.seen(fields["entry"])

    def trip(self, fields: dict[str, int]) -> None:
        self.writer.trip(fields)

    def seen(self, entry: int) -> None:
        self.writer.seen(entry)

    def note(self, text: str) -> None:
        self.writer.note(text)

    def recorder(self, entry: int, rows: bytes) -> None:
        self.writer.recorder(entry, rows)

    def flush(self, *, whole: bool = True) -> int:
        return self.writer.flush(whole=whole)


def _run_item(bench: Bench, item: str) -> str:
    from ..schedule import compile_program
    from ..schedule.checkups import checkup_schedule

    if bench.stop():
        return bench.stop()
    program = compile_program(checkup_schedule(item, bench.rig), bench.rig)
    session.load(bench.client, bench.rig, program, every_ticks=1)
    token = session.new_token()
    bench.remember(token, f"checkup {item}")
    session.start(bench.client, bench.rig, program, token, bench.done)
    sink = _Checkup(bench)
    outcome = Collector(bench.client, sink, token, bench.done, stop=bench.stop).run()
    bench.trips += outcome.trips
    if outcome.why == "tripped":
        fetch_recorder(bench.client, sink, outcome)
        return "tripped in a check-up: " + trips.name(outcome.trips[-1]["code"])
    if outcome.asked_to_stop or outcome.why == "restarted":
        return outcome.asked_to_stop or "the board restarted in a check-up"
    result = evaluate(item, sample_rows(bytes(sink.rows)), bench.rig)
    bench.writer.checkup(bench.done, item, result)
    bench.writer.flush()
    bench.say(f"check-up after {bench.done}, {item}: " + _brief(result))
    return ""


def _brief(result: dict[str, object]) -> str:
    if not result.get("ok"):
        return f"not measured: {result.get('why')}"
    return ", ".join(
        f"{key} {value}"
        for key, value in result.items()
        if not key.startswith("u_") and key not in ("ok", "why")
    )


_WATCHED = (
    ("resistance_change", "coil_resistance", "coil_resistance_ohm"),
    ("cracking_change", "cracking", "outlet_cracking_pa"),
    ("stroke_change", "stroke_volume", "stroke_volume_ul"),
)


def stop_rule(bench: Bench) -> str:
    """Whether a rule of the plan ends the run: a quantity moved too far from its first check-up."""
    rows = reader.checkups(bench.logbook, bench.writer.run)
    for rule, item, quantity in _WATCHED:
        bound = getattr(bench.plan.stop, rule, 0.0)
        values = [
            row["result"][quantity]
            for row in rows
            if row["item"] == item and row["result"].get("ok")
        ]
        if bound and len(values) > 1 and values[0]:
            change = abs(values[-1] / values[0] - 1.0)
            if change > bound:
                return f"stop rule: {quantity} changed by {change:.1%}, bound {bound:.1%}"
    return ""
