"""What a board does when it is told to, and what it refuses, in every place that it runs."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from lodeboard import trips as codes
from lodestroke.errors import Refused
from lodestroke.rig import limits_blob
from lodestroke.runner import session

if TYPE_CHECKING:
    from conftest import Bench


def of_kind(bench: Bench, kind: str) -> list[dict[str, int]]:
    return [entry.fields for entry in bench.entries if entry.kind == kind]


def test_enable_is_off_until_go_and_after_the_end(bench: Bench) -> None:
    assert not bench.enabled()
    bench.arm()
    bench.run_on(0.1)
    assert not bench.enabled()
    bench.client.command("go", run_token=1, cycles_before=0, last_cycle=2)
    bench.run_on(0.3)
    assert bench.enabled()
    bench.until("safe")
    assert not bench.enabled()
    assert [fields["cycle"] for fields in of_kind(bench, "cycle")] == [1, 2]
    assert [fields["why"] for fields in of_kind(bench, "end")] == [0]


def test_enable_drops_after_host_silence(bench: Bench) -> None:
    bench.go()
    bench.run_on(0.5)
    assert bench.enabled()
    bench.silence(bench.rig.limits.host_silence + 0.5)
    assert not bench.enabled()
    beat = bench.until("tripped", 2.0)
    assert beat.fields["trip_code"] == codes.HOST_SILENT
    (trip,) = of_kind(bench, "trip")
    assert trip["stop_category"] == 1
    assert trip["value"] >= trip["limit"] == round(bench.rig.limits.host_silence * 1000)


def test_a_host_that_only_listens_keeps_the_board_running(bench: Bench) -> None:
    bench.go()
    bench.run_on(bench.rig.limits.host_silence + 1.0)
    assert bench.beat().state == "running"


def test_stop_ramps_down_then_drops_enable_and_journals_the_end(bench: Bench) -> None:
    bench.go()
    bench.run_on(1.2)
    bench.client.command("stop")
    bench.until("safe", 2.0)
    assert not bench.enabled()
    assert [fields["why"] for fields in of_kind(bench, "end")] == [1]
    assert not of_kind(bench, "trip")


def test_pause_takes_the_current_away_and_resume_goes_on_in_the_same_cycle(bench: Bench) -> None:
    bench.go()
    bench.run_on(1.2)
    bench.client.command("pause")
    bench.run_on(0.5)
    held = bench.beat()
    bench.run_on(1.0)
    assert bench.beat().fields["cycle"] == held.fields["cycle"]
    bench.client.command("resume")
    bench.run_on(1.5)
    cycles = [fields["cycle"] for fields in of_kind(bench, "cycle")]
    assert cycles == list(range(1, len(cycles) + 1))
    assert cycles[-1] > held.fields["cycle"]


@pytest.mark.parametrize("command", ["pause", "resume", "disarm"])
def test_commands_that_do_not_fit_the_state_are_refused_with_a_reason(
    bench: Bench, command: str
) -> None:
    with pytest.raises(Refused, match="wrong state") as refusal:
        bench.client.command(command)
    assert refusal.value.try_
    with pytest.raises(Refused, match="wrong state"):
        bench.client.command("go", run_token=1, cycles_before=0, last_cycle=0)
    with pytest.raises(Refused, match="wrong state"):
        bench.client.command("clear", code=codes.COIL_HOT, trip_serial=1)


def test_limits_and_program_cannot_change_under_a_running_board(bench: Bench) -> None:
    bench.go()
    blob, crc32 = limits_blob(bench.rig)
    with pytest.raises(Refused, match="wrong state"):
        bench.client.send_limits(blob, crc32, bench.rig.fingerprint)
    assert bench.beat().state == "running"


def test_arm_is_refused_without_limits_with_another_rig_or_another_program(bench: Bench) -> None:
    program = bench.program()
    arm = {"fingerprint": bench.rig.fingerprint, "program_crc32": program.crc32}
    if bench.place != "board":  # a real board may hold limits from before
        with pytest.raises(Refused, match="limits missing"):
            bench.client.command("arm", **arm)
    session.load(bench.client, bench.rig, program, 0)
    with pytest.raises(Refused, match="fingerprint differs"):
        bench.client.command("arm", **{**arm, "fingerprint": b"another!"})
    with pytest.raises(Refused, match="program missing"):
        bench.client.command("arm", **{**arm, "program_crc32": program.crc32 ^ 1})
    bench.client.command("arm", **arm)
    bench.client.command("disarm")


def test_damaged_limits_are_not_sealed_and_do_not_arm(bench: Bench) -> None:
    blob, crc32 = limits_blob(bench.rig)
    program = bench.program()
    session.load(bench.client, bench.rig, program, 0)
    bench.client.command("put", blob=0, offset=8, count=1, data=bytes([blob[8] ^ 4]).ljust(32))
    seal = {"blob": 0, "length": len(blob), "crc32": crc32, "fingerprint": bench.rig.fingerprint}
    with pytest.raises(Refused, match="checksum differs"):
        bench.client.command("seal", **seal)
    with pytest.raises(Refused, match="limits missing"):
        bench.client.command("arm", fingerprint=bench.rig.fingerprint, program_crc32=program.crc32)


def test_a_put_beyond_the_store_is_refused(bench: Bench) -> None:
    with pytest.raises(Refused, match="out of bounds"):
        bench.client.command("put", blob=1, offset=65535, count=32, data=b"\0" * 32)


def test_the_stop_input_ramps_down_and_the_cutout_drops_enable_at_once(bench: Bench) -> None:
    bench.go()
    bench.run_on(0.3)
    bench.press(stop=True)
    beat = bench.until("tripped", 2.0)
    assert beat.fields["trip_code"] == codes.STOP_INPUT
    bench.press(cutout_open=True)
    bench.rest()
    session.load(bench.client, bench.rig, bench.program(), 0)
    with pytest.raises(Refused, match="cut-out open") as refusal:
        bench.arm()
    assert "cool" in refusal.value.try_
    bench.press()
    bench.go()
    bench.run_on(0.3)
    bench.press(cutout_open=True)
    beat = bench.until("tripped", 2.0)
    assert beat.fields["trip_code"] == codes.CUTOUT_OPEN
    assert [fields["stop_category"] for fields in of_kind(bench, "trip")] == [1, 0]


def test_a_trip_latches_through_power_loss_and_is_cleared_only_by_its_name(bench: Bench) -> None:
    bench.go()
    bench.press(cutout_open=True)
    before = bench.until("tripped", 2.0)
    bench.press()
    assert bench.reboot().state == "tripped"
    beat = bench.beat()
    assert beat.fields["trip_code"] == codes.CUTOUT_OPEN
    assert beat.fields["trip_serial"] == before.fields["trip_serial"]
    serial = beat.fields["trip_serial"]
    with pytest.raises(Refused, match="wrong state"):
        bench.arm()
    with pytest.raises(Refused, match="another trip"):
        bench.client.command("clear", code=codes.COIL_HOT, trip_serial=serial)
    with pytest.raises(Refused, match="another trip"):
        bench.client.command("clear", code=codes.CUTOUT_OPEN, trip_serial=serial + 1)
    bench.client.command("clear", code=codes.CUTOUT_OPEN, trip_serial=serial)
    bench.run_on(0.1)
    assert bench.beat().state == "safe"
    assert bench.reboot().state == "safe"
