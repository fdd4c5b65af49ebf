"""Installing a bundle: inactive slot, sums checked on the board, pointer last, id read back."""

from __future__ import annotations

import binascii
import contextlib
import json
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from lodeboard import states
from lodeboard.wire.frames import UpReader, build_down

from ..errors import FlashError, LinkTimeout, LodestrokeError, PortError
from ..link import BoardInfo, Client, Port, open_port
from ..link.decode import pack_down, unpack_up
from .bundle import BOOT_WINDOW_MS, GOOD, SLOTS, Bundle, build_bundle, sha256
from .mpremote import Mpremote
from .snippets import CLEAR, PROBE, SUMS

_TRIES_OF_A_NEW_SLOT = 2
_GREET_S = 0.4
_BACK_S = 12.0          # window, import and start of a slow board
_COPY_LIMIT_S = {"virtual": 30.0}      # others: 120 s


def install(rig: Any, port_name: str, say: Callable[[str], None]) -> dict[str, Any]:
    """Put this rig's firmware on the board and see it answer with its bundle id.

    Returns bundle (hex), slot, files, bytes, board (what the interpreter calls itself), copied,
    seconds. `say` gets one line per step. Raises FlashError, PortError, LinkError.
    """
    began = time.monotonic()
    bundle = build_bundle(rig)
    _refuse_a_busy_board(port_name, say)
    tool = Mpremote(port_name)
    say("asking the board what it is")
    probe = _json(tool.execute("ask the board what it is", PROBE), "ask the board what it is")
    _fits(probe, bundle, port_name)
    slot, back, sequence = _choose(probe["pointers"])
    try:
        say(f"copying {len(bundle.files)} files to {slot}")
        _copy_slot(tool, bundle, slot)
        say("checking their SHA-256 sums on the board")
        _verify(tool, bundle, slot, port_name)
        say("boot files and slot pointer")
        _copy_boot(tool, bundle)
        _point(tool, bundle, slot, back)
    except FlashError:
        say("that failed; restarting what was on the board before")
        with contextlib.suppress(LodestrokeError):
            _let_go(tool, bundle, port_name)
        raise
    say("restarting")
    info = _restart(tool, bundle, port_name)
    say(f"the board answers with bundle {info.bundle_id.hex()}")
    return {
        "bundle": bundle.bundle_id.hex(), "slot": slot, "previous": back,
        "files": len(bundle.files), "bytes": sum(map(len, bundle.files.values())),
        "board": probe["machine"], "interpreter": probe["version"], "sequence": sequence + 1,
        "seconds": round(time.monotonic() - began, 2),
    }


def greet(port: Port, timeout_s: float) -> BoardInfo | None:
    """Who answers a hello within the time; None when no firmware of ours does."""
    code, body = pack_down("hello", {"wire_version": 0, "saved_entry": 0})
    port.write(b"~" + build_down(code, 0, body))
    reader = UpReader()
    end_s = port.now_s() + timeout_s
    while (left_s := end_s - port.now_s()) > 0:
        for up_code, _, up_body in reader.feed(port.read(left_s)):
            message = unpack_up(up_code, up_body)
            if isinstance(message, BoardInfo):
                return message
    return None


def _refuse_a_busy_board(port_name: str, say: Callable[[str], None]) -> None:
    """A board that may have current in its coil is not interrupted for new firmware."""
    port = open_port(port_name)
    try:
        info = greet(port, _GREET_S)
    finally:
        port.close()
    if info is None:
        say("no firmware of ours answers; going in through the prompt")
        return
    say(f"firmware {info.bundle_id.hex()} is running and lets go")
    if info.state in [states.NAMES[state] for state in states.ENERGISED]:
        raise FlashError(
            "a run is under way on this board", at=port_name, got=f"state {info.state}",
            bound="safe or tripped, coil off",
            try_="end the run first (Ctrl-C in its window), then flash",
        )


def _json(said: str, step: str) -> Any:
    for line in reversed(said.splitlines()):
        if line.startswith(("{", "[")):
            try:
                return json.loads(line)
            except ValueError:
                break
    raise FlashError(
        f"installing failed at step '{step}'", got=f"{said.strip()[-200:]!r}",
        bound="one line of JSON", try_="reset the board and try again",
    )


def _fits(probe: dict[str, Any], bundle: Bundle, port_name: str) -> None:
    """Refuse a board that is another kind than the rig says."""
    virtual = probe["platform"] in ("linux", "darwin")
    chip = str(probe["machine"]).lower()
    right = virtual if bundle.kind == "virtual" else bundle.kind in chip
    if probe["name"] != "micropython" or not right:
        raise FlashError(
            "this is not the board that the rig names", at=port_name,
            got=f"{probe['name']} on {probe['machine'] or probe['platform']}",
            bound=f'board.kind = "{bundle.kind}"',
            try_="use the rig file of this board, or the right port",
        )


def _newest(lines: list[str]) -> tuple[int, str, int, str] | None:
    """(sequence, slot, left, back) of the newer whole pointer copy, as boot/slots.py reads them."""
    rows = []
    for line in lines:
        words = line.split()
        if len(words) == 6 and words[5] == str(binascii.crc32(" ".join(words[:5]).encode())):
            rows.append((int(words[0]), words[1], int(words[2]), words[3]))
    return max(rows) if rows else None


