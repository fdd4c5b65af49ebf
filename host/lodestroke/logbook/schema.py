"""Tables of the logbook, in SQLAlchemy Core: the same on SQLite and on PostgreSQL."""

from __future__ import annotations

import sqlalchemy as sa

SCHEMA = 1
metadata = sa.MetaData()

meta = sa.Table(
    "meta",
    metadata,
    sa.Column("key", sa.String(40), primary_key=True),
    sa.Column("value", sa.Text, nullable=False),
)

runs = sa.Table(
    "runs",
    metadata,
    sa.Column("id", sa.String(16), primary_key=True),
    sa.Column("serial", sa.Integer, nullable=False, unique=True),
    sa.Column("kind", sa.String(16), nullable=False),  # dry-run, run, endure
    sa.Column("title", sa.Text, nullable=False, default=""),
    sa.Column("place", sa.Text, nullable=False, default=""),  # twin, virtual, or the port
    sa.Column("started", sa.String(32), nullable=False),  # UTC, ISO 8601
    sa.Column("ended", sa.String(32)),
    sa.Column("end", sa.Text),  # why; empty while it goes on
    sa.Column("resumes", sa.Integer, nullable=False, default=0),
    sa.Column("meta", sa.JSON, nullable=False),  # names, hashes, versions, seed
    sa.Column("sources", sa.JSON, nullable=False),  # rig, schedule, plan as text
    sa.Column("resume", sa.JSON, nullable=False),  # what --resume needs
    sa.Column("summary", sa.JSON),
    sa.Column("chain", sa.String(64), nullable=False),  # of the last chunk; see chunks.py
    sa.Column("chunks", sa.Integer, nullable=False, default=0),
    sa.Column("counts", sa.JSON, nullable=False),  # rows written, by table
    sa.Column("made_crc32", sa.BigInteger, nullable=False),  # of what never changes; journal.py
    sa.Column("closed_crc32", sa.BigInteger),  # of how it ended
    sa.Column("lease_owner", sa.Text),
    sa.Column("lease_until", sa.Float, nullable=False, default=0.0),
)


def _of_run(
    *more: sa.Column,  # type: ignore[type-arg]
    unique: tuple[str, ...] = (),
    summed: bool = True,
) -> list[sa.schema.SchemaItem]:
    """Columns that every table of a run's rows shares."""
    items: list[sa.schema.SchemaItem] = [
        sa.Column("id", sa.Integer, primary_key=True),
        sa.Column("run", sa.String(16), sa.ForeignKey("runs.id"), nullable=False, index=True),
        *more,
    ]
    if summed:
        items.append(
            sa.Column("crc32", sa.BigInteger, nullable=False)
        )  # of the row; see journal.py
    if unique:
        items.append(sa.UniqueConstraint("run", *unique))
    return items


cycles = sa.Table(
    "cycles",
    metadata,
    *_of_run(
        sa.Column("cycle", sa.Integer, nullable=False),
        sa.Column("segment", sa.Integer, nullable=False),  # which GO of the run: ticks start anew
        sa.Column("nonce", sa.BigInteger, nullable=False),
        sa.Column("entry", sa.BigInteger, nullable=False),
        sa.Column("tick", sa.BigInteger, nullable=False),
        sa.Column("duration_ticks", sa.BigInteger, nullable=False),
        sa.Column("chamber_max_pa", sa.Integer, nullable=False),
        sa.Column("chamber_min_pa", sa.Integer, nullable=False),
        sa.Column("chamber_mean_pa", sa.Integer, nullable=False),
        sa.Column("outlet_max_pa", sa.Integer, nullable=False),
        sa.Column("outlet_mean_pa", sa.Integer, nullable=False),
        sa.Column("outlet_reverse_max_pa", sa.Integer, nullable=False),
        sa.Column("inlet_reverse_max_pa", sa.Integer, nullable=False),
        sa.Column("held_ticks", sa.Integer, nullable=False),
        sa.Column("coil_peak_ma", sa.Integer, nullable=False),
        sa.Column("winding_cc", sa.Integer, nullable=False),
        sa.Column("step", sa.Integer, nullable=False),
        unique=("cycle",),
    ),
)

