"""The one loop that takes what a running board sends: to disk first, then acknowledged."""

from __future__ import annotations

import contextlib
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

from lodeboard.wire import messages

from ..errors import LinkTimeout, Refused
from ..link import Client, Entry, Restarted, Sample, Text

FLUSH_S = 0.4  # the board resends what is not acknowledged within two seconds
SILENT_S = 1.5  # beats come five times a second
LEAST_S, MOST_S = 0.4, 10.0  # after the end, waited at least and at most
QUIET_S = 0.1  # after the end: no sample for so long means that the tail is over


class Sink(Protocol):
    """Where a run's rows go: a logbook's Writer, or nothing on disk (Memory)."""

    def cycle(self, fields: dict[str, int]) -> None: ...
    def mark(self, fields: dict[str, int]) -> None: ...
    def trip(self, fields: dict[str, int]) -> None: ...
    def seen(self, entry: int) -> None: ...
    def gap(
        self,
        after_cycle: int,
        why: str,
        first: int | None = None,
        last: int | None = None,
        unnumbered_most: int = 0,
    ) -> None: ...
    def note(self, text: str) -> None: ...
    def samples(self, rows: bytes) -> None: ...
    def recorder(self, entry: int, rows: bytes) -> None: ...
    def flush(self, *, whole: bool = True) -> int: ...


class Memory:
    """A sink for dry-runs: counts and keeps, puts nothing on disk."""

    def __init__(self) -> None:
        self.rows = bytearray()
        self.cycles: list[dict[str, int]] = []
        self.marks: list[dict[str, int]] = []
        self.gaps: list[tuple[int, int]] = []
        self.entry = 0

    def cycle(self, fields: dict[str, int]) -> None:
        self.cycles.append(fields)
        self.entry = fields["entry"]

    def mark(self, fields: dict[str, int]) -> None:
        self.marks.append(fields)
        self.entry = fields["entry"]

    def trip(self, fields: dict[str, int]) -> None:
        self.entry = fields["entry"]

    def seen(self, entry: int) -> None:
        self.entry = entry

    def gap(
        self,
        after_cycle: int,
        why: str,
        first: int | None = None,
        last: int | None = None,
        unnumbered_most: int = 0,
    ) -> None:
        """Only a dry-run whose host was cut off loses any."""
        if first is not None and last is not None:
            self.gaps.append((first, last))

    def note(self, text: str) -> None:
        """Text from a twin goes to the terminal by itself."""

    def samples(self, rows: bytes) -> None:
        self.rows += rows

    def recorder(self, entry: int, rows: bytes) -> None:
        """The whole trace is kept anyway."""

    def flush(self, *, whole: bool = True) -> int:
        return self.entry


@dataclass
class Outcome:
    """How a program on a board ended."""

    why: str = ""  # finished, stopped, tripped, restarted
    end_tick: int = 0
    cycles_done: int = 0
    trips: list[dict[str, int]] = field(default_factory=list)
    asked_to_stop: str = ""  # what made us stop it
    last_tick: int = -1
    ends: list[dict[str, int]] = field(default_factory=list)  # one, unless something is wrong


