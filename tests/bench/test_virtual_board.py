"""The virtual board as a board: the real mpremote and pyserial on it, resets, power cuts, hangs."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
import serial
from boards import RIG, alive, hello, mpremote, until

from lodeboard.wire.frames import build_down
from lodeboard.wire.messages import WIRE_VERSION
from lodestroke.flash import board_image
from lodestroke.link.decode import pack_down
from lodestroke.rig import load_rig
from lodestroke.virtual import VirtualBoard, available, start_board

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")

_COUNTING_MAIN = b"""
try:
    n = int(open('starts').read())
except OSError:
    n = 0
open('starts', 'w').write(str(n + 1))
print('main ran')
"""


@pytest.fixture
def bare() -> Iterator[VirtualBoard]:
    """A new board: interpreter, no firmware, nothing wired."""
    with start_board(RIG, still=True) as board:
        yield board


@pytest.fixture
def counting() -> Iterator[VirtualBoard]:
    """A board whose main.py counts how often it ran."""
    with start_board(RIG, still=True, files={"main.py": _COUNTING_MAIN}) as board:
        until(lambda: starts(board) == 1)
        yield board


@pytest.fixture
def installed() -> Iterator[VirtualBoard]:
    """A board that runs the firmware, nothing wired."""
    with start_board(RIG, still=True, files=board_image(load_rig(RIG))) as board:
        yield board


def starts(board: VirtualBoard) -> int:
    path = board.flash / "starts"
    return int(path.read_text() or 0) if path.exists() else 0


def test_mpremote_runs_code_on_a_new_board(bare: VirtualBoard) -> None:
    out = mpremote(bare.port, "exec", "import sys; print(sys.implementation.name, 6 * 7)")
    assert out == "micropython 42\n"


def test_mpremote_copies_files_there_and_back(bare: VirtualBoard, tmp_path: Path) -> None:
    sent = tmp_path / "sent.bin"
    sent.write_bytes(bytes(range(256)) * 9)
    mpremote(bare.port, "fs", "cp", str(sent), ":kept.bin")
    assert (bare.flash / "kept.bin").read_bytes() == sent.read_bytes()
    mpremote(bare.port, "fs", "cp", ":kept.bin", str(tmp_path / "back.bin"))
    assert (tmp_path / "back.bin").read_bytes() == sent.read_bytes()


def test_the_board_sees_its_own_flash_as_root_and_not_the_computers(bare: VirtualBoard) -> None:
    out = mpremote(bare.port, "exec", "import os; print(os.getcwd(), 'etc' in os.listdir('/'))")
    assert out == "/ False\n"


def test_the_board_has_a_boards_heap(bare: VirtualBoard) -> None:
    """192 KiB on 32 bits, objects twice as large on 64."""
    out = mpremote(bare.port, "exec", "import gc; print(gc.mem_free() + gc.mem_alloc())")
    assert 180_000 < int(out) / 2 < 197_000


def test_soft_reset_out_of_the_raw_repl_skips_main(counting: VirtualBoard) -> None:
    """As docs.micropython.org says for ports with a raw REPL (reference/reset_boot)."""
    mpremote(counting.port, "exec", "print(1)")
    mpremote(counting.port, "exec", "print(2)")
    assert starts(counting) == 1


def test_soft_reset_at_the_friendly_prompt_runs_main(counting: VirtualBoard) -> None:
    with serial.Serial(counting.port, 115200, timeout=5) as port:
        port.write(b"\r\x02\x04")
        assert port.read_until(b"main ran\r\n").endswith(b"soft reboot\r\nmain ran\r\n")
    assert starts(counting) == 2


def test_text_of_the_board_ends_its_lines_like_a_boards(bare: VirtualBoard) -> None:
    with serial.Serial(bare.port, 115200, timeout=5) as port:
        port.write(b"\r\x03print('a');print('b')\r")
        assert port.read_until(b"b\r\n").endswith(b"\r\na\r\nb\r\n")


def test_ctrl_c_interrupts_code_and_leaves_the_prompt(bare: VirtualBoard) -> None:
    with serial.Serial(bare.port, 115200, timeout=5) as port:
        port.write(b"\r\x03import time; time.sleep(60)\r")
        port.read_until(b"sleep(60)\r\n")
        time.sleep(0.1)
        port.write(b"\x03")
        assert b"KeyboardInterrupt" in port.read_until(b"KeyboardInterrupt: \r\n")
        port.write(b"print(1 + 1)\r")
        assert port.read_until(b"\r\n2\r\n").endswith(b"\r\n2\r\n")
    assert bare.status()["launches"] == 1


def test_power_cut_restarts_main_without_a_word_and_keeps_flash(counting: VirtualBoard) -> None:
    with serial.Serial(counting.port, 115200, timeout=5) as port:
        port.write(b"\r")
        port.read_until(b">>> ")
        counting.power_cut()
        said = port.read_until(b"main ran\r\n")
    assert b"reboot" not in said
    assert starts(counting) == 2


def test_power_cut_changes_the_boot_nonce(installed: VirtualBoard) -> None:
    before = hello(installed.port)
    installed.power_cut()
    after = hello(installed.port)
    assert before.boot_nonce != after.boot_nonce
    assert before.bundle_id == after.bundle_id


def test_plain_mpremote_works_while_the_firmware_runs(installed: VirtualBoard) -> None:
    assert hello(installed.port).state == "safe"
    assert mpremote(installed.port, "exec", "print('in')") == "in\n"
    installed.reset()
    assert hello(installed.port).state == "safe"
    assert "main.py" in mpremote(installed.port, "fs", "ls")


def test_ctrl_c_in_the_boot_window_gets_the_prompt(installed: VirtualBoard) -> None:
    """The window of a virtual board is short: ask again until one lands in it."""
    with serial.Serial(installed.port, 115200, timeout=1) as port:
        for _ in range(5):
            installed.reset()
            port.read_until(b"gets the prompt\r\n")
            port.write(b"\x03")
            if port.read_until(b">>> ").endswith(b">>> "):
                break
        else:
            pytest.fail("no prompt")
    assert not installed.status()["owned"]


def test_bytes_sent_to_a_hung_board_arrive_late_and_in_order(bare: VirtualBoard) -> None:
    with serial.Serial(bare.port, 115200, timeout=5, write_timeout=5) as port:
        port.write(b"\r\x03")
        port.read_until(b">>> ")
        bare.hang(300)
        text = "".join(chr(97 + i % 26) for i in range(1500))
        port.write(f"print('{text}')\r".encode())
        assert port.read_until(f"\r\n{text}\r\n".encode()).endswith(f"\r\n{text}\r\n".encode())


def test_a_host_that_stops_reading_does_not_stop_the_tick(installed: VirtualBoard) -> None:
    code, body = pack_down("status", {})
    with serial.Serial(installed.port, 115200, write_timeout=5) as port:
        fields = {"wire_version": WIRE_VERSION, "saved_entry": 0}
        hello_code, hello_body = pack_down("hello", fields)
        port.write(b"~" + build_down(hello_code, 0, hello_body))
        for number in range(1, 800):        # each is answered with 60 octets that nobody reads
            port.write(build_down(code, number & 0xFF, body))
        before = installed.status()["ticks"]
        until(lambda: installed.status()["ticks"] > before + 500)


def test_the_link_name_points_to_the_port_and_goes_with_the_board(tmp_path: Path) -> None:
    link = tmp_path / "pump"
    with start_board(RIG, link=link, still=True) as board:
        assert os.readlink(link) == board.status()["port"]
        assert mpremote(str(link), "exec", "print(3)") == "3\n"
    assert not link.is_symlink()


def test_nothing_is_left_when_the_board_is_stopped(bare: VirtualBoard) -> None:
    interpreter = bare.status()["pid"]
    bare.stop()
    assert not alive(interpreter)
    assert not alive(bare.pid)
    assert not bare.flash.exists()


def test_the_board_ends_when_its_parent_is_killed(tmp_path: Path) -> None:
    code = (
        "import sys, time; from lodestroke.virtual import start_board\n"
        f"board = start_board({str(RIG)!r}, still=True)\n"
        "print(board.pid, board.status()['pid'], board.flash, flush=True); time.sleep(60)"
    )
    command = [sys.executable, "-c", code]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as parent:
        assert parent.stdout is not None
        relay, interpreter, flash = parent.stdout.readline().split()
        parent.send_signal(signal.SIGKILL)
    until(lambda: not alive(int(relay)) and not alive(int(interpreter)))
    until(lambda: not Path(flash).exists())


def test_the_interpreter_ends_when_the_relay_is_killed(bare: VirtualBoard) -> None:
    interpreter = bare.status()["pid"]
    os.kill(bare.pid, signal.SIGKILL)
    until(lambda: not alive(interpreter))
