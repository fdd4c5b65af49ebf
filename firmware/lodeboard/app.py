"""Start of an installed package: opens this board's Hal, builds the board, runs its loop.

The slot holds `board.json` (which Hal, which pins) and `bundle.txt` (the bundle id in hexadecimal).
"""

from . import storage  # isort: skip - before everything else, see there
import json
from binascii import unhexlify

from . import states
from .board import Board
from .compat import collect_often, const
from .hal import Hal
from .loop import Loop

TYPE_CHECKING = False
if TYPE_CHECKING:
    from collections.abc import Callable

_PROVING_TICKS = const(1000)


def open_hal(folder: str) -> Hal:
    """The Hal named by board.json, with its pins."""
    with open(folder + "/board.json") as file:
        config = json.load(file)
    module = __import__(config["hal"], None, None, ("open_hal",))
    return module.open_hal(config)  # type: ignore[no-any-return]


class ProvingLoop(Loop):
    """A loop that calls `prove` once, after its first second, when no current can flow.

    `prove` writes to flash, which stops everything for a while: never while armed.
    """

    def __init__(self, board: Board, prove: "Callable[[], None]") -> None:
        Loop.__init__(self, board)
        self.prove: "Callable[[], None] | None" = prove
        self.left = _PROVING_TICKS

    def step(self) -> None:
        Loop.step(self)
        if self.left:
            self.left -= 1
        elif self.prove is not None and not self.board.locked:
            if self.board.state in (states.SAFE, states.TRIPPED):
                prove = self.prove
                self.prove = None
                prove()


def run(folder: str, prove: "Callable[[], None]") -> None:
    """Run until the port is given back. A fault after a good second restarts the board, tripped;
    one before that is raised, so that the slot before this one gets its turn.
    """
    hal = open_hal(folder)
    with open(folder + "/bundle.txt") as file:
        bundle_id = unhexlify(file.read().strip())
    board = Board(hal, bundle_id, storage.SAMPLE_ROWS)
    collect_often(-1)
    board.boot()
    loop = ProvingLoop(board, prove)
    hal.own_port(True)
    try:
        loop.run()
    except Exception:
        if loop.prove is None:
            hal.reset()
        raise
    finally:
        hal.drive(0, 0, 0)
        if loop.service.reset_wanted:
            hal.reset()                # before own_port, which on metal may be a reset of its own
        hal.own_port(False)
