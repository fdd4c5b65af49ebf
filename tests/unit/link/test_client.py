"""The client against scripted boards: whom it talks to, what it hands on, what it says of faults."""

from __future__ import annotations

import struct
from functools import partial

import pytest
from scripted import INFO, UP, ScriptPort, cycle, polite, raw_frame, reply, sample, up_frame

from lodeboard.wire import messages
from lodestroke.errors import LinkTimeout, PortLost, Refused, WireMismatch
from lodestroke.link import Beat, Client, Entry, Recorded, Restarted, Sample, Text


def take(client: Client, seconds: float = 0.3) -> list:
    """Every event of the next while."""
    events = []
    end_s = client.port.now_s() + seconds
    while client.port.now_s() < end_s:
        event = client.poll(0.1)
        if event is not None:
            events.append(event)
    return events


def numbers(events: list) -> list[int]:
    return [event.entry for event in events if isinstance(event, Entry)]


def greeted(**info) -> tuple[Client, ScriptPort]:
    port = ScriptPort(partial(polite, **info))
    client = Client(port)
    client.hello()
    return client, port


def test_hello_tells_who_is_there():
    client, _ = greeted(boot_nonce=9, state=3, capabilities=129)
    assert client.info is not None
    assert client.info.boot_nonce == 9
    assert client.info.bundle_id == b"bundle00"
    assert client.info.state == "running"


@pytest.mark.parametrize("oldest", [1, 5])
def test_entries_right_behind_the_hello_are_taken_and_what_follows_too(oldest):
    behind = b"".join(cycle(k + 1, oldest + k) for k in range(3))
    client, port = greeted(oldest_entry=oldest, behind_hello=behind)
    assert numbers(take(client)) == [oldest, oldest + 1, oldest + 2]
    client.saved(oldest + 2)
    port.coming += cycle(4, oldest + 3)
    assert numbers(take(client)) == [oldest + 3]


def test_entries_that_are_on_disk_already_are_not_handed_on_again():
    behind = b"".join(cycle(k, k) for k in range(1, 5))
    port = ScriptPort(partial(polite, behind_hello=behind))
    client = Client(port)
    client.hello(saved_entry=2)
    assert numbers(take(client)) == [3, 4]
    assert port.beats()[0][1] == 2


def test_entry_that_comes_again_or_too_early_is_dropped():
    client, port = greeted()
    port.coming += cycle(1, 1) + cycle(2, 3) + cycle(3, 1) + cycle(4, 2) + cycle(5, 3)
    assert numbers(take(client)) == [1, 2, 3]


def test_restarted_board_is_told_and_its_entries_count_from_one_again():
    client, port = greeted(boot_nonce=1)
    port.coming += cycle(1, 1) + cycle(2, 2)
    take(client)
    client.saved(2)
    port.answer = partial(polite, boot_nonce=2, behind_hello=cycle(1, 1))
    before = len(port.beats())
    client.hello(client.saved_entry)
    events = take(client)
    assert [event.info.boot_nonce for event in events if isinstance(event, Restarted)] == [2]
    assert numbers(events) == [1]
    assert all(saved == 0 for _, saved in port.beats()[before:])


def test_disk_of_an_earlier_boot_says_nothing_about_this_one():
    client, port = greeted(boot_nonce=1)
    port.coming += b"".join(cycle(k, k) for k in range(1, 6))
    take(client)
    port.answer = partial(polite, boot_nonce=2, behind_hello=cycle(1, 1))
    client.hello(client.saved_entry)
    client.saved(5)                            # written before the restart was noticed
    assert all(saved == 0 for _, saved in port.beats())
    client.saved(1)
    assert port.beats()[-1][1] == 1


def test_no_beat_speaks_of_the_disk_while_nobody_knows_who_is_there():
    client, port = greeted()
    port.coming += cycle(1, 1)
    take(client)
    client.saved(1)
    port.answer = lambda name, number, body: b""
    before = len(port.beats())
    with pytest.raises(LinkTimeout):
        client.hello(client.saved_entry)
    assert len(port.beats()) == before


def test_samples_beats_and_rows_of_a_doubled_frame_are_handed_on_once():
    client, port = greeted()
    fields = dict.fromkeys(UP["beat"][2], 0)
    one, two, beat = sample(1, 10), sample(2, 11), up_frame("beat", 3, **fields)
    port.coming += one + one + two + beat + one + two + beat + sample(4, 12)
    events = take(client)
    ticks = [struct.unpack("<I", event.body[:4])[0] for event in events if isinstance(event, Sample)]
    assert ticks == [10, 11, 12]
    assert sum(isinstance(event, Beat) for event in events) == 1
    assert client.lost_frames == 0


def test_frames_that_never_came_are_counted_also_where_the_number_wraps():
    client, port = greeted()
    port.coming += b"".join(sample(number & 255, number) for number in range(1, 254))
    port.coming += sample(2, 258) + sample(3, 259)          # 254, 255, 0, 1 are missing
    assert len(take(client)) == 255
    assert client.lost_frames == 4


def test_new_hello_loses_nothing_and_skips_what_the_board_no_longer_holds():
    client, port = greeted()
    port.coming += sample(1, 1) + cycle(2, 1) + sample(3, 2)
    take(client)
    port.answer = partial(polite, oldest_entry=4, behind_hello=cycle(1, 4) + sample(2, 3))
    client.hello(client.saved_entry)
    events = take(client)
    assert numbers(events) == [4]
    assert sum(isinstance(event, Sample) for event in events) == 1
    assert client.lost_frames == 0


def test_credit_names_the_last_frame_that_came():
    client, port = greeted()
    port.coming += sample(1, 1) + sample(2, 2)
    take(client, 0.05)
    assert port.beats()[-1][0] == 2


