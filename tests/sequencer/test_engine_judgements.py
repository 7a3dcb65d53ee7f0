"""Judgements: numbered, written once, the latest on top."""

import json
import os
import stat
from concurrent.futures import ThreadPoolExecutor

import pytest

from sequencer.engine import judgements
from sequencer.engine.durable import RecordError
from sequencer.engine.judgements import changes, latest, new_judgement, publish, write_json
from sequencer.engine.record import RecordFolder
from sequencer.engine.sealing import seal, verify


@pytest.fixture
def record(tmp_path):
    folder = RecordFolder.create(tmp_path / "r")
    folder.event(0.0, "run-start")
    seal(folder, {})
    return tmp_path / "r"


def judged(record, word):
    folder = new_judgement(record)
    write_json(folder / "verdicts.json", {"overall": word})
    (folder / "report.html").write_text(f"<h1>{word}</h1>")
    return folder


def test_judgements_are_numbered_and_leave_the_data_alone(record):
    assert latest(record) is None
    assert [judged(record, word).name for word in ("pass", "fail")] == ["001", "002"]
    assert latest(record).name == "002"
    assert verify(record) == []


def test_numbers_go_on_beyond_three_digits_and_past_gaps(record):
    (record / "judged" / "999").mkdir(parents=True)
    (record / "judged" / "notes").mkdir()
    assert [new_judgement(record).name for _ in range(2)] == ["1000", "1001"]


def test_no_two_judges_get_the_same_folder(record):
    with ThreadPoolExecutor(8) as judges:
        folders = list(judges.map(lambda _: new_judgement(record), range(40)))
    assert sorted(folder.name for folder in folders) == [f"{number:03d}" for number in range(1, 41)]


def test_an_unfinished_judgement_is_not_the_latest(record):
    judged(record, "pass")
    new_judgement(record)
    assert latest(record).name == "001"


def test_a_live_or_unsealed_record_is_not_judged(tmp_path):
    with RecordFolder.create(tmp_path / "r"), pytest.raises(RecordError, match="is still being written by process"):
        new_judgement(tmp_path / "r")
    with pytest.raises(RecordError, match="is not sealed; seal it first"):
        new_judgement(tmp_path / "r")
    assert not (tmp_path / "r" / "judged").exists()


def test_publishing_shows_the_latest_on_top_and_freezes_it(record):
    for word in ("pass", "fail"):
        folder = judged(record, word)
        publish(folder)
        assert json.loads((record / "verdicts.json").read_bytes()) == {"overall": word}
        assert (record / "report.html").read_text() == f"<h1>{word}</h1>"
        assert not (folder / "verdicts.json").stat().st_mode & (stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH)
    assert (record / "judged" / "001" / "report.html").read_text() == "<h1>pass</h1>"


def test_a_judgement_without_report_is_not_shown_and_the_older_one_stays(record):
    publish(judged(record, "pass"))
    folder = new_judgement(record)
    write_json(folder / "verdicts.json", {"overall": "fail"})
    with pytest.raises(RecordError, match=r"is not finished, report\.html is missing; judge again"):
        publish(folder)
    assert json.loads((record / "verdicts.json").read_bytes()) == {"overall": "pass"}


def test_a_full_disk_leaves_what_was_shown(record, monkeypatch):
    publish(judged(record, "pass"))
    folder = judged(record, "fail")

    def refuse(_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(judgements.os, "fsync", refuse)
    with pytest.raises(RecordError, match=r"cannot be shown there \(.*No space left"):
        publish(folder)
    assert json.loads((record / "verdicts.json").read_bytes()) == {"overall": "pass"}
    assert not [name for name in os.listdir(record) if name.endswith(".partial")]


def verdict(limit="charge.cutoff", **changed):
    return {
        "limit": limit, "kind": "quantity", "finding": "cutoff", "verdict": "pass", "why": "inside", "value": 0.15,
        "unit": "A", "u": 0.001, "k": 2.0, "n": 1, "low": 0.12, "high": 0.18, "expected": None, "rule": "guarded",
        "guard_band": 0.002, "p_conform": 1.0, "evidence": [0.0, 1.0], **changed,
    }  # fmt: skip


def document(*verdicts, overall="pass"):
    return {"overall": overall, "rehearsal": True, "verdicts": list(verdicts)}


def test_the_same_verdicts_have_no_changes():
    assert changes(document(verdict()), document(verdict())) == []


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ({}, {"verdict": "fail"}, ["charge.cutoff: verdict fail, was pass"]),
        ({}, {"rule": "simple", "guard_band": 0.0},
         ["charge.cutoff: decision rule simple, was guarded", "charge.cutoff: guard band 0 A, was 0.002 A"]),
        ({}, {"value": None}, ["charge.cutoff: value none, was 0.15 A"]),
        ({}, {"high": 180, "unit": "mA"}, ["charge.cutoff: upper limit 180 mA, was 0.18 A"]),
        ({"value": 4.2}, {"value": 4.2000000001}, ["charge.cutoff: value 4.2000000001 A, was 4.2 A"]),
        ({"value": "cc-cv", "unit": None}, {"value": "stepped-cc", "unit": None},
         ["charge.cutoff: value stepped-cc, was cc-cv"]),
        ({"value": True, "unit": None}, {"value": False, "unit": None}, ["charge.cutoff: value no, was yes"]),
        ({}, {"p_conform": 0.5}, ["charge.cutoff: probability of conformity 0.5, was 1"]),
    ],
)  # fmt: skip
def test_a_change_is_said_in_words(old, new, words):
    assert changes(document(verdict(**old)), document(verdict(**new))) == words


def test_limits_that_come_and_go_and_the_overall_word_are_said():
    old = document(verdict("charge.ends"), verdict())
    new = document(verdict(), verdict("charge.voltage", verdict="inconclusive"), overall="inconclusive")
    assert changes(old, new) == [
        "overall: inconclusive, was pass",
        "charge.voltage: inconclusive, was not judged before",
        "charge.ends: no longer judged, was pass",
    ]
