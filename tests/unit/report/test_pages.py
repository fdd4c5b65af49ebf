"""Pages: complete, self-contained, units on every axis; the live page keeps strangers out."""

from __future__ import annotations

import json
import re
import struct
import threading
import urllib.error
import urllib.request
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path

import pytest

from lodeboard.wire import messages
from lodestroke import cautions
from lodestroke.logbook import Logbook, Writer, new_run, open_logbook, stop_requested
from lodestroke.report import dry_run_page, write_report
from lodestroke.rig import load_rig
from lodestroke.runner import dry_run
from lodestroke.schedule import load_schedule
from lodestroke.watch import Server

CONFIGS = Path(__file__).resolve().parents[3] / "hil_configs"
RIG = CONFIGS / "bench-sim.toml"
UNIT_AXES = ("time / s", "gauge pressure / Pa", "outlet less chamber / Pa", "current / mA",
             "temperature / °C")


def cycle(n: int) -> dict[str, int]:
    return {"entry": n, "cycle": n, "tick": 250 * n, "duration_ticks": 250, "chamber_max_pa": 1500,
            "chamber_min_pa": -700, "chamber_mean_pa": 20, "outlet_max_pa": 700, "outlet_mean_pa": 500 + n,
            "outlet_reverse_max_pa": 1200, "inlet_reverse_max_pa": 1500, "held_ticks": 0,
            "coil_peak_ma": 905, "winding_cc": 2500 + n, "step": 0}


def rows(n: int) -> bytes:
    return b"".join(struct.pack(messages.SAMPLE_FORMAT, k, 900, 0, 900, 9000, 100 + k % 7, 400 + k % 5,
                                0, 2500, 255, 3) for k in range(n))


@pytest.fixture
def logbook(tmp_path: Path) -> Iterator[Logbook]:
    book = open_logbook(tmp_path / "log.db")
    yield book
    book.close()


def a_run(logbook: Logbook, cycles: int = 0, trip: bool = False, gap: bool = False,
          close: bool = True) -> str:
    rig = load_rig(RIG)
    run = new_run(
        logbook, "endure", title="Bench <test> & more", place="/dev/none",
        meta={"files": {"rig": RIG.name}, "sha256": {"rig": "ab" * 32},
              "fingerprint": rig.fingerprint.hex(), "bundle": "cd" * 8, "board": "b", "seed": 3,
              "versions": {"lodestroke": "x"}, "target_cycles": 40},
        sources={"rig": RIG.read_text(encoding="utf-8")})
    with Writer(logbook, run) as writer:
        writer.begin(1, 0, 1)
        for n in range(1, cycles + 1):
            writer.cycle(cycle(n))
        writer.samples(rows(400))
        if trip:
            writer.trip({"entry": cycles + 1, "trip_serial": 1, "code": 1, "channel": 1,
                         "stop_category": 0, "tick": 200, "value": 2400, "limit": 2353, "step": 0})
            writer.flush()
            writer.recorder(cycles + 1, rows(300))
        if gap:
            writer.gap(cycles, "the board restarted", unnumbered_most=4)
        writer.checkup(0, "zero_flow", {"zero_flow_ul_per_min": 1.5, "u_zero_flow_ul_per_min": 0.4,
                                        "ok": True, "why": ""})
        writer.note("a note <b>with marks</b>")
        writer.flush()
        if close:
            writer.finish("tripped: outlet_reverse" if trip else "target reached",
                          {"cycles_done": cycles})
    return run


class Page(HTMLParser):
    """Headings, resource addresses and text of a page."""

    def __init__(self, path: Path) -> None:
        super().__init__()
        self.heads: list[str] = []
        self.loads: list[str] = []
        self.inside = ""
        self.source = path.read_text(encoding="utf-8")
        self.feed(self.source)
        self.close()

    def handle_starttag(self, tag: str, attrs) -> None:
        self.inside = tag
        self.loads += [value or "" for name, value in attrs if name in ("src", "href")]

    def handle_data(self, data: str) -> None:
        if self.inside in ("h1", "h2") and data.strip():
            self.heads.append(data.strip())

    @property
    def plain(self) -> str:
        """The page less the plotting library, whose own text is no part of ours."""
        return re.sub(r"<script>/\*\*.*?</script>", "", self.source, count=1, flags=re.S)


def check_self_contained(page: Page) -> None:
    assert page.loads == []
    assert "Cautions" in page.heads
    for head, body in cautions.CAUTIONS:
        assert head in page.source
        assert body.split(".")[0][:30] in page.source