def test_waiting_anywhere_keeps_the_board_fed():
    client, port = greeted()
    before = len(port.beats())
    assert client.poll(2.0) is None
    assert len(port.beats()) - before >= 15                # at least every 0.1 s, some slack


def test_poll_without_waiting_still_looks():
    client, port = greeted()
    port.coming += sample(1, 7)
    assert isinstance(client.poll(0.0), Sample)
    assert client.poll(0.0) is None


def test_command_is_sent_again_with_the_same_number_until_it_is_answered():
    client, port = greeted()
    asked: list[int] = []

    def deaf_twice(name: str, number: int, body: bytes) -> bytes:
        if name != "pause":
            return polite(name, number, body)
        asked.append(number)
        return reply(1, number, 0x47, detail=11) if len(asked) == 3 else b""

    port.answer = deaf_twice
    assert client.command("pause") == 11
    assert asked == [1, 1, 1]
    assert client.resends == 2


def test_answer_to_an_earlier_command_is_not_taken_for_this_one():
    client, port = greeted()
    port.answer = lambda name, number, body: (
        b"" if name == "beat" else reply(1, number - 1, 0x47) + reply(2, number, 0x48, result=1))
    with pytest.raises(Refused) as refused:
        client.command("resume")
    assert refused.value.got == "wrong state"


@pytest.mark.parametrize("result", range(1, len(messages.RESULTS)))
def test_refusal_carries_the_boards_reason(result):
    client, port = greeted()
    port.answer = lambda name, number, body: (
        b"" if name == "beat" else reply(1, number, 0x45, result=result))
    with pytest.raises(Refused) as refused:
        client.command("arm", fingerprint=b"12345678", program_crc32=1)
    assert messages.RESULTS[result] in refused.value.what
    assert refused.value.try_


def test_result_that_this_version_does_not_know_is_still_a_refusal():
    client, port = greeted()
    port.answer = lambda name, number, body: (
        b"" if name == "beat" else reply(1, number, 0x47, result=200))
    with pytest.raises(Refused, match="result 200"):
        client.command("pause")


def test_command_without_answer_is_a_timeout_after_eight_tries():
    client, port = greeted()
    port.answer = lambda name, number, body: b""
    start_s = port.now_s()
    with pytest.raises(LinkTimeout, match="pause"):
        client.command("pause")
    assert sum(name == "pause" for name, _, _ in port.heard) == 8
    assert port.now_s() - start_s == pytest.approx(8 * 0.15)


@pytest.mark.parametrize(("said", "shown"), [
    (b"", "nothing"), (b"Traceback: no such pin\r\n", "no such pin"),
    (b"\xa5\x10garbled", "garbled"), (bytes([0xA5, 200, 0, 1]), "\\xa5"),
])
def test_hello_to_a_port_that_talks_nonsense_tells_what_came(said, shown):
    port = ScriptPort(lambda name, number, body: said)
    with pytest.raises(LinkTimeout) as timeout:
        Client(port).hello()
    assert shown in timeout.value.got
    assert "flash" in timeout.value.try_


@pytest.mark.parametrize("body", [
    struct.pack(UP["hello"][1], *{**INFO, "wire_version": 0x1234}.values()),
    struct.pack("<I", 0x1234) + b"another layout",
    struct.pack("<I", 0x1234),
])
def test_board_of_another_wire_version_is_named_whatever_its_hello_looks_like(body):
    port = ScriptPort(lambda name, number, asked: raw_frame(0x80, 0, body))
    client = Client(port)
    with pytest.raises(WireMismatch) as mismatch:
        client.hello()
    assert "00001234" in mismatch.value.got
    assert f"{messages.WIRE_VERSION:08x}" in mismatch.value.bound
    assert "lodestroke flash" in mismatch.value.try_
    assert client.info is None


def test_messages_of_unknown_code_or_size_are_passed_over():
    client, port = greeted()
    port.coming += raw_frame(0x9F, 1, b"new") + raw_frame(0x83, 2, b"short") + sample(3, 5)
    assert [type(event) for event in take(client)] == [Sample]


def test_board_text_is_an_event_between_frames():
    client, port = greeted()
    port.coming += b"MemoryError: \xc3\xa9" + sample(1, 1) + b"\r\n"
    texts = [event.text for event in take(client) if isinstance(event, Text)]
    assert "".join(texts) == "MemoryError: é\r\n"


def test_recall_asks_again_for_rows_that_were_lost_and_keeps_other_events():
    client, port = greeted()
    asked: list[tuple[int, int]] = []
    rows = [struct.pack(messages.SAMPLE_FORMAT, 100 + k, *[0] * 10) for k in range(6)]
    up = 1

    def recorder(name: str, number: int, body: bytes) -> bytes:
        nonlocal up
        if name == "beat":
            return b""
        asked.append(struct.unpack("<HH", body))
        out = reply(up, number, 0x4D, detail=len(rows))
        for k in range(asked[-1][0], len(rows)):
            up = up + 1 & 255
            if k != 2 or len(asked) > 1:
                out += raw_frame(0x84, up, struct.pack("<H", k) + rows[k])
        if len(asked) == 1:
            up += 1
            out += cycle(up, 1)
        up += 1
        return out

    port.answer = recorder
    assert client.recall() == b"".join(rows)
    assert [first for first, _ in asked] == [0, 2]
    events = take(client)
    assert numbers(events) == [1]
    assert not any(isinstance(event, Recorded) for event in events)


def test_lost_port_is_passed_on_from_every_wait():
    client, port = greeted()
    port.close()
    for wait in (partial(client.poll, 0.1), partial(client.command, "pause"), client.hello):
        with pytest.raises(PortLost):
            wait()
