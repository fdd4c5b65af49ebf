"""Every trip of the board has words, and they are fit for a terminal."""

from __future__ import annotations

import pytest

from lodeboard import limits
from lodeboard import trips as codes
from lodestroke import trips

RECORD = {
    "code": codes.OUTLET_REVERSE,
    "channel": limits.OUTLET,
    "stop_category": 0,
    "tick": 1810,
    "value": 2410,
    "limit": 2353,
    "step": 2,
    "trip_serial": 4,
}


@pytest.mark.parametrize("code", sorted(codes.TABLE))
def test_each_trip_has_what_causes_and_a_next_step(code: int) -> None:
    words = trips.WORDS[code]
    for text in (words.what, words.causes, words.next):
        assert len(text) > 10
        assert text[0].islower()
        assert not text.endswith(".")
    assert "\n" not in words.what


def test_no_words_are_left_for_trips_that_are_gone() -> None:
    assert set(trips.WORDS) == set(codes.TABLE)


def test_names_are_those_of_the_boards_table_and_unlike() -> None:
    names = [trips.name(code) for code in codes.TABLE]
    assert names == [row[0] for row in codes.TABLE.values()]
    assert len(set(names)) == len(names)


def test_stop_categories_are_those_of_iec_60204_1() -> None:
    """Category 0: power off at once. Category 1: stop first, then power off (IEC 60204-1, 9.2.2)."""
    assert {row[1] for row in codes.TABLE.values()} == {0, 1}


def test_a_sentence_carries_value_limit_unit_and_tick() -> None:
    text = trips.sentence(RECORD)
    assert all(part in text for part in ("2410 Pa", "2353 Pa", "tick 1810", "category 0"))


def test_a_trip_of_newer_firmware_is_told_by_its_number() -> None:
    strange = {**RECORD, "code": 200}
    assert "200" in trips.sentence(strange)
    assert trips.as_json(strange)["name"] == "code_200"


def test_json_of_a_trip_names_its_channel_and_keeps_the_boards_numbers() -> None:
    answer = trips.as_json(RECORD)
    assert answer["channel_name"] == "outlet"
    assert {key: answer[key] for key in RECORD} == RECORD
    assert trips.as_json({**RECORD, "channel": 255})["channel_name"] == ""
