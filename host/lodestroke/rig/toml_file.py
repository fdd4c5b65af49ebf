"""A TOML file read into a document with line numbers, and documents read into models.

Serves rigs, schedules and plans alike: each with its own kind of error.
"""

from __future__ import annotations

import difflib
import operator
import sys
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path as FilePath
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, TypeAdapter, ValidationError
from pydantic_core import ErrorDetails

from ..errors import LodestrokeError
from ..units import IN_FILE, KNOWN, Unit, UnitError
from .locate import Path, line_of, lines_of
from .problems import Problem, fail, key_text, value_at

if sys.version_info >= (3, 11):
    import tomllib
else:  # pragma: no cover
    import tomli as tomllib

_BYTES_MAX = 1_000_000
_DEPTH_MAX = 24
ErrorKind = Callable[..., LodestrokeError]


class Table(BaseModel):
    """Base of all models: unknown keys are errors, values do not change after loading."""

    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)


@dataclass
class Document:
    """One parsed file: its data, and the line of every key."""

    path: FilePath
    data: dict[str, Any]
    lines: dict[Path, int]
    kind: ErrorKind
    problems: list[Problem] = field(default_factory=list)

    def raise_if_any(self) -> None:
        """Raise one error with all problems so far."""
        if self.problems:
            raise fail(self.kind, self.path.name, self.problems, self.data, self.lines)


def read_toml(path: str | FilePath, kind: ErrorKind, noun: str) -> Document:
    """Read and parse; every way to fail becomes one error of `kind`."""
    path = FilePath(path)
    try:
        raw = path.read_bytes()
    except (OSError, ValueError) as err:
        reason = getattr(err, "strerror", None) or str(err)
        raise kind(f"cannot read the {noun} file", at=str(path), got=reason,
                   bound="a readable TOML file", try_="check the path") from err
    if len(raw) > _BYTES_MAX:
        raise kind(f"this {noun} file is too large", at=str(path), got=f"{len(raw)} bytes",
                   bound=f"at most {_BYTES_MAX} bytes", try_=f"name a {noun} file")
    try:
        text = raw.decode("utf-8")
    except UnicodeDecodeError as err:
        line = raw[:err.start].count(b"\n") + 1
        raise kind(f"this {noun} file is not UTF-8 text", at=f"{path}, line {line}",
                   got=f"byte 0x{raw[err.start]:02x}", bound="UTF-8",
                   try_="save it as UTF-8, or name another file") from err
    return _parse(path, text.replace("\r\n", "\n"), kind, noun)


def _parse(path: FilePath, text: str, kind: ErrorKind, noun: str) -> Document:
    try:
        data = tomllib.loads(text)
    except RecursionError as err:
        raise kind(f"this {noun} file is nested too deeply", at=str(path), got="endless nesting",
                   bound=f"at most {_DEPTH_MAX} levels", try_="flatten it") from err
    except ValueError as err:   # TOMLDecodeError, and numbers of absurd length
        raise kind(f"this {noun} file is not valid TOML", at=str(path), got=str(err)[:200],
                   bound="TOML 1.0", try_="mend the line named above; text goes in quotes") from err
    if _depth(data) > _DEPTH_MAX:
        raise kind(f"this {noun} file is nested too deeply", at=str(path),
                   got=f"{_depth(data)} levels", bound=f"at most {_DEPTH_MAX} levels",
                   try_="flatten it")
    lines = lines_of(text)
    for key in _huge(data, ()):
        raise kind("a whole number is too long", at=f"{path}, line {line_of(lines, key)}, "
                   f"{key_text(key)}", got="a huge number", bound="64 bits, as TOML 1.0 says",
                   try_="write an ordinary number")
    return Document(path, data, lines, kind)


def _huge(value: Any, path: Path) -> Iterator[Path]:
    """Key paths of whole numbers beyond TOML's 64 bits."""
    if isinstance(value, int) and not -(1 << 63) <= value < (1 << 63):
        yield path
    elif isinstance(value, dict | list):
        for key, inner in value.items() if isinstance(value, dict) else enumerate(value):
            yield from _huge(inner, (*path, key))


def _depth(value: Any) -> int:
    level, depth = [value], 0
    while level:
        depth += 1
        nested: list[Any] = []
        for item in level:
            nested.extend(item.values() if isinstance(item, dict) else
                          item if isinstance(item, list) else ())
        level = nested
    return depth


def read_fields(model: type[BaseModel], document: Document) -> dict[str, Any]:
    """Validate each top-level key on its own, so that one bad section does not hide the others.

    Returns the sections that are good; what is wrong goes to document.problems.
    """
    good: dict[str, Any] = {}
    names = [name for name, info in model.model_fields.items() if not info.exclude]
    for key in document.data:
        if key not in names:
            document.problems.append(Problem((key,), "unknown key", try_=_near(key, names)))
    for name in names:
        info = model.model_fields[name]
        if name not in document.data:
            if info.is_required():
                document.problems.append(Problem((name,), "missing", bound=f'"{name}" is needed',
                                                 try_="see the shipped files for an example"))
            else:
                good[name] = info.get_default(call_default_factory=True, validated_data=good)
            continue
        adapter: TypeAdapter[Any] = TypeAdapter(
            _annotated(info.annotation, info.metadata))
        try:
            good[name] = adapter.validate_python(document.data[name], context=IN_FILE)
        except ValidationError as err:
            document.problems.extend(_problem(name, model, e, document.data) for e in err.errors())
    return good