def axis_titles(source: str) -> set[str]:
    titles = re.findall(r'"[xy]axis2?":\{[^{}]*?(?:\{[^{}]*\}[^{}]*?)*?"title":\{"text":"([^"]+)"', source)
    return {json.loads(f'"{title}"') for title in titles}


@pytest.mark.parametrize(
    ("cycles", "trip", "gap"), [(0, False, False), (40, False, True), (12, True, False)])
def test_report_holds_every_section_of_any_run(logbook, tmp_path, cycles, trip, gap):
    page = Page(write_report(logbook, a_run(logbook, cycles, trip, gap), tmp_path / "r.html"))
    check_self_contained(page)
    wanted = {"Result", "What was run, and with what", "Traces", "Check-ups", "Gaps, marks and notes"}
    wanted |= {"Cycles"} if cycles else set()
    wanted |= {"Trips"} if trip else set()
    assert wanted <= set(page.heads)
    assert set(UNIT_AXES) <= axis_titles(page.source)
    assert all(" / " in title for title in axis_titles(page.source))
    assert "Bench &lt;test&gt; &amp; more" in page.source
    assert "<b>with marks" not in page.plain
    assert ("Flight recorder" in page.plain) == trip
    assert ("the board restarted" in page.plain) == gap


def test_dry_run_page_shows_the_trip_and_the_margin(tmp_path):
    shown = dry_run(load_rig(RIG), load_schedule(CONFIGS / "schedules" / "overdrive.toml"), seed=2)
    page = Page(dry_run_page(shown.result, shown.samples, shown.cycles, load_rig(RIG), tmp_path / "d.html"))
    check_self_contained(page)
    assert str(shown.result["min_margin_pa"]) in page.source
    assert "reverse pressure across the outlet valve reached its limit" in page.source
    assert all(" / " in title for title in axis_titles(page.source))


def test_a_page_that_cannot_be_written_is_one_clear_error(logbook, tmp_path):
    from lodestroke.report.page import PageError

    blocked = tmp_path / "file"
    blocked.write_text("x")
    with pytest.raises(PageError) as failed:
        write_report(logbook, a_run(logbook), blocked / "r.html")
    assert failed.value.try_


@pytest.fixture
def server(logbook) -> Iterator[Server]:
    serving = Server(logbook, None, 0)
    thread = threading.Thread(target=serving.serve_forever, daemon=True)
    thread.start()
    yield serving
    serving.shutdown()
    serving.server_close()
    thread.join(5)


def ask(server: Server, path: str, method: str = "GET", **headers: str) -> tuple[int, bytes]:
    request = urllib.request.Request(server.url + path.lstrip("/"), method=method, headers=headers)
    try:
        with urllib.request.urlopen(request, timeout=10) as answer:
            return answer.status, answer.read()
    except urllib.error.HTTPError as refused:
        with refused:
            return refused.code, refused.read()


def test_live_page_is_for_this_machine_only(server):
    assert server.server_address[0] == "127.0.0.1"
    status, body = ask(server, "/")
    assert status == 200
    assert server.token.encode() in body
    assert ask(server, "/", Host="pump.example:80")[0] == 403
    assert ask(server, "/nothing")[0] == 404
    assert ask(server, "/plotly.min.js")[0] == 200


def test_live_page_says_when_there_is_no_run(server):
    state = json.loads(ask(server, "/state.json")[1])
    assert state["run"] is None
    assert ask(server, "/stop", "POST", **{"X-Token": server.token})[0] == 409


def test_stop_needs_the_token_and_is_recorded(server, logbook):
    run = a_run(logbook, 12, close=False)
    assert ask(server, "/stop", "POST")[0] == 403
    assert ask(server, "/stop", "POST", **{"X-Token": "x" * 32})[0] == 403
    assert ask(server, "/stop", "POST", **{"X-Token": server.token, "Host": "evil.example"})[0] == 403
    assert not stop_requested(logbook, run)
    assert ask(server, "/stop", "POST", **{"X-Token": server.token})[0] == 200
    assert stop_requested(logbook, run)


def test_live_state_tells_a_lost_host_from_an_end(server, logbook):
    a_run(logbook, 12, close=False)
    state = json.loads(ask(server, "/state.json")[1])
    assert "no host" in state["condition"]
    assert state["done_cycles"] == 12
    assert len(state["cycles"]["flow_ul_per_min"]) == 12
    a_run(logbook, 40)
    assert json.loads(ask(server, "/state.json")[1])["condition"] == "ended: target reached"
