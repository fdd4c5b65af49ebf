"""From an open link to a running program: who is there, what it needs, arm, go."""

from __future__ import annotations

import contextlib
import secrets
from collections import deque
from typing import TYPE_CHECKING

from lodeboard import trips as trip_table

from .. import trips
from ..errors import LinkError, LodestrokeError, Refused, Tripped
from ..link import Beat, BoardInfo, Client, open_port

if TYPE_CHECKING:
    from ..link import Port
    from ..rig import Rig
    from ..schedule import Program


TAIL_S = 2.0  # the longest tail after a run's end, with time to spare


def new_token() -> int:
    """A number that ties what a board reports to one run; 30 bits, never 0."""
    return secrets.randbelow((1 << 30) - 1) + 1


def connect(port: str | Port, rig: Rig) -> Client:
    """A client on a port that is named, or that is open already. Raises PortError."""
    if isinstance(port, str):
        port = open_port(port, dtr=rig.board.port.dtr)
    return Client(port)


def check_board(info: BoardInfo, bundle_id: bytes, port: str) -> None:
    """The board must run the very firmware that this computer has. Raises LinkError."""
    if info.bundle_id != bundle_id:
        raise LinkError(
            "the board runs other firmware than this computer has for the rig",
            at=port,
            got=f"bundle {info.bundle_id.hex()}",
            bound=f"bundle {bundle_id.hex()}",
            try_=f"install it: lodestroke flash RIG --port {port}",
        )


def look(client: Client) -> Beat:
    """The board's state now, asked for."""
    client.events = deque(event for event in client.events if not isinstance(event, Beat))
    client.command("status")
    kept = []
    end_s = client.port.now_s() + 2.0
    try:
        while client.port.now_s() < end_s:
            event = client.poll(0.2)
            if isinstance(event, Beat):
                return event
            if event is not None:
                kept.append(event)
    finally:
        client.events.extendleft(reversed(kept))
    raise LinkError(
        "the board does not say how it is",
        at=client.port.name,
        got="no beat",
        bound="a beat within 2 s",
        try_="reset the board, then try again",
    )


def clear_trip(client: Client, beat: Beat, name: str | None) -> str | None:
    """Clear the latched trip if it is the one that is named; its name, or None when there is none.

    A board that a host left armed is disarmed. Raises Tripped, naming what is latched and how to
    clear it.
    """
    if beat.state == "armed":
        client.command("disarm")
    if beat.state != "tripped":
        return None
    code = beat.fields["trip_code"]
    latched = trips.name(code)
    words = trips.WORDS.get(code)
    if name != latched:
        raise Tripped(
            f"a trip is latched: {words.what if words else latched}",
            at=client.port.name,
            got=latched,
            bound="no trip" if name is None else f"the trip named, {name}",
            try_=f"{words.next if words else 'find its cause'}; then add --clear {latched}",
        )
    client.command("clear", code=code, trip_serial=beat.fields["trip_serial"])
    return latched


def load(client: Client, rig: Rig, program: Program, every_ticks: int) -> None:
    """Limits and program onto the board, live samples every so many ticks."""
    from ..rig import limits_blob

    blob, crc32 = limits_blob(rig)
    end_s = client.port.now_s() + TAIL_S
    while True:
        try:
            client.send_limits(blob, crc32, rig.fingerprint)
            break
        except Refused:
            # safe already, but the recorder's tail of the last run is still being taken
            if look(client).state != "safe" or client.port.now_s() > end_s:
                raise
    client.send_program(program.records, program.crc32, rig.fingerprint)
    client.command("stream", every_ticks=every_ticks)


def start(
    client: Client, rig: Rig, program: Program, token: int, before: int = 0, last: int = 0
) -> None:
    """Arm and go: cycles count from before + 1; last ends the program once it is complete."""
    client.command("arm", fingerprint=rig.fingerprint, program_crc32=program.crc32)
    try:
        client.command("go", run_token=token, cycles_before=before, last_cycle=last)
    except Refused:
        clear_trip(client, look(client), None)  # a trip since arming is the better answer
        raise


def quench(client: Client) -> None:
    """Something failed on our side: ask the board to stop, and let be if it cannot hear."""
    with contextlib.suppress(LodestrokeError):
        client.command("stop")


HOST_SILENT = trip_table.TABLE[trip_table.HOST_SILENT][0]
