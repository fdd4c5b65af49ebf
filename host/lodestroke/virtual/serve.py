"""The process of a virtual board: builds plant and relay, announces the port, serves.

Started by the launcher as `python -m lodestroke.virtual CONFIG`, CONFIG being JSON with the
fields of `BoardConfig`. Its first line on stdout is JSON with `port` and `side`. The end of its
standard input, SIGTERM or Ctrl-C end it.
"""

from __future__ import annotations

import contextlib
import json
import os
import shutil
import signal
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ..errors import PortError, RigError, Unavailable
from ..twin.lockstep import Lockstep
from .interpreter import available, interpreter_path
from .relay import Relay

HEAP_KIB = 192               # what an RP2040 leaves to Python


@dataclass
class BoardConfig:
    """`flash`: folder seen as the board's file system. `still`: nothing wired, no plant loaded."""

    rig: str
    work: str
    flash: str
    seed: int = 0
    link: str = ""
    still: bool = False


class StillPlant:
    """Nothing moves: every channel at the middle of a 14-bit converter."""

    counts = (8192,) * 6

    def step(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        """No plant, nothing to advance."""


def _bench(config: BoardConfig) -> tuple[Lockstep, str, int]:
    """(plant in lock-step, board id, heap in KiB) of a rig."""
    if config.still:
        return Lockstep(StillPlant()), "still", HEAP_KIB
    from ..plant import Plant
    from ..rig import load_rig

    rig = load_rig(config.rig)
    if rig.board.kind != "virtual":
        raise RigError(
            "this rig is wired to a real board", at=f"{config.rig}, board.kind",
            got=f'"{rig.board.kind}"', bound='"virtual"',
            try_="connect that board, or use a rig for simulation: hil_configs/bench-sim.toml",
        )
    heap = int(getattr(rig.board, "heap", None) or HEAP_KIB * 1024)
    serial = getattr(rig.board, "serial", None) or "virtual"
    # compiled before anybody waits for an answer, on a plant of its own
    Plant.from_rig(rig, config.seed).step(0, 0, 0)
    return Lockstep(Plant.from_rig(rig, config.seed)), serial, heap // 1024


def build_relay(config: BoardConfig) -> Relay:
    """A running virtual board, not yet served. Raises Unavailable, RigError."""
    if available():
        interpreter_path()
    bench, serial, heap_kib = _bench(config)
    try:
        return Relay(bench, Path(config.flash), Path(config.work), serial, heap_kib)
    except OSError as err:
        raise Unavailable(
            "the virtual board cannot start", got=str(err),
            try_="see that this user may open pseudo-terminals (/dev/ptmx)",
        ) from err


@contextlib.contextmanager
def stable_name(link: str, port: str) -> Iterator[None]:
    """A symbolic link to the port while the board is up; replaces a link, never a file."""
    if not link:
        yield
        return
    path = Path(link)
    if path.exists() and not path.is_symlink():
        raise PortError(
            "the link's name is taken", at=link, got="a file that is no symbolic link",
            try_="choose another --link",
        )
    fresh = path.with_name(path.name + f".{os.getpid()}")
    try:
        fresh.symlink_to(port)
        fresh.replace(path)
    except OSError as err:
        raise PortError("the link cannot be made", at=link, got=str(err)) from err
    try:
        yield
    finally:
        with contextlib.suppress(OSError):
            if os.readlink(path) == port:
                path.unlink()


@contextlib.contextmanager
def ended_by_signals() -> Iterator[Callable[[Relay], None]]:
    """SIGTERM, Ctrl-C and a closed terminal end the relay that is handed to the yielded function;
    before that they end the process, with its clean-up.
    """
    relays: list[Relay] = []

    def end(_number: int, _frame: Any) -> None:
        if not relays:
            sys.exit(0)
        for relay in relays:
            relay.ending = True

    numbers = (signal.SIGTERM, signal.SIGINT, signal.SIGHUP)
    before = {number: signal.signal(number, end) for number in numbers}
    try:
        yield relays.append
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def serve(config: BoardConfig, ready: Callable[[Relay], None], parent_fd: int = -1) -> None:
    """Build a board, say that it is ready, serve until told to end. Its work folder goes too."""
    try:
        with ended_by_signals() as end_with_signals:
            relay = build_relay(config)
            relay.parent_fd = parent_fd
            end_with_signals(relay)
            try:
                with stable_name(config.link, relay.port):
                    ready(relay)
                    relay.serve()
            finally:
                relay.close()
    finally:
        shutil.rmtree(config.work, ignore_errors=True)


def main(argument: str) -> None:
    """The launcher's child."""

    def ready(relay: Relay) -> None:
        print(json.dumps({"port": relay.port, "side": relay.side.path}), flush=True)

    serve(BoardConfig(**json.loads(argument)), ready, sys.stdin.fileno())
