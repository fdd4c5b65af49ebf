"""Columns of exported files: name with unit, type, and how a logbook row gives the value."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa

from .. import trips
from ..rows import SAMPLE

Row = dict[str, Any]
_INT, _FLOAT, _TEXT = pa.int64(), pa.float64(), pa.string()


@dataclass(frozen=True)
class Column:
    """One column of a file. value: of a row and the run's tick period in ms (None: unknown)."""

    name: str
    kind: pa.DataType
    value: Callable[[Row, float | None], Any]


def _as_is(*names: str, kind: pa.DataType = _INT) -> list[Column]:
    return [Column(name, kind, _getter(name)) for name in names]


def _getter(name: str) -> Callable[[Row, float | None], Any]:
    return lambda row, _: row[name]


def _ms(name: str, ticks: str) -> Column:
    """Ticks as milliseconds; empty when the run's rig cannot be read any more."""
    return Column(
        name, _FLOAT, lambda row, tick_ms: None if tick_ms is None else row[ticks] * tick_ms
    )


_DEGC = Column("winding_degc", _FLOAT, lambda row, _: row["winding_cc"] / 100)
_AT = Column("at_utc", _TEXT, lambda row, _: row["at"])

TABLES: dict[str, list[Column]] = {
    "cycles": [
        *_as_is("cycle", "segment", "step", "tick", "duration_ticks"),
        _ms("duration_ms", "duration_ticks"),
        *_as_is("chamber_max_pa", "chamber_min_pa", "chamber_mean_pa"),
        *_as_is("outlet_max_pa", "outlet_mean_pa"),
        *_as_is("outlet_reverse_max_pa", "inlet_reverse_max_pa", "held_ticks", "coil_peak_ma"),
        _DEGC,
    ],
    "trips": [
        *_as_is("trip_serial", "code"),
        *_as_is("name", kind=_TEXT),
        *_as_is("channel"),
        Column("channel_name", _TEXT, lambda row, _: trips.channel_name(row["channel"])),
        *_as_is("stop_category", "segment", "step", "tick"),
        _ms("time_ms", "tick"),
        *_as_is("value", "limit"),
        Column("value_unit", _TEXT, lambda row, _: _unit(row["code"])),
        _AT,
    ],
    "checkups": [
        *_as_is("after_cycle"),
        *_as_is("item", "quantity", kind=_TEXT),
        *_as_is("value", kind=_FLOAT),
        *_as_is("text", kind=_TEXT),
        _AT,
    ],
    "marks": [*_as_is("mark", "segment", "step", "tick"), _ms("time_ms", "tick")],
    "gaps": [
        *_as_is("after_cycle", "first_cycle", "last_cycle", "unnumbered_most"),
        *_as_is("why", kind=_TEXT),
        _AT,
    ],
}


def _unit(code: int) -> str:
    words = trips.WORDS.get(code)
    return words.unit if words else ""


def table(name: str, rows: Iterable[Row], tick_ms: float | None) -> pa.Table:
    """Logbook rows as a table of a file."""
    listed = list(rows)
    columns = TABLES[name]
    arrays = [pa.array([one.value(row, tick_ms) for row in listed], one.kind) for one in columns]
    return pa.Table.from_arrays(arrays, schema=schema(name))


def schema(name: str) -> pa.Schema:
    """Names and types of a file's columns."""
    return pa.schema([(column.name, column.kind) for column in TABLES[name]])


def quantities(rows: Iterable[Row]) -> Iterable[Row]:
    """Check-up rows, one a quantity: numbers as value, anything else as text."""
    for row in rows:
        for quantity, value in row["result"].items():
            number = isinstance(value, int | float) and not isinstance(value, bool)
            yield {
                **row,
                "quantity": quantity,
                "value": float(value) if number else None,
                "text": None if number or value is None else str(value),
            }


def sample_schema(label: str) -> pa.Schema:
    """Columns of sample rows; label names what they belong to, segment or trip_serial."""
    names = [name for name in SAMPLE.names or () if name != "winding_cc"]
    at = names.index("tick") + 1
    kinds = [(label, _INT), *((name, _INT) for name in names[:at]), ("time_ms", _FLOAT)]
    return pa.schema([*kinds, *((name, _INT) for name in names[at:]), ("winding_degc", _FLOAT)])


def sample_table(label: str, number: int, rows: np.ndarray, tick_ms: float | None) -> pa.Table:
    """Sample rows (dtype SAMPLE) as a table of a file."""
    given: dict[str, Any] = {label: np.full(len(rows), number, dtype=np.int64)}
    given["winding_degc"] = rows["winding_cc"] / 100
    given["time_ms"] = [None] * len(rows) if tick_ms is None else rows["tick"] * tick_ms
    wanted = sample_schema(label)
    arrays = [
        pa.array(given[field.name] if field.name in given else rows[field.name].astype(np.int64))
        if field.name != "time_ms" or tick_ms is not None
        else pa.nulls(len(rows), _FLOAT)
        for field in wanted
    ]
    return pa.Table.from_arrays(arrays, schema=wanted)
