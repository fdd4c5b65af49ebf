"""A Port with a scripted board behind it: what it answers to each down frame is the test's to say."""

from __future__ import annotations

import struct
from collections.abc import Callable

from lodeboard.wire import messages
from lodeboard.wire.frames import DownReader, build_up
from lodestroke.errors import PortLost

UP = {name: (code, form, fields) for code, name, form, fields in messages.UP}
DOWN = {code: name for code, name, _, _ in messages.DOWN}
FORMS = {name: form for _, name, form, _ in messages.DOWN}
INFO = {
    "wire_version": messages.WIRE_VERSION, "bundle_id": b"bundle00", "fingerprint": b"rig00000",
    "board_id": b"board000", "boot_nonce": 77, "run_token": 0, "oldest_entry": 1, "state": 1,
    "capabilities": 1,
}


def up_frame(name: str, number: int, **fields: int | bytes) -> bytes:
    """An up frame by its message's name."""
    code, form, names = UP[name]
    return raw_frame(code, number, struct.pack(form, *(fields[key] for key in names)))


def raw_frame(code: int, number: int, body: bytes) -> bytes:
    buf = bytearray(64)
    buf[4 : 4 + len(body)] = body
    return bytes(buf[: build_up(buf, code, number, len(body))])


def reply(number: int, down: int, code: int, result: int = 0, detail: int = 0) -> bytes:
    return up_frame("reply", number, down_frame=down, command=code, result=result, detail=detail)


def cycle(number: int, entry: int) -> bytes:
    fields = dict.fromkeys(UP["cycle"][2], 0)
    return up_frame("cycle", number, **{**fields, "entry": entry, "cycle": entry})


def sample(number: int, tick: int) -> bytes:
    return up_frame("sample", number, **{**dict.fromkeys(messages.SAMPLE_FIELDS, 0), "tick": tick})


Answer = Callable[[str, int, bytes], bytes]


class ScriptPort:
    """Answers every down frame by `answer(name, number, body)`; time passes only by waiting."""

    name = "scripted"

    def __init__(self, answer: Answer) -> None:
        self.answer = answer
        self.reader = DownReader()
        self.heard: list[tuple[str, int, bytes]] = []
        self.coming = bytearray()
        self.time_s = 0.0
        self.gone = False

    def read(self, timeout_s: float) -> bytes:
        if self.gone:
            raise PortLost("the port went away while in use", at=self.name)
        if not self.coming:
            self.time_s += timeout_s
        data = bytes(self.coming)
        self.coming.clear()
        return data

    def write(self, data: bytes) -> None:
        for octet in data:
            n = self.reader.feed(octet)
            if n:
                content = bytes(self.reader.buf[:n])
                frame = (DOWN[content[0]], content[1], content[2:])
                self.heard.append(frame)
                self.coming += self.answer(*frame)

    def now_s(self) -> float:
        return self.time_s

    def close(self) -> None:
        self.gone = True

    def beats(self) -> list[tuple[int, int]]:
        """(frame, saved_entry) of each beat heard."""
        return [struct.unpack(FORMS["beat"], body)
                for name, _, body in self.heard if name == "beat"]


def polite(name: str, number: int, body: bytes, behind_hello: bytes = b"", **info) -> bytes:
    """What a board that agrees to everything says."""
    if name == "beat":
        return b""
    if name == "hello":
        return up_frame("hello", 0, **{**INFO, **info}) + behind_hello
    code = next(code for code, known in DOWN.items() if known == name)
    return reply(1, number, code)
