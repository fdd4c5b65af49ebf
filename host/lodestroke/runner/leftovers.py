"""Journal entries that a board still holds from before we came: they belong on record too."""

from __future__ import annotations

from collections.abc import Callable

from ..link import Client, Entry, Sample
from ..logbook import Logbook, Writer, reader
from .session import look


def drain(client: Client, limit_s: float = 5.0) -> list[Entry]:
    """Every entry that the board holds now, in order; nothing is acknowledged yet."""
    beat = look(client)
    newest = beat.fields["newest_entry"]
    entries: list[Entry] = []
    end_s = client.port.now_s() + limit_s
    while client.seen_entry < newest and client.port.now_s() < end_s:
        event = client.poll(0.1)
        if isinstance(event, Entry):
            entries.append(event)
    while client.events:
        event = client.events.popleft()
        if isinstance(event, Entry):
            entries.append(event)
        elif not isinstance(event, Sample):
            continue
    return entries


def put(writer: Writer, entries: list[Entry]) -> int:
    """Entries into a run; the last cycle among them, 0 for none."""
    last = 0
    for event in entries:
        if event.kind == "cycle":
            writer.cycle(event.fields)
            last = event.fields["cycle"]
        elif event.kind == "mark":
            writer.mark(event.fields)
        elif event.kind == "trip":
            writer.trip(event.fields)
        elif event.kind == "gap":
            writer.gap(
                event.fields["first_cycle"] - 1,
                "the board's ring was full",
                event.fields["first_cycle"],
                event.fields["last_cycle"],
            )
            writer.seen(event.entry)
        else:
            writer.seen(event.entry)
    return last


def settle(
    logbook: Logbook, client: Client, entries: list[Entry], say: Callable[[str], None]
) -> None:
    """Put entries of an earlier run where they belong, then let the board forget them."""
    if not entries:
        return
    info = client.info
    assert info is not None
    for row in reader.runs(logbook):
        state = row["resume"] or {}
        if state.get("nonce") == info.boot_nonce and state.get("token") == info.run_token:
            with Writer(logbook, row["id"]) as writer:
                writer.begin(info.boot_nonce, client.saved_entry, state.get("segment", 1))
                put(writer, entries)
                writer.note("entries that the board still held were added later")
                client.saved(writer.flush())
            say(f"{len(entries)} entries of run {row['id']} were still on the board: logged")
            return
    say(f"{len(entries)} entries of a run that this logbook does not know were on the board")
    client.saved(entries[-1].entry)
