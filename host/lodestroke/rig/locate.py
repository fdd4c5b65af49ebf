"""Line numbers of keys in a TOML text. tomllib keeps none, and an error without a line is no help.

The text must already have passed tomllib: this reader only follows its structure and is lenient.
"""

from __future__ import annotations

import re

Path = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SKIP = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_BLANK = re.compile(r"[ \t]*")
_PLAIN_VALUE = re.compile(r"[^,\]}\n#]*")
_ESCAPES = {"n": "\n", "t": "\t", "r": "\r", "b": "\b", "f": "\f", '"': '"', "\\": "\\"}


def lines_of(text: str) -> dict[Path, int]:
    """Key path -> line (from 1), for every table, key and list item, e.g. ("steps", 0, "wave")."""
    return _Reader(text).read()


def line_of(lines: dict[Path, int], path: Path) -> int:
    """The line of a path, or of the nearest table around it; 1 when nothing fits."""
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return 1


class _Reader:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.lines: dict[Path, int] = {}
        self.counts: dict[Path, int] = {}     # items so far in each array of tables

    def read(self) -> dict[Path, int]:
        table: Path = ()
        while True:
            self._skip(_SKIP)
            if self.at >= len(self.text):
                return self.lines
            if self.text[self.at] == "[":
                table = self._header()
            else:
                self._assignment(table)

    def _line(self) -> int:
        return self.text.count("\n", 0, self.at) + 1

    def _skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        assert match is not None
        self.at = match.end()
        return match.group()

    def _note(self, path: Path, line: int) -> None:
        for length in range(1, len(path) + 1):
            self.lines.setdefault(path[:length], line)

    def _header(self) -> Path:
        """[table] or [[array of tables]]; arrays on the way mean their last item."""
        line = self._line()
        array = self.text.startswith("[[", self.at)
        self.at += 2 if array else 1
        keys = self._key()
        self.at = self.text.index("]", self.at) + (2 if array else 1)
        path: Path = ()
        for i, key in enumerate(keys):
            path = (*path, key)
            last = i == len(keys) - 1
            if array and last:
                self.counts[path] = self.counts.get(path, 0) + 1
            if path in self.counts:
                self.lines.setdefault(path, line)
                path = (*path, self.counts[path] - 1)
        self._note(path, line)
        return path

    def _key(self) -> list[str]:
        """A bare, quoted or dotted key; leaves `at` behind it."""
        keys = []
        while True:
            self._skip(_BLANK)
            if self.text[self.at] in "\"'":
                keys.append(self._string())
            else:
                keys.append(self._skip(_BARE))
            self._skip(_BLANK)
            if self.text[self.at] != ".":
                return keys
            self.at += 1

    def _string(self) -> str:
        """A string of any of the four kinds."""
        quote = self.text[self.at]
        long = self.text.startswith(quote * 3, self.at)
        self.at += 3 if long else 1
        end = quote * 3 if long else quote
        out = []
        while not self.text.startswith(end, self.at):
            char = self.text[self.at]
            if char == "\\" and quote == '"':
                self.at += 1
                char = _ESCAPES.get(self.text[self.at], self.text[self.at])
            out.append(char)
            self.at += 1
        self.at += len(end)
        while long and self.text.startswith(quote, self.at):   # up to two quotes may end the text
            self.at += 1
        return "".join(out)

    def _assignment(self, table: Path) -> None:
        line = self._line()
        path = (*table, *self._key())
        self.at += 1                           # the equals sign
        self._note(path, line)
        self._value(path)

    def _value(self, path: Path) -> None:
        self._skip(_BLANK)
        start = self.text[self.at]
        if start in "\"'":
            self._string()
        elif start == "[":
            self._list(path)
        elif start == "{":
            self._inline(path)
        else:
            self._skip(_PLAIN_VALUE)

    def _list(self, path: Path) -> None:
        self.at += 1
        index = 0
        while True:
            self._skip(_SKIP)
            char = self.text[self.at]
            if char in ",]":
                self.at += 1
                if char == "]":
                    return
                continue
            item = (*path, index)
            self.lines.setdefault(item, self._line())
            self._value(item)
            index += 1

    def _inline(self, path: Path) -> None:
        self.at += 1
        while True:
            self._skip(_SKIP)
            char = self.text[self.at]
            if char in ",}":
                self.at += 1
                if char == "}":
                    return
                continue
            self._assignment(path)
