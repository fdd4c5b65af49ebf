# Two firmware slots and a pointer. A new package is tried, and falls back until it has proved good.
#
# The pointer is one line of text, `sequence slot left back window_ms crc`, in two copies of which
# the newer whole one counts, so that a power cut leaves the old or the new pointer. `left` counts
# the starts that are left to a package on trial; -1: proved good. `back` is where to fall back to.
import binascii
import hashlib
import json
import os
import sys

TYPE_CHECKING = False
if TYPE_CHECKING:
    Pointer = tuple[int, str, int, str, int]

SLOTS = ("slot_a", "slot_b")
GOOD = -1
NONE = "-"
WINDOW_MS = 1500
_COPIES = ("/pointer.0", "/pointer.1")
_FLAG = "/maintain"


def _parse(line: str) -> "Pointer | None":
    words = line.split()
    if len(words) != 6 or binascii.crc32(" ".join(words[:5]).encode()) != int(words[5]):
        return None
    return int(words[0]), words[1], int(words[2]), words[3], int(words[4])


def _copies() -> "list[Pointer | None]":
    found: "list[Pointer | None]" = []
    for name in _COPIES:
        row: "Pointer | None" = None
        try:
            with open(name) as file:
                row = _parse(file.read())
        except (OSError, ValueError):
            pass
        found.append(row)
    return found


def read() -> "Pointer | None":
    """(sequence, slot, left, back, window_ms) of the newer whole copy, or None."""
    first, second = _copies()
    if first and (not second or first[0] > second[0]):
        return first
    return second


def text(sequence: int, slot: str, left: int, back: str, window_ms: int) -> str:
    line = "%d %s %d %s %d" % (sequence, slot, left, back, window_ms)
    return "%s %d\n" % (line, binascii.crc32(line.encode()))


def write(slot: str, left: int, back: str, window_ms: "int | None" = None) -> None:
    """Point to a slot. Goes over the older copy; the other stays whole until this one is."""
    first, second = _copies()
    newest = read()
    older = 1 if first and newest is first else 0
    sequence = newest[0] + 1 if newest else 1
    if window_ms is None:
        window_ms = newest[4] if newest else WINDOW_MS
    with open(_COPIES[older], "w") as file:
        file.write(text(sequence, slot, left, back, window_ms))


def window_ms() -> int:
    row = read()
    return row[4] if row else WINDOW_MS


def maintenance() -> bool:
    """Whether a reset into the prompt was asked for; asked for once, granted once."""
    try:
        os.remove(_FLAG)
    except OSError:
        return False
    return True


def sums(folder: str) -> "dict[str, str]":
    """SHA-256 of every file below a folder, by its path from there."""
    found: "dict[str, str]" = {}
    waiting = [""]
    buffer = bytearray(512)
    while waiting:
        at = waiting.pop()
        for entry in os.ilistdir(folder + "/" + at if at else folder):
            path = at + "/" + entry[0] if at else entry[0]
            if entry[1] & 0x4000:
                waiting.append(path)
            else:
                found[path] = _sum(folder + "/" + path, buffer)
    return found


def _sum(path: str, buffer: bytearray) -> str:
    digest = hashlib.sha256()
    with open(path, "rb") as file:
        while True:
            n = file.readinto(buffer)
            if not n:
                return binascii.hexlify(digest.digest()).decode()
            digest.update(memoryview(buffer)[:n])


def damaged(slot: str) -> "list[str]":
    """Files that are not what the package's manifest says; ["manifest.json"] without one."""
    try:
        with open("/" + slot + "/manifest.json") as file:
            wanted = json.load(file)["files"]
        found = sums("/" + slot)
    except (OSError, ValueError, KeyError):
        return ["manifest.json"]
    return [name for name in wanted if found.get(name) != wanted[name]]


def start() -> None:
    """Run the package that the pointer names, or the one before it; returns for the prompt."""
    row = read()
    if row is None:
        print("Lodestroke: no firmware installed")
        return
    _, slot, left, back, _ = row
    if left == 0:
        print("Lodestroke:", slot, "did not prove good")
    else:
        if left > 0:
            write(slot, left - 1, back)
        if _run(slot):
            return
    if back != NONE:
        print("Lodestroke: back to", back)
        write(back, GOOD, NONE)
        _run(back)


def _run(slot: str) -> bool:
    """True when the package ran and gave the port back; False when it could not be started."""
    bad = damaged(slot)
    if bad:
        print("Lodestroke:", slot, "is damaged:", " ".join(bad))
        return False
    sys.path.insert(0, "/" + slot)
    try:
        import lodeboard.app

        lodeboard.app.run("/" + slot, prove)
        return True
    except Exception as fault:
        sys.print_exception(fault)
    sys.path.pop(0)
    for name in list(sys.modules):
        if name == "hal_virtual" or name.split(".")[0] == "lodeboard":
            del sys.modules[name]
    return False


def prove() -> None:
    """The package has run well for its first second: no trial, no way back needed."""
    row = read()
    if row and row[2] != GOOD:
        write(row[1], GOOD, row[3])
