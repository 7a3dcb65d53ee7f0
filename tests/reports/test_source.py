"""Reading a judgement from the disk."""

from collections.abc import Callable
from pathlib import Path

import pytest

from reports.source import read_json, read_judgement


def test_a_judgement_with_its_record(write: Callable[..., Path]) -> None:
    source = read_judgement(write())
    assert (source.name, source.cells, source.notes) == ("001", 5, [])
    voltage = source.series("charger.voltage")
    assert voltage is not None
    assert voltage.time_s.size == voltage.value.size == voltage.flag.size > 3000
    assert source.series("tap.9") is None
    assert source.measurands["charge.voltage"].per_cell
    assert source.manifest["run"] == "2026-12-01-a1b2c3"


def test_a_changed_record_is_told(write: Callable[..., Path]) -> None:
    judged = write()
    events = judged.parent.parent / "data" / "events.jsonl"
    events.chmod(0o644)
    events.write_bytes(events.read_bytes() + b'{"t": 1.0, "event": "note", "text": "added"}\n')
    assert read_judgement(judged).notes == ["data/events.jsonl: was changed since sealing"]


def test_a_broken_file_is_named(tmp_path: Path) -> None:
    (tmp_path / "verdicts.json").write_text("{", encoding="utf-8")
    with pytest.raises(ValueError, match=r"verdicts\.json: not a JSON document"):
        read_json(tmp_path / "verdicts.json")
