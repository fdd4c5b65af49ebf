"""The firmware on the real interpreter: no allocation, room in RAM, the same numbers."""

from __future__ import annotations

import subprocess
import sys

import pytest
from interpreter import FIRMWARE, HERE, run_script


@pytest.mark.slow
def test_a_hundred_thousand_ticks_allocate_nothing_while_the_heap_is_locked():
    said = run_script("heap_locked_loop.py", timeout=240)
    word, cycles, sent, trip = said.split()
    assert word == "ok"
    assert int(cycles) > 100
    assert int(sent) > 100_000
    assert int(trip) > 0


def test_the_firmware_leaves_room_in_a_small_boards_heap():
    # 64-bit objects are about 1.6 times a board's (measured on a 32-bit build of the interpreter),
    # so what fits here in 192 KiB fits there with room to spare
    words = run_script("imports_and_ram.py").split()
    assert int(words[1]) > 16 * 1024


def test_both_interpreters_give_the_same_numbers():
    real = run_script("vectors.py")
    here = subprocess.run([sys.executable, str(HERE / "vectors.py"), str(FIRMWARE)],
                          capture_output=True, text=True, check=True).stdout
    assert real == here


def test_every_way_out_of_a_run_allocates_nothing_while_the_heap_is_locked():
    """Each kind of trip, a stop, a pause, the program's end; two coils, nested loops, step limits."""
    assert run_script("locked_trips.py", heap="1M") == "ok 12\n"


def test_each_subject_of_the_cost_figures_runs_with_the_heap_locked():
    for subject in ("unit", "core", "whole", "bare"):
        assert run_script("tick_count.py", subject, "130", heap="1M") == ""


def test_a_fault_under_the_locked_heap_leaves_the_coil_off_and_the_trip_kept():
    said = run_script("locked_fault.py")
    assert "Traceback" in said                     # as text for the host to carry to the user
    assert said.endswith("AttributeError\n1000\n")
