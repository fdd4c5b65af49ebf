"""Cases on file: what is written is read back; what does not fit is told in five parts."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings

from lodestroke.errors import ScheduleError
from lodestroke.prove import Case, read_case, write_case
from lodestroke.prove.search import cases
from lodestroke.rig import Rig

FAULT = "[[faults]]\nstart_tick = 1\nlength_ticks = 1\n"


def test_every_case_that_the_search_draws_comes_back_from_its_file(
    sim: Rig, tmp_path: Path
) -> None:
    path = tmp_path / "case.toml"

    @settings(max_examples=60, deadline=None, database=None)
    @given(case=cases(sim, 5000))
    def round_trip(case: Case) -> None:
        assert read_case(write_case(path, case, "why\nand how"), sim) == case

    round_trip()


@pytest.mark.parametrize(
    ("text", "key", "part"),
    [
        ("", "plant_seed", "needed"),
        ("plant_seed = -1", "plant_seed", "0"),
        ("plant_sed = 1", "plant_sed", "plant_seed"),
        (FAULT + 'kind = "broken"', "kind", "stuck"),
        (FAULT + 'kind = "stuck"', "channel", "chamber"),
        (FAULT + 'kind = "stuck"\nchannel = "coil_b"', "channel", "coil_a"),
        (FAULT + 'kind = "stop_input"\nchannel = "outlet"', "channel", "no channel"),
        (FAULT + 'kind = "open"\nchannel = "outlet"\nmagnitude = 3', "magnitude", "no magnitude"),
        (FAULT + 'kind = "supply_sag"\nmagnitude = 101', "magnitude", "100"),
        ('[[faults]]\nkind = "open"\nstart_tick = 0\nlength_ticks = 1', "start_tick", "1"),
        ("plant_seed = ", "", "TOML"),
    ],
)
def test_a_case_that_does_not_fit_is_refused_with_its_key_and_bound(
    text: str, key: str, part: str, sim: Rig, tmp_path: Path
) -> None:
    path = tmp_path / "case.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(ScheduleError) as refusal:
        read_case(path, sim)
    told = refusal.value.text()
    assert "case.toml" in told
    assert key in told
    assert part in told
    assert refusal.value.try_


def test_a_file_that_cannot_be_written_tells_the_case_itself(tmp_path: Path) -> None:
    with pytest.raises(ScheduleError) as refusal:
        write_case(tmp_path, Case(plant_seed=77))
    assert "plant_seed = 77" in refusal.value.try_
