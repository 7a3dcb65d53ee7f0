"""Events: whole lines, hostile text, full disks, torn tails."""

import os

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.engine import events
from sequencer.engine.events import EventLog, read_events

HOSTILE = [
    '<b>"quoted"</b>',
    "naïve Ω µ ±",
    "数据 данные",
    "a\nb\r\nc",
    "line\u2028paragraph\u2029next\x85",
    "\x00\x1b[31m",
    "{'t': 0}",
]


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_text_comes_back_as_it_was(tmp_path, text):
    log = EventLog(tmp_path / "e")
    log.append(1.5, "note", {"text": text, text: 1})
    log.append(2.0, "note", {"text": "after"})
    log.close()
    found, notes = read_events(tmp_path / "e")
    assert found == [{"t": 1.5, "event": "note", "text": text, text: 1}, {"t": 2.0, "event": "note", "text": "after"}]
    assert notes == []


def test_an_event_is_on_disk_before_append_returns(tmp_path):
    log = EventLog(tmp_path / "e")
    log.append(0.0, "run-start", {})
    assert read_events(tmp_path / "e")[0] == [{"t": 0.0, "event": "run-start"}]
    log.close()


@pytest.mark.parametrize("name", ["t", "event"])
def test_a_field_cannot_stand_in_for_time_or_kind(tmp_path, name):
    log = EventLog(tmp_path / "e")
    with pytest.raises(ValueError, match=f"no field can be called '{name}'"):
        log.append(0.0, "note", {name: 1})
    log.close()


@given(cut=st.integers(0, 200))
def test_a_cut_costs_the_torn_line_only_and_says_so(tmp_path_factory, cut):
    path = tmp_path_factory.mktemp("events") / "e"
    log = EventLog(path)
    for number in range(5):
        log.append(float(number), "note", {"text": "zwölf"})
    log.close()
    whole = path.read_bytes()
    cut = min(cut, len(whole))
    path.write_bytes(whole[:cut])
    found, notes = read_events(path)
    assert [event["t"] for event in found] == [float(n) for n in range(whole[:cut].count(b"\n"))]
    assert bool(notes) == (cut > 0 and whole[cut - 1 : cut] != b"\n")


def test_a_resumed_log_closes_the_torn_line_and_goes_on(tmp_path):
    path = tmp_path / "e"
    path.write_bytes(b'{"t": 0.0, "event": "run-start"}\n{"t": 1.0, "ev')
    log = EventLog(path)
    log.append(2.0, "note", {})
    log.close()
    found, notes = read_events(path)
    assert [event["t"] for event in found] == [0.0, 2.0]
    assert notes == ["e: line 2 is no event and was left out"]


def test_a_full_disk_is_told_and_the_events_follow_when_there_is_room(tmp_path, monkeypatch):
    log = EventLog(tmp_path / "e")
    log.append(0.0, "run-start", {})
    original = events.write_all

    def half_then_full(file, data):
        original(file, data[: len(data) // 2])
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(events, "write_all", half_then_full)
    log.append(1.0, "trip", {"why": "disk"})
    assert log.failure.errno == 28
    assert read_events(tmp_path / "e") == ([{"t": 0.0, "event": "run-start"}], [])
    monkeypatch.setattr(events, "write_all", original)
    log.append(2.0, "run-end", {})
    log.close()
    assert [event["t"] for event in read_events(tmp_path / "e")[0]] == [0.0, 1.0, 2.0]
    assert log.waiting == b""
    assert log.failure.errno == 28  # the first failure stays known


def test_a_missing_file_has_no_events(tmp_path):
    assert read_events(tmp_path / "none") == ([], [])


def test_lines_that_are_json_but_no_events_are_left_out(tmp_path):
    (tmp_path / "e").write_bytes(b'[1]\n{"t": "x", "event": "y"}\n\xff\n{"t": 1, "event": "note"}\n')
    found, notes = read_events(tmp_path / "e")
    assert found == [{"t": 1, "event": "note"}]
    assert len(notes) == 3


def test_closing_twice_does_no_harm(tmp_path):
    log = EventLog(tmp_path / "e")
    log.close()
    log.close()
    assert os.path.getsize(tmp_path / "e") == 0
