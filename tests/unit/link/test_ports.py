"""Real ports: a pseudo-terminal stands for the wire, and each way to fail has its own words."""

from __future__ import annotations

import contextlib
import os
import threading
import tty
from collections.abc import Iterator
from types import SimpleNamespace

import pytest

from lodestroke.errors import Exit, LinkTimeout, PortBusy, PortError, PortLost
from lodestroke.link import Client, find_port, open_port, serial_port


@pytest.fixture
def pty_pair() -> Iterator[tuple[int, str]]:
    """(the board's end, the name of the host's end)."""
    board, host = os.openpty()
    tty.setraw(board)
    tty.setraw(host)
    name = os.ttyname(host)
    os.close(host)
    yield board, name
    with contextlib.suppress(OSError):         # a test may have pulled the plug
        os.close(board)


def test_bytes_go_both_ways_unchanged(pty_pair):
    board, name = pty_pair
    port = open_port(name)
    every = bytes(range(256))
    port.write(every)
    assert os.read(board, 512) == every
    os.write(board, every)
    got = b""
    while len(got) < 256:
        got += port.read(1.0)
    assert got == every
    assert port.read(0.01) == b""
    port.close()
    port.close()


def test_time_of_a_port_moves_on(pty_pair):
    port = open_port(pty_pair[1])
    before = port.now_s()
    port.read(0.02)
    assert port.now_s() > before
    port.close()


def test_port_that_somebody_else_holds_is_busy(pty_pair):
    first = open_port(pty_pair[1])
    with pytest.raises(PortBusy) as busy:
        open_port(pty_pair[1])
    assert busy.value.at == pty_pair[1]
    assert busy.value.exit_code == Exit.NO_PORT
    first.close()
    open_port(pty_pair[1]).close()             # and free again


def test_missing_port_lists_what_there_is(tmp_path, monkeypatch):
    seen = [SimpleNamespace(device="/dev/ttyACM7", serial_number="E66")]
    monkeypatch.setattr(serial_port, "ports_seen", lambda: seen)
    with pytest.raises(PortError) as missing:
        open_port(str(tmp_path / "none"))
    assert "/dev/ttyACM7" in missing.value.bound
    assert "--port" in missing.value.try_
    assert missing.value.exit_code == Exit.NO_PORT


def test_file_that_is_no_port_is_refused_in_words(tmp_path):
    path = tmp_path / "notes.txt"
    path.write_text("no port")
    for name in (str(path), "/dev/null", str(tmp_path)):
        with pytest.raises(PortError) as refused:
            open_port(name)
        assert refused.value.at == name
    assert path.read_text() == "no port"


def test_port_that_goes_away_is_lost_and_the_words_say_that_the_board_is_safe(pty_pair):
    board, name = pty_pair
    port = open_port(name)
    os.close(board)
    with pytest.raises(PortLost) as lost:
        port.read(0.5)
    assert "safe by itself" in lost.value.try_
    with pytest.raises(PortLost):
        port.write(b"x")
    port.close()


@pytest.mark.parametrize("said", [b"", b"login: ", bytes(range(256))])
def test_port_that_is_silent_or_talks_nonsense_is_no_board(pty_pair, said, monkeypatch):
    board, name = pty_pair
    monkeypatch.setattr("lodestroke.link.client.RESEND_S", 0.02)
    client = Client(open_port(name))
    answered = threading.Event()

    def other() -> None:
        os.read(board, 64)
        os.write(board, said)
        answered.set()

    thread = threading.Thread(target=other)
    thread.start()
    with pytest.raises(LinkTimeout) as timeout:
        client.hello()
    thread.join()
    assert answered.is_set()
    assert timeout.value.at == name
    assert timeout.value.got == "nothing" if not said else "text instead" in timeout.value.got
    client.close()


def boards(*serials: str | None) -> list[SimpleNamespace]:
    return [SimpleNamespace(device=f"/dev/ttyACM{k}", serial_number=serial)
            for k, serial in enumerate(serials)]


def test_board_is_found_by_its_usb_serial_number(monkeypatch):
    monkeypatch.setattr(serial_port, "ports_seen", lambda: boards("E1", "E2", None))
    assert find_port("E2") == "/dev/ttyACM1"


@pytest.mark.parametrize(("wanted", "serials", "what", "named"), [
    ("E9", ("E1", "E2"), "not connected", ("E1", "E2")),
    ("E1", ("E1", "E1", "E2"), "two ports", ("ttyACM0", "ttyACM1")),
    (None, ("E1",), "names no USB serial", ("E1",)),
    ("E1", (), "not connected", ("no USB serial port",)),
])
def test_board_that_is_not_found_for_certain_is_an_error_that_lists_what_is_seen(
        monkeypatch, wanted, serials, what, named):
    monkeypatch.setattr(serial_port, "ports_seen", lambda: boards(*serials))
    with pytest.raises(PortError) as error:
        find_port(wanted)
    assert what in error.value.what
    for name in named:
        assert name in error.value.got
    assert "ttyACM2" not in error.value.got
