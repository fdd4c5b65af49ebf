"""Everything that is wrong with a file, told at once: line, key, value, bound, advice."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

from ..errors import LodestrokeError
from .locate import Path, line_of


@dataclass(frozen=True)
class Problem:
    """One thing wrong at one key. `got` is worked out from the file when left empty."""

    path: Path
    what: str
    bound: str = ""
    try_: str = ""
    got: str = ""


def key_text(path: Path) -> str:
    """("coils", 0, "turns") as people write it: coils[1].turns (counting from 1)."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            text += ("." if text else "") + part
    return text


def value_at(document: Any, path: Path) -> Any:
    """The value in the parsed file, or None when there is none."""
    for part in path:
        if isinstance(document, dict) or (isinstance(document, list) and isinstance(part, int)):
            try:
                document = document[part]  # type: ignore[index]
            except (KeyError, IndexError):
                return None
        else:
            return None
    return document


def shown(value: Any) -> str:
    """A value of the file on one short line."""
    if value is None:
        return "(missing)"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table" if value else "an empty table"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    if isinstance(value, int) and value.bit_length() > 128:
        return "a huge number"
    text = f'"{value}"' if isinstance(value, str) else str(value)
    if not text.isprintable():
        text = text.encode("unicode_escape", "replace").decode("ascii")
    return text if len(text) <= 60 else text[:57] + "..."


def fail(
    kind: Callable[..., LodestrokeError],
    name: str,
    problems: Iterable[Problem],
    document: Any,
    lines: dict[Path, int],
) -> LodestrokeError:
    """One error that tells all problems; `what` lists them when there is more than one."""
    rows = sorted(set(problems), key=lambda p: (line_of(lines, p.path), key_text(p.path)))
    told = [_told(p, document, lines) for p in rows]
    if len(rows) == 1:
        at, got, one = f"{name}, {told[0][0]}", told[0][1], rows[0]
        return kind(one.what, at=at, got=got, bound=one.bound, try_=one.try_)
    text = "\n".join(
        f"  {where}: {p.what}; got {got}"
        + (f"; bound {p.bound}" if p.bound else "") + (f"; try: {p.try_}" if p.try_ else "")
        for (where, got), p in zip(told, rows, strict=True)
    )
    first = rows[0]
    return kind(f"{name} has {len(rows)} problems\n{text}", at=f"{name}, {told[0][0]}",
                got=told[0][1], bound=first.bound, try_=first.try_)


def _told(problem: Problem, document: Any, lines: dict[Path, int]) -> tuple[str, str]:
    """Where, and what stands there."""
    where = f"line {line_of(lines, problem.path)}, {key_text(problem.path) or 'the file'}"
    return where, problem.got or shown(value_at(document, problem.path))
