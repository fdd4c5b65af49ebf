"""A host that writes cycles into a logbook and says what is on disk: `python log_child.py LOGBOOK`.

Goes on where the run on disk ends, as a board would resend: the last ten cycles come again. Each
acknowledged entry is one line on stdout, written only after flush() has returned. On a LogbookError
it prints the error as JSON and waits for a line on stdin before it flushes once more.
"""

from __future__ import annotations

import json
import sys

from lodeboard.wire import messages
from lodestroke.errors import LogbookError
from lodestroke.logbook import Writer, new_run, open_logbook, reader

FIELDS = next(fields for _, name, _, fields in messages.UP if name == "cycle")


def cycle(number: int) -> dict[str, int]:
    """A cycle whose every figure follows from its number."""
    return {name: number * 31 + at for at, name in enumerate(FIELDS)} | {
        "entry": number, "cycle": number}


def main(place: str) -> None:
    """Write until killed."""
    log = open_logbook(place)
    run = reader.resolve(log, "last") if reader.runs(log) else new_run(log, "endure")
    number = max(reader.last_cycle(log, run) - 10, 0)
    with Writer(log, run) as writer:
        writer.begin(1, number, 1)
        while True:
            for _ in range(5):
                number += 1
                writer.cycle(cycle(number))
                writer.samples(number.to_bytes(4, "little") + bytes(range(24)))
            try:
                print(writer.flush(), flush=True)
            except LogbookError as fault:
                print(json.dumps(fault.as_json()), flush=True)
                sys.stdin.readline()
                print(writer.flush(), flush=True)


if __name__ == "__main__":
    main(sys.argv[1])