def _annotated(annotation: Any, metadata: list[Any]) -> Any:
    """A field's type with its metadata, as it was written in the model."""
    parts = (annotation, *metadata)
    return operator.getitem(Annotated, parts) if metadata else annotation


def _problem(name: str, model: type[BaseModel], error: ErrorDetails, data: Any) -> Problem:
    """A pydantic error in our words. Tags of unions are no keys and are left out of the path."""
    path = _real_path((name, *error["loc"]), data, error["type"])
    ctx = error.get("ctx") or {}
    inner = ctx.get("error")
    unit = _unit_at(model, path)
    if isinstance(inner, UnitError):
        return Problem(path, inner.what, inner.bound, inner.try_)
    if error["type"] == "missing":
        return Problem(path, "missing", bound=f'"{path[-1]}" is needed', try_="add it")
    if error["type"] == "extra_forbidden":
        names = _names_beside(model, path)
        return Problem(path, "unknown key", try_=_near(str(path[-1]), names))
    for key, word in (("gt", "above"), ("ge", "at least"), ("lt", "below"), ("le", "at most")):
        if key in ctx and error["type"] in (
            "greater_than", "greater_than_equal", "less_than", "less_than_equal"
        ):
            bound = f"{word} {ctx[key]:g} {unit}".strip()
            return Problem(path, "out of bounds", bound, "choose a value inside the bound")
    if error["type"] in ("literal_error", "enum"):
        given = value_at(data, path)
        near = difflib.get_close_matches(str(given), _words(ctx), n=1, cutoff=0.5)
        return Problem(path, "not one of the choices", str(ctx.get("expected", "")),
                       f'did you mean "{near[0]}"?' if near else "choose one of them")
    text = str(inner) if inner is not None else error["msg"].removeprefix("Input ")
    return Problem(path, text or "not usable", bound=_shape(error["type"]),
                   try_="see the shipped files for an example")


def _shape(kind: str) -> str:
    """What the wrong type should have been."""
    words = {"model_type": "a table", "dict_type": "a table", "list_type": "a list",
             "string_type": "text in quotes", "int_type": "a whole number",
             "int_from_float": "a whole number", "bool_type": "true or false",
             "model_attributes_type": "a table", "int_parsing": "a whole number",
             "bool_parsing": "true or false", "too_short": "more of them",
             "too_long": "fewer of them"}
    return words.get(kind, "")


def _words(ctx: dict[str, Any]) -> list[str]:
    return str(ctx.get("expected", "")).replace(" or ", ", ").replace("'", "").split(", ")


def _real_path(loc: tuple[str | int, ...], data: Any, kind: str) -> Path:
    """Keep those parts of a location that exist in the file, and a last one that is missing."""
    path: Path = ()
    for i, part in enumerate(loc):
        here = value_at(data, path)
        if isinstance(here, dict):
            if part in here or (i == len(loc) - 1 and kind == "missing"):
                path = (*path, part)
        elif isinstance(here, list) and isinstance(part, int):
            path = (*path, part)
    return path


def _model_at(model: type[BaseModel], path: Path) -> list[type[BaseModel]]:
    """Models that a table at this path may be."""
    here = [model]
    for part in path:
        if isinstance(part, int):
            continue
        found: list[type[BaseModel]] = []
        for one in here:
            info = one.model_fields.get(part)
            if info is not None:
                found.extend(_models_in(info.annotation))
        here = found
    return here


def _models_in(annotation: Any) -> list[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    found: list[type[BaseModel]] = []
    for inner in getattr(annotation, "__args__", ()):
        found.extend(_models_in(inner))
    return found


def _names_beside(model: type[BaseModel], path: Path) -> list[str]:
    return sorted({n for one in _model_at(model, path[:-1]) for n in one.model_fields})


def _unit_at(model: type[BaseModel], path: Path) -> str:
    """The SI unit of the field at a path, "" when it has none."""
    keys = [i for i, part in enumerate(path) if isinstance(part, str)]
    if not keys:
        return ""
    for one in _model_at(model, path[:keys[-1]]):
        info = one.model_fields.get(str(path[keys[-1]]))
        unit = unit_of(info.annotation, info.metadata) if info is not None else None
        if unit is not None:
            return unit
    return ""


def unit_of(annotation: Any, metadata: Iterable[Any] = ()) -> str | None:
    """The SI unit of a quantity's field, also of one that may be left out; None for no quantity."""
    for item in (*metadata, *getattr(annotation, "__metadata__", ())):
        if isinstance(item, Unit) and item.si in KNOWN:
            return item.si
    for inner in getattr(annotation, "__args__", ()):
        unit = unit_of(inner)
        if unit is not None:
            return unit
    return None


def _near(key: str, names: list[str]) -> str:
    """Advice for an unknown key."""
    near = difflib.get_close_matches(key.lower(), names, n=1, cutoff=0.55)
    if near:
        return f'did you mean "{near[0]}"?'
    return f"remove it; known here: {', '.join(names)}" if names else "remove it"


__all__ = ["Document", "Problem", "Table", "key_text", "read_fields", "read_toml", "unit_of"]
