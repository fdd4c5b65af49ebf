"""Installing with the real mpremote on the real interpreter, and what a bad package does."""

from __future__ import annotations

import json
from collections.abc import Iterator

import pytest
from boards import RIG, ROOT, hello, mpremote, until

from lodestroke.errors import FlashError, PortBusy, PortError
from lodestroke.flash import board_image, build_bundle, bundle_id_for, install
from lodestroke.flash.bundle import GOOD, SLOTS, pointer_line, sha256
from lodestroke.flash.install import _verify, board_sums
from lodestroke.flash.mpremote import Mpremote
from lodestroke.link import open_port
from lodestroke.rig import load_rig
from lodestroke.virtual import VirtualBoard, available, start_board

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")
A, B = SLOTS


@pytest.fixture
def bare() -> Iterator[VirtualBoard]:
    with start_board(RIG, still=True) as board:
        yield board


def other_package(image: dict[str, bytes], name: str, data: bytes) -> dict[str, bytes]:
    """The installed slot once more in slot B with one file changed, its manifest right for that."""
    files = {k.removeprefix(A + "/"): v for k, v in image.items() if k.startswith(A + "/")}
    files[name] = data
    manifest = json.loads(files["manifest.json"])
    manifest["files"][name] = sha256(data)
    files["manifest.json"] = json.dumps(manifest).encode()
    files["bundle.txt"] = b"11" * 8
    return {**image, **{f"{B}/{k}": v for k, v in files.items()}}


def test_install_on_a_new_board_ends_with_its_bundle_answering(bare: VirtualBoard) -> None:
    rig = load_rig(RIG)
    said: list[str] = []
    result = install(rig, bare.port, said.append)
    info = hello(bare.port)
    assert info.bundle_id == bundle_id_for(rig)
    assert result["bundle"] == info.bundle_id.hex()
    assert result["slot"] == A
    assert len(said) >= 5


def test_a_second_install_spares_the_slot_that_proved_good(bare: VirtualBoard) -> None:
    rig = load_rig(RIG)
    install(rig, bare.port, lambda _: None)
    until(lambda: f"{A} {GOOD} " in newest_pointer(bare))
    (bare.flash / A / "keep.txt").write_text("untouched")
    result = install(rig, bare.port, lambda _: None)
    assert (result["slot"], result["previous"]) == (B, A)
    assert (bare.flash / A / "keep.txt").exists()
    assert hello(bare.port).bundle_id == bundle_id_for(rig)


def newest_pointer(board: VirtualBoard) -> str:
    copies = [board.flash / "pointer.0", board.flash / "pointer.1"]
    lines = [path.read_text() for path in copies if path.exists()]
    return max(lines, key=lambda line: int((line.split() or ["0"])[0]), default="")


def test_stale_files_go_when_a_slot_is_filled_again(bare: VirtualBoard) -> None:
    rig = load_rig(RIG)
    stale = bare.flash / A / "lodeboard" / "old_module.py"
    stale.parent.mkdir(parents=True)
    stale.write_text("stale = 1")
    install(rig, bare.port, lambda _: None)
    assert not stale.exists()


def test_a_damaged_file_on_the_board_is_named(bare: VirtualBoard) -> None:
    rig = load_rig(RIG)
    install(rig, bare.port, lambda _: None)
    tick = bare.flash / A / "lodeboard" / "tick.py"
    tick.write_bytes(tick.read_bytes()[:-1])
    tool = Mpremote(bare.port)
    with pytest.raises(FlashError) as caught:
        _verify(tool, build_bundle(rig), A, bare.port)
    assert "lodeboard/tick.py" in caught.value.got


