"""The lock-step virtual board: the real interpreter gives the twin's trace, and survives resets."""

from __future__ import annotations

import hashlib
from typing import Any

import pytest
from boards import RIG, ROOT

from lodestroke.errors import PortLost
from lodestroke.link import Client, Entry, Sample
from lodestroke.rig import limits_blob, load_rig
from lodestroke.schedule import compile_program, load_schedule
from lodestroke.twin.engine import TwinEngine
from lodestroke.virtual import available
from lodestroke.virtual.lockstep_engine import VirtualEngine

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")


def armed(engine: Any, schedule: str) -> Client:
    """A client of a board that is armed for a shipped schedule, streaming every tick."""
    rig = load_rig(RIG)
    program = compile_program(
        load_schedule(ROOT / "hil_configs" / "schedules" / f"{schedule}.toml"), rig
    )
    client = Client(engine.port)
    client.hello()
    client.send_limits(*limits_blob(rig), rig.fingerprint)
    client.send_program(program.records, program.crc32, rig.fingerprint)
    client.command("stream", every_ticks=1)
    client.command("arm", fingerprint=rig.fingerprint, program_crc32=program.crc32)
    return client


def trace(engine: Any, schedule: str) -> tuple[int, str, list[Entry]]:
    """(samples, SHA-256 over their bodies, journal) of a whole run."""
    client = armed(engine, schedule)
    client.command("go", run_token=7, cycles_before=0, last_cycle=0)
    digest, count, journal, quiet = hashlib.sha256(), 0, [], 0
    while quiet < 5:
        event = client.poll(0.1)
        quiet = 0 if isinstance(event, Sample) else quiet + any(e.kind == "end" for e in journal)
        if isinstance(event, Sample):
            digest.update(event.body)
            count += 1
        elif isinstance(event, Entry):
            journal.append(event)
            client.saved(event.entry)
    client.close()
    return count, digest.hexdigest(), journal


@pytest.mark.parametrize("schedule", ["gentle", "overdrive"])
def test_the_real_interpreter_gives_the_twins_trace(schedule: str) -> None:
    rig = load_rig(RIG)
    twin, virtual = (trace(place(rig, 11), schedule) for place in (TwinEngine, VirtualEngine))
    assert twin == virtual
    assert twin[0] > 1000


def test_a_reset_keeps_a_latched_trip_and_changes_the_nonce() -> None:
    engine = VirtualEngine(load_rig(RIG), 1)
    client = armed(engine, "gentle")
    engine.lockstep.inputs = 2                 # the external cut-out opens
    while client.hello().state != "tripped":
        client.poll(0.1)
    before = client.hello()
    engine.reboot()
    after = Client(engine.port).hello()
    client.close()
    assert after.state == "tripped"
    assert after.boot_nonce != before.boot_nonce


def test_a_reset_by_command_starts_the_board_anew() -> None:
    engine = VirtualEngine(load_rig(RIG), 1)
    client = Client(engine.port)
    first = client.hello()
    client.command("reset")
    assert Client(engine.port).hello().boot_nonce != first.boot_nonce
    client.close()


def test_a_board_that_gives_its_port_back_is_lost_to_the_host() -> None:
    engine = VirtualEngine(load_rig(RIG), 1)
    client = Client(engine.port)
    client.hello()
    client.command("maintain")
    with pytest.raises(PortLost, match="stopped"):
        client.poll(60.0)
    client.close()
