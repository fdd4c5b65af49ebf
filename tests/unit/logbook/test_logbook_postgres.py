"""The same logbook on PostgreSQL: on a server that LODESTROKE_TEST_POSTGRES names by URL.

The URL's database must be empty or made by this test; its tables are dropped first.
"""

from __future__ import annotations

import csv
import os
from collections.abc import Iterator
from pathlib import Path

import made
import pytest
import sqlalchemy as sa

from lodestroke.errors import LogbookError
from lodestroke.logbook import Logbook, Writer, new_run, open_logbook, reader, schema
from lodestroke.logbook.export import export
from lodestroke.logbook.verify import verify

URL = os.environ.get("LODESTROKE_TEST_POSTGRES", "")
pytestmark = pytest.mark.skipif(not URL, reason="LODESTROKE_TEST_POSTGRES names no server")


@pytest.fixture
def server() -> Iterator[Logbook]:
    """An empty logbook on the server."""
    engine = sa.create_engine(URL)
    schema.metadata.drop_all(engine)
    engine.dispose()
    with open_logbook(URL) as logbook:
        yield logbook


def test_run_on_postgresql_reads_back_verifies_and_exports(server: Logbook, tmp_path: Path) -> None:
    run = made.finished_run(server)
    assert verify(server) == []
    assert reader.samples(server, run).tobytes() == made.samples(20_000) + made.samples(500)
    export(server, run, "csv", tmp_path)
    with (tmp_path / "cycles.csv").open(newline="") as file:
        assert [int(row["cycle"]) for row in csv.DictReader(file)] == list(range(1, 61))


def test_resend_and_lease_on_postgresql_are_as_on_sqlite(server: Logbook) -> None:
    run = new_run(server, "endure")
    with Writer(server, run) as writer, open_logbook(URL) as other:
        for _ in range(3):
            writer.cycle(made.cycle(1))
            assert writer.flush() == 1
        with pytest.raises(LogbookError, match="another process is writing"):
            Writer(other, run)
        assert new_run(other, "run") == "r0002"
    assert len(reader.cycles(server, run)) == 1


def test_damage_on_postgresql_is_found(server: Logbook) -> None:
    made.finished_run(server)
    with server.write() as connection:
        connection.exec_driver_sql("update cycles set outlet_max_pa = 0 where cycle = 12")
        connection.exec_driver_sql("delete from chunks where number = 2")
    problems = verify(server)
    assert any("cycles altered since they were written: 12" in text for text in problems)
    assert any("chunk 2 of the samples is missing" in text for text in problems)


def test_server_that_does_not_answer_is_told_without_its_password() -> None:
    url = sa.make_url(URL).set(host="127.0.0.1", port=9, query={}, password="s3cret")
    with pytest.raises(LogbookError, match="cannot be reached") as caught:
        open_logbook(url.render_as_string(hide_password=False))
    assert "s3cret" not in caught.value.text()