trips = sa.Table(
    "trips",
    metadata,
    *_of_run(
        sa.Column("segment", sa.Integer, nullable=False),
        sa.Column("nonce", sa.BigInteger, nullable=False),
        sa.Column("entry", sa.BigInteger, nullable=False),
        sa.Column("trip_serial", sa.Integer, nullable=False),
        sa.Column("code", sa.Integer, nullable=False),
        sa.Column("name", sa.String(40), nullable=False),
        sa.Column("channel", sa.Integer, nullable=False),
        sa.Column("stop_category", sa.Integer, nullable=False),
        sa.Column("tick", sa.BigInteger, nullable=False),
        sa.Column("value", sa.BigInteger, nullable=False),
        sa.Column("limit", sa.BigInteger, nullable=False),
        sa.Column("step", sa.Integer, nullable=False),
        sa.Column("at", sa.String(32), nullable=False),
        sa.Column("recorder", sa.LargeBinary),  # compressed sample rows
        sa.Column("recorder_crc32", sa.BigInteger),
        unique=("nonce", "entry"),
    ),
)

marks = sa.Table(
    "marks",
    metadata,
    *_of_run(
        sa.Column("segment", sa.Integer, nullable=False),
        sa.Column("nonce", sa.BigInteger, nullable=False),
        sa.Column("entry", sa.BigInteger, nullable=False),
        sa.Column("tick", sa.BigInteger, nullable=False),
        sa.Column("mark", sa.Integer, nullable=False),
        sa.Column("step", sa.Integer, nullable=False),
        unique=("nonce", "entry"),
    ),
)

checkups = sa.Table(
    "checkups",
    metadata,
    *_of_run(
        sa.Column("after_cycle", sa.Integer, nullable=False),
        sa.Column("item", sa.String(40), nullable=False),
        sa.Column("at", sa.String(32), nullable=False),
        sa.Column("result", sa.JSON, nullable=False),
        unique=("after_cycle", "item"),
    ),
)

gaps = sa.Table(
    "gaps",
    metadata,
    *_of_run(
        sa.Column("after_cycle", sa.Integer, nullable=False),
        sa.Column("first_cycle", sa.Integer),  # lost cycles that were numbered
        sa.Column("last_cycle", sa.Integer),
        sa.Column("unnumbered_most", sa.Integer, nullable=False, default=0),
        sa.Column("why", sa.Text, nullable=False),
        sa.Column("at", sa.String(32), nullable=False),
    ),
)

notes = sa.Table(
    "notes",
    metadata,
    *_of_run(
        sa.Column("at", sa.String(32), nullable=False),
        sa.Column("kind", sa.String(16), nullable=False),  # note, or problem: verify tells it
        sa.Column("text", sa.Text, nullable=False),
    ),
)

chunks = sa.Table(
    "chunks",
    metadata,
    *_of_run(
        sa.Column("number", sa.Integer, nullable=False),
        sa.Column("segment", sa.Integer, nullable=False),  # which GO of the run
        sa.Column("first_tick", sa.BigInteger, nullable=False),
        sa.Column("last_tick", sa.BigInteger, nullable=False),
        sa.Column("rows", sa.Integer, nullable=False),
        sa.Column("row_bytes", sa.Integer, nullable=False),
        sa.Column("codec", sa.String(16), nullable=False),
        sa.Column("data", sa.LargeBinary, nullable=False),
        sa.Column("sha256", sa.String(64), nullable=False),  # of the rows before compression
        sa.Column("chain", sa.String(64), nullable=False),  # of the chain so far and this chunk
        unique=("number",),
        summed=False,
    ),
)

requests = sa.Table(
    "requests",
    metadata,
    *_of_run(
        sa.Column("what", sa.String(16), nullable=False),
        sa.Column("at", sa.String(32), nullable=False),
        summed=False,
    ),
)

# what a run's account counts and verify counts again
COUNTED = {table.name: table for table in (cycles, trips, marks, checkups, gaps, notes)}
