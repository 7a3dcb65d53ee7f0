"""The manifest of a run that never wrote one."""

import hashlib

import pytest

from sequencer.engine.abandoned import abandoned_manifest
from sequencer.engine.events import EventLog


@pytest.fixture
def data(tmp_path):
    (tmp_path / "inputs").mkdir()
    (tmp_path / "inputs" / "pack.yaml").write_bytes(b"packmime: pack 1\n")
    return tmp_path


def happened(data, *events):
    log = EventLog(data / "events.jsonl")
    for t_s, event, fields in events:
        log.append(t_s, event, fields)
    log.close()


def test_what_the_first_event_told_goes_in(data):
    told = {
        "run": "r-1",
        "rehearsal": False,
        "seed": 7,
        "start_utc": "2026-01-01T00:00:00Z",
        "procedure": "full charge",
    }
    happened(data, (0.0, "run-start", told), (5.0, "note", {"text": "x"}))
    manifest = abandoned_manifest(data, last_sample_s=61.5)
    assert {key: manifest[key] for key in ("run", "rehearsal", "seed", "ended", "duration_s", "safe")} == {
        "run": "r-1", "rehearsal": False, "seed": 7, "ended": "abandoned", "duration_s": 61.5, "safe": None
    }  # fmt: skip
    assert manifest["started_utc"] == "2026-01-01T00:00:00Z"
    assert manifest["procedure"] == {"name": "full charge", "file": "procedure.yaml", "sha256": None}
    assert manifest["pack"]["sha256"] == hashlib.sha256(b"packmime: pack 1\n").hexdigest()
    assert "t" not in manifest


def test_a_file_told_in_full_is_kept_as_told(data):
    pack = {"name": "p", "file": "elsewhere.yaml", "sha256": "0" * 64}
    happened(data, (0.0, "run-start", {"pack": pack}))
    assert abandoned_manifest(data, 0.0)["pack"] == pack


def test_the_last_word_on_safety_counts(data):
    happened(data, (1.0, "safe-state", {"verified": False}), (9.0, "safe-state", {"verified": True}))
    manifest = abandoned_manifest(data, 0.0)
    assert (manifest["safe"], manifest["duration_s"]) == (True, 9.0)


def test_a_run_that_told_nothing_counts_as_a_rehearsal(data):
    manifest = abandoned_manifest(data, 0.0)
    assert (manifest["rehearsal"], manifest["ended"], manifest["duration_s"]) == (True, "abandoned", 0.0)
