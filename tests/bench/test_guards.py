"""What a virtual board does when its processor hangs, its power goes, a hand stops it."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from boards import RIG, ROOT, hello, mpremote, until

from lodestroke.flash import board_image
from lodestroke.link import Beat, Client, open_port
from lodestroke.rig import limits_blob, load_rig
from lodestroke.schedule import compile_program, load_schedule
from lodestroke.virtual import VirtualBoard, available, start_board

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")


@pytest.fixture
def board() -> Iterator[VirtualBoard]:
    """A board with firmware, plant and all."""
    with start_board(RIG, files=board_image(load_rig(RIG))) as started:
        yield started


def running(board: VirtualBoard) -> Client:
    """A client of a board that runs the gentle schedule with its driver enabled."""
    rig = load_rig(RIG)
    gentle = ROOT / "hil_configs" / "schedules" / "gentle.toml"
    program = compile_program(load_schedule(gentle), rig)
    client = Client(open_port(board.port))
    client.hello()
    client.send_limits(*limits_blob(rig), rig.fingerprint)
    client.send_program(program.records, program.crc32, rig.fingerprint)
    client.command("arm", fingerprint=rig.fingerprint, program_crc32=program.crc32)
    client.command("go", run_token=1, cycles_before=0, last_cycle=0)
    until(lambda: client.poll(0.01) is not None and board.status()["enabled"])
    return client


def test_the_deadman_drops_the_driver_while_the_processor_hangs(board: VirtualBoard) -> None:
    client = running(board)
    board.hang(400)
    until(lambda: board.status()["deadman_drops"] == 1)
    assert not board.status()["enabled"]
    beats: list[Beat] = []
    until(lambda: wait_for_beat(client, beats) and beats[-1].state == "tripped")
    client.close()
    assert not board.status()["enabled"]


def wait_for_beat(client: Client, beats: list[Beat]) -> bool:
    event = client.poll(0.1)
    if isinstance(event, Beat):
        beats.append(event)
    return bool(beats)


@pytest.mark.slow
def test_the_watchdog_resets_a_board_that_hangs_for_good(board: VirtualBoard) -> None:
    client = running(board)
    client.close()
    board.hang(60_000)
    until(lambda: board.status()["launches"] == 2)
    assert not board.status()["enabled"]
    info = hello(board.port)
    assert info.state == "tripped"


def test_power_away_in_a_run_ends_safe_with_a_new_nonce(board: VirtualBoard) -> None:
    client = running(board)
    before = client.info
    assert before is not None
    board.power_cut()
    after = client.hello()
    client.close()
    assert after.boot_nonce != before.boot_nonce
    assert after.state in ("safe", "tripped")
    assert not board.status()["enabled"]


def test_a_pressed_stop_input_ends_the_run(board: VirtualBoard) -> None:
    client = running(board)
    board.inputs(stop=True)
    beats: list[Beat] = []
    until(lambda: wait_for_beat(client, beats) and beats[-1].state == "tripped")
    client.close()
    assert not board.status()["enabled"]


def test_ctrl_c_on_the_link_stops_the_run_and_gives_the_prompt(board: VirtualBoard) -> None:
    client = running(board)
    client.port.write(b"\x03")
    until(lambda: not board.status()["owned"])
    client.close()
    assert not board.status()["enabled"]


def test_the_prompt_stays_after_a_run_for_as_long_as_it_is_needed(board: VirtualBoard) -> None:
    """The watchdog, once started, must not cut off whoever works at the prompt."""
    client = running(board)
    client.command("stop")
    client.close()
    until(lambda: not board.status()["enabled"])
    assert mpremote(board.port, "exec", "import time; time.sleep(3.5); print('still here')")
    assert board.status()["launches"] <= 2


def test_the_maintenance_command_gives_the_port_to_mpremote(board: VirtualBoard) -> None:
    client = Client(open_port(board.port))
    client.hello()
    client.command("maintain")
    client.close()
    until(lambda: not board.status()["owned"])
    assert mpremote(board.port, "resume", "exec", "print('prompt')") == "prompt\n"