class Collector:
    """Collects from a client into a sink until the program has ended and its tail has come."""

    def __init__(
        self,
        client: Client,
        sink: Sink,
        token: int,
        cycles_before: int = 0,
        *,
        stop: Callable[[], str] = lambda: "",
        progress: Callable[[Outcome], None] = lambda outcome: None,
    ) -> None:
        self.client = client
        self.sink = sink
        self.token = token
        self.stop = stop
        self.progress = progress
        self.outcome = Outcome(cycles_done=cycles_before)
        self.keep_samples = True
        self.flush_at = client.port.now_s()
        self.heard_at = self.flush_at
        self.sample_at = self.flush_at
        self.ended_at: float | None = None

    def run(self) -> Outcome:
        """Until the end. Raises LinkTimeout when the board falls silent, PortLost, LogbookError."""
        while not self._over():
            event = self.client.poll(0.05)
            now_s = self.client.port.now_s()
            if event is None:
                self._silence(now_s)
            else:
                self.heard_at = now_s
                self._take(event, now_s)
            if now_s - self.flush_at >= FLUSH_S:
                self._flush(whole=False)
                self._maybe_stop()
        self._flush(whole=True)
        return self.outcome

    def _over(self) -> bool:
        if self.outcome.why == "restarted":
            return True
        if self.ended_at is None:
            return False
        since_s = self.client.port.now_s() - self.ended_at
        quiet_s = self.client.port.now_s() - max(self.ended_at, self.sample_at)
        return (quiet_s > QUIET_S and since_s > LEAST_S) or since_s > MOST_S

    def _take(self, event: object, now_s: float) -> None:
        if isinstance(event, Sample):
            self.sample_at = now_s
            if self.keep_samples:
                self.sink.samples(event.body)
        elif isinstance(event, Entry):
            self._entry(event, now_s)
        elif isinstance(event, Text):
            if event.text.strip():
                self.sink.note("the board said: " + event.text.strip()[:2000])
        elif isinstance(event, Restarted):
            self.outcome.why = "restarted"

    def _entry(self, event: Entry, now_s: float) -> None:
        fields = event.fields
        if event.kind == "cycle":
            self.sink.cycle(fields)
            self.outcome.cycles_done = fields["cycle"]
            self.outcome.last_tick = fields["tick"] + fields["duration_ticks"]
            self.progress(self.outcome)
        elif event.kind == "mark":
            self.sink.mark(fields)
        elif event.kind == "trip":
            self.sink.trip(fields)
            self.outcome.trips.append(fields)
        elif event.kind == "gap":
            self.sink.gap(
                self.outcome.cycles_done,
                "the board's ring was full",
                fields["first_cycle"],
                fields["last_cycle"],
            )
            self.sink.seen(event.entry)
        else:
            self.sink.seen(event.entry)
            if fields["run_token"] == self.token:
                self.outcome.ends.append(fields)
                self.outcome.why = messages.ENDS[fields["why"]]
                self.outcome.end_tick = fields["tick"]
                self.ended_at = now_s

    def _flush(self, whole: bool) -> None:
        entry = self.sink.flush(whole=whole)
        self.flush_at = self.client.port.now_s()
        self.client.saved(entry)

    def _maybe_stop(self) -> None:
        if self.ended_at is not None or self.outcome.asked_to_stop:
            return
        reason = self.stop()
        if reason:
            self.outcome.asked_to_stop = reason
            # refused: it ended by itself in the meantime, and its end entry is on the way
            with contextlib.suppress(Refused):
                self.client.command("stop")

    def _silence(self, now_s: float) -> None:
        """Nobody spoke: ask who is there once it lasts."""
        if now_s - self.heard_at < SILENT_S:
            return
        self._flush(whole=True)
        before = self.client.info
        try:
            info = self.client.hello(self.client.saved_entry)
        except LinkTimeout as fault:
            raise LinkTimeout(
                "the board fell silent in the middle of a run",
                at=self.client.port.name,
                got=fault.got,
                bound=f"a beat within {SILENT_S:g} s",
                try_="look at its power. It is safe by itself; endure --resume carries on",
            ) from fault
        self.heard_at = self.client.port.now_s()
        if before is not None and info.boot_nonce != before.boot_nonce:
            self.outcome.why = "restarted"


def fetch_recorder(client: Client, sink: Sink, outcome: Outcome) -> None:
    """The flight recorder of the last trip, once the board stands still."""
    if not outcome.trips or outcome.why != "tripped":
        return
    try:
        rows = client.recall()
    except (Refused, LinkTimeout) as fault:
        sink.note(f"the flight recorder could not be read: {fault.what}")
        return
    sink.recorder(outcome.trips[-1]["entry"], rows)
    sink.flush()
