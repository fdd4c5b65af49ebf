"""Draw the tables of DEVELOPERS.md from the code that both ends share.

python tests/tools/tables.py           rewrite them in place
python tests/tools/tables.py --check   exit 1 when the page and the code differ
"""

from __future__ import annotations

import re
import struct
import sys
from pathlib import Path

from lodeboard import program, states, trips
from lodeboard.wire import messages
from lodestroke.trips import WORDS

PAGE = Path(__file__).resolve().parents[2] / "DEVELOPERS.md"


def table(head: tuple[str, ...], rows: list[tuple[str, ...]]) -> str:
    """A Markdown table."""
    lines = ["| " + " | ".join(head) + " |", "|" + " --- |" * len(head)]
    return "\n".join(lines + ["| " + " | ".join(row) + " |" for row in rows])


def state_table() -> str:
    """Rows: state, and each event with the state that it leads to."""
    rows = []
    for state, moves in states.NEXT.items():
        text = ", ".join(f"{event} → {states.NAMES[to]}" for event, to in moves.items())
        rows.append((states.NAMES[state], text or "only a reset leads out"))
    return table(("state", "event → next state"), rows)


def trip_table() -> str:
    """Rows: code, name, stop category, what it means."""
    rows = [
        (str(code), f"`{name}`", str(category), WORDS[code].what)
        for code, (name, category) in trips.TABLE.items()
    ]
    return table(("code", "name", "stop category", "what"), rows)


def message_table() -> str:
    """Rows: direction, code, name, size, fields."""
    rows = []
    for way, listing in (("down", messages.DOWN), ("up", messages.UP)):
        for code, name, form, fields in listing:
            rows.append(
                (
                    way,
                    f"0x{code:02X}",
                    f"`{name}`",
                    str(struct.calcsize(form)),
                    ", ".join(fields) or "–",
                )
            )
    return table(("way", "code", "message", "bytes", "fields"), rows)


def record_table() -> str:
    """Rows: the operations of a program record."""
    names = ("END", "SEG", "CYCLE", "CLOSE", "LOOP", "NEXT", "MARK", "LIMIT", "RELAX")
    return table(("op", "name"), [(str(getattr(program, name)), name) for name in names])


TABLES = {
    "states": state_table,
    "trips": trip_table,
    "messages": message_table,
    "records": record_table,
}


def drawn(text: str) -> str:
    """The page with every marked table drawn anew."""
    for name, draw in TABLES.items():
        pattern = rf"(<!-- table {name} -->\n).*?(<!-- end {name} -->)"
        body = draw()
        text, count = re.subn(
            pattern, lambda found, body=body: found[1] + body + "\n" + found[2], text, flags=re.S
        )
        if count != 1:
            raise SystemExit(f"DEVELOPERS.md lacks the markers of table {name}")
    return text


def main() -> int:
    """Rewrite, or with --check compare."""
    text = PAGE.read_text(encoding="utf-8")
    fresh = drawn(text)
    if "--check" in sys.argv[1:]:
        return 0 if fresh == text else 1
    PAGE.write_text(fresh, encoding="utf-8")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