def test_sums_are_those_of_sha256(bare: VirtualBoard) -> None:
    """Checked against the example of FIPS 180-4: SHA-256 of "abc"."""
    (bare.flash / "x" / "y").mkdir(parents=True)
    (bare.flash / "x" / "y" / "abc").write_bytes(b"abc")
    assert board_sums(Mpremote(bare.port), "x") == {
        "y/abc": "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    }


def test_a_slot_damaged_later_falls_back_to_the_one_before() -> None:
    image = board_image(load_rig(RIG))
    image = other_package(image, "lodeboard/extra.py", b"x = 1\n")
    image["pointer.0"] = pointer_line(1, B, GOOD, A, 50)
    image[f"{B}/lodeboard/loop.py"] += b"\n"
    with start_board(RIG, still=True, files=image) as board:
        assert hello(board.port).bundle_id == bundle_id_for(load_rig(RIG))
        until(lambda: f" {A} {GOOD} - " in newest_pointer(board))


@pytest.mark.parametrize(
    "broken",
    [b"this is no Python\n", b"raise MemoryError\n", b"def run(folder, prove):\n    1 / 0\n"],
    ids=["syntax", "at import", "at run"],
)
def test_a_broken_package_falls_back_to_the_one_before(broken: bytes) -> None:
    rig = load_rig(RIG)
    image = other_package(board_image(rig), "lodeboard/app.py", broken)
    image["pointer.0"] = pointer_line(1, B, 2, A, 50)
    with start_board(RIG, still=True, files=image) as board:
        assert hello(board.port).bundle_id == bundle_id_for(rig)
        board.power_cut()
        assert hello(board.port).bundle_id == bundle_id_for(rig)
        assert f" {A} {GOOD} - " in newest_pointer(board)


def test_a_package_that_never_proves_good_falls_back_after_its_trials() -> None:
    """It hangs the board at each start; a power cut ends each."""
    rig = load_rig(RIG)
    hangs = b"import time\ndef run(folder, prove):\n    time.sleep(60)\n"
    image = other_package(board_image(rig), "lodeboard/app.py", hangs)
    image["pointer.0"] = pointer_line(1, B, 2, A, 50)
    with start_board(RIG, still=True, files=image) as board:
        for left in (1, 0):
            until(lambda left=left: f" {B} {left} {A} " in newest_pointer(board))
            board.power_cut()
        assert hello(board.port).bundle_id == bundle_id_for(rig)


def test_a_package_that_runs_a_second_is_proved_good() -> None:
    image = other_package(board_image(load_rig(RIG)), "lodeboard/extra.py", b"x = 1\n")
    image["pointer.0"] = pointer_line(1, B, 2, A, 50)
    with start_board(RIG, still=True, files=image) as board:
        assert hello(board.port).bundle_id == b"\x11" * 8
        until(lambda: f" {B} {GOOD} {A} " in newest_pointer(board))


@pytest.mark.parametrize("torn", [0, 5, 20])
def test_a_torn_pointer_copy_leaves_the_other_in_force(torn: int) -> None:
    image = board_image(load_rig(RIG))
    image["pointer.1"] = pointer_line(2, B, 2, A, 50)[:torn]
    with start_board(RIG, still=True, files=image) as board:
        assert hello(board.port).bundle_id == bundle_id_for(load_rig(RIG))


def test_an_empty_board_with_boot_files_gets_to_the_prompt() -> None:
    boot = build_bundle(load_rig(RIG)).boot
    with start_board(RIG, still=True, files=boot) as board:
        assert mpremote(board.port, "exec", "print(5)") == "5\n"


def test_another_boards_rig_is_refused_before_anything_is_written(bare: VirtualBoard) -> None:
    rig = load_rig(ROOT / "hil_configs" / "bench-rp2040.toml")
    with pytest.raises(FlashError, match="not the board that the rig names"):
        install(rig, bare.port, lambda _: None)
    assert not list(bare.flash.iterdir())


def test_a_missing_port_is_said_so() -> None:
    with pytest.raises(PortError, match="cannot be opened"):
        install(load_rig(RIG), "/dev/tty-that-is-not-there", lambda _: None)


def test_a_port_in_use_is_said_so(bare: VirtualBoard) -> None:
    held = open_port(bare.port)
    try:
        with pytest.raises(PortBusy):
            install(load_rig(RIG), bare.port, lambda _: None)
    finally:
        held.close()


def test_a_silent_board_ends_in_a_worded_error_within_the_limit(bare: VirtualBoard) -> None:
    """Code that takes Ctrl-C as data and never reads it: mpremote alone would wait for ever."""
    deaf = b"import micropython, time\nmicropython.kbd_intr(-1)\ntime.sleep(60)\n"
    with start_board(RIG, still=True, files={"main.py": deaf}) as board:
        until(lambda: board.status()["launches"] == 1)
        tool = Mpremote(board.port)
        with pytest.raises(FlashError, match="look around") as caught:
            tool._once("look around", ["exec", "print(1)"], limit_s=1.5)
    assert "1.5 s" in caught.value.bound
    assert caught.value.try_


def test_an_error_on_the_board_shows_what_mpremote_printed(bare: VirtualBoard) -> None:
    with pytest.raises(FlashError) as caught:
        Mpremote(bare.port)._once("divide", ["exec", "1 / 0"], limit_s=10)
    assert "ZeroDivisionError" in caught.value.got


def test_the_bundle_id_changes_with_any_file_and_not_with_time() -> None:
    rig = load_rig(RIG)
    first, second = build_bundle(rig), build_bundle(rig)
    assert first.bundle_id == second.bundle_id
    other = build_bundle(load_rig(ROOT / "hil_configs" / "bench-rp2040.toml"))
    assert other.bundle_id != first.bundle_id
    assert "lodeboard/hal_rp2.py" in other.files
    assert "lodeboard/hal_rp2.py" not in first.files
    assert all(sha256(first.files[n]) == s for n, s in first.manifest["files"].items())


@pytest.mark.parametrize("step", range(1, 6))
def test_power_lost_at_any_step_leaves_a_board_that_answers(step: int) -> None:
    """Old firmware or new, never none; the next install then succeeds."""
    rig = load_rig(RIG)
    image = other_package(board_image(rig), "lodeboard/extra.py", b"x = 1\n")
    image["pointer.0"] = pointer_line(1, B, GOOD, "-", 50)
    said: list[str] = []
    with start_board(RIG, still=True, files=image) as board:
        until(lambda: bool(board.status()["owned"]))

        def cut(text: str) -> None:
            said.append(text)
            if len(said) == step + 1:
                board.power_cut()

        try:
            install(rig, board.port, cut)
        except FlashError as failed:
            assert failed.try_
            assert hello(board.port).bundle_id == b"\x11" * 8
            install(rig, board.port, lambda _: None)
        assert len(said) > step
        assert hello(board.port).bundle_id == bundle_id_for(rig)