def _choose(lines: list[str]) -> tuple[str, str, int]:
    """(slot to fill, slot to fall back to or "-", sequence of the pointer that is there).

    A slot that has proved good is never written over while it is the one in use.
    """
    newest = _newest(lines)
    if newest is None:
        return SLOTS[0], "-", 0
    sequence, slot, left, back = newest
    if left != GOOD and back in SLOTS:
        return slot, back, sequence
    other = SLOTS[1 - SLOTS.index(slot)]
    return (other, slot, sequence) if left == GOOD else (other, "-", sequence)


def _copy_slot(tool: Mpremote, bundle: Bundle, slot: str) -> None:
    """The slot emptied first: a stale module would shadow or survive."""
    tool.execute("empty the slot", CLEAR + f"\nclear('{slot}')", 15.0)
    limit_s = _COPY_LIMIT_S.get(bundle.kind, 120.0)
    with tempfile.TemporaryDirectory(prefix="lodestroke-") as folder:
        for name, data in bundle.files.items():
            path = Path(folder) / slot / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(data)
        tool.run("copy", ["fs", "cp", "-r", str(Path(folder) / slot), ":"], limit_s)


def board_sums(tool: Mpremote, top: str) -> dict[str, str]:
    """SHA-256 of each file below a folder of the board ("" for the files of its root)."""
    code = SUMS + f"\nprint(json.dumps(sums('{top}')))"
    found: dict[str, str] = _json(tool.execute("check the sums", code, 60.0), "check the sums")
    return found


def _verify(tool: Mpremote, bundle: Bundle, slot: str, port_name: str) -> None:
    wanted = {name: sha256(data) for name, data in bundle.files.items()}
    found = board_sums(tool, slot)
    wrong = sorted(n for n in wanted.keys() | found.keys() if wanted.get(n) != found.get(n))
    if wrong:
        raise FlashError(
            "what arrived on the board is not what was sent", at=f"{port_name}, {slot}",
            got=f"{len(wrong)} of {len(wanted)} files differ: {', '.join(wrong[:5])}",
            bound="the bundle's SHA-256 sums",
            try_="flash again; if it stays, the board's flash is worn or its cable is bad",
        )


def _copy_boot(tool: Mpremote, bundle: Bundle) -> None:
    """Boot files are outside the slots: written only when they differ, and renamed into place."""
    here = board_sums(tool, "")
    changed = {n: d for n, d in bundle.boot.items() if here.get(n) != sha256(d)}
    if not changed:
        return
    arguments: list[str] = []
    with tempfile.TemporaryDirectory(prefix="lodestroke-") as folder:
        for name, data in changed.items():
            path = Path(folder) / name
            path.write_bytes(data)
            arguments += ["fs", "cp", str(path), f":{name}.new", "+"]
        tool.run("copy the boot files", arguments[:-1], 30.0)
    # slots.py before main.py, which imports it
    names = sorted(changed, reverse=True)
    code = f"import os\nfor n in {names!r}:\n os.rename(n + '.new', n)"
    tool.execute("put the boot files in place", code)


def _point(tool: Mpremote, bundle: Bundle, slot: str, back: str) -> None:
    window_ms = BOOT_WINDOW_MS.get(bundle.kind)
    code = f"import slots\nslots.write('{slot}', {_TRIES_OF_A_NEW_SLOT}, '{back}', {window_ms})"
    tool.execute("set the slot pointer", code)


def _restart(tool: Mpremote, bundle: Bundle, port_name: str) -> BoardInfo:
    """Restart into the new package and have it name itself. Raises FlashError."""
    _let_go(tool, bundle, port_name)
    info = _hello(port_name)
    if info.bundle_id != bundle.bundle_id:
        raise FlashError(
            "the board runs other firmware than was installed", at=port_name,
            got=f"bundle {info.bundle_id.hex()}", bound=f"bundle {bundle.bundle_id.hex()}",
            try_="the new package did not start and the board fell back: "
                 "look at what it prints with `mpremote connect PORT repl`, then flash again",
        )
    return info


def _let_go(tool: Mpremote, bundle: Bundle, port_name: str) -> None:
    """Have the board start whatever its slot pointer names."""
    if bundle.kind != "virtual":
        tool.run("restart the board", ["exec", "--no-follow", "import machine;machine.reset()"], 10)
        time.sleep(1.0)                     # its port goes, and comes back
        return
    port = open_port(port_name)
    port.write(b"\r\x03\x02\x04")           # friendly REPL, then a soft reset that runs main.py
    time.sleep(0.05)                        # a port closed too soon takes its bytes with it
    port.close()


def _hello(name: str) -> BoardInfo:
    """Wait for the package to come up, whatever its port does meanwhile. Raises FlashError."""
    end = time.monotonic() + _BACK_S
    port: Port | None = None
    while True:
        try:
            port = port or open_port(name)
            info = Client(port).hello()
            port.close()
            return info
        except (LinkTimeout, PortError) as silent:
            if isinstance(silent, PortError):
                time.sleep(0.2)
            if port:
                port.close()
            port = None
            if time.monotonic() > end:
                raise FlashError(
                    "the board does not answer after the restart", at=name, got=silent.got,
                    bound=f"a hello within {_BACK_S:g} s",
                    try_="look at what it prints: mpremote connect PORT repl",
                ) from silent
