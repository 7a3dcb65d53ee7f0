"""A record while it is written."""

import subprocess
import sys
from pathlib import Path

import pytest

import sequencer
from sequencer.engine.channels import CHANNELS
from sequencer.engine.events import read_events
from sequencer.engine.heartbeat import is_live
from sequencer.engine.journal_reader import JournalReader
from sequencer.engine.record import RecordError, RecordFolder, journal_segments

HOME = Path(sequencer.__file__).parent.parent


@pytest.mark.parametrize("prepare", [lambda out: None, lambda out: out.mkdir(parents=True)])
def test_a_new_or_empty_folder_takes_a_record(tmp_path, prepare):
    out = tmp_path / "runs" / "first"
    prepare(out)
    with RecordFolder.create(out) as record:
        assert (out / "data" / "inputs").is_dir()
        assert is_live(out)
        record.event(0.0, "run-start")
    assert not is_live(out)
    assert read_events(out / "data" / "events.jsonl")[0] == [{"t": 0.0, "event": "run-start"}]


def _a_record(out):
    RecordFolder.create(out).close()


def _a_file_inside(out):
    out.mkdir()
    (out / "photo.jpg").write_bytes(b"x")


@pytest.mark.parametrize(
    ("prepare", "why"),
    [
        (_a_record, "holds a record already, and no record is ever overwritten; name a new folder"),
        (_a_file_inside, "the folder is not empty; a record needs a new or empty one, so name another"),
        (lambda out: out.write_bytes(b"x"), "is a file; a record needs a new or empty folder, so name another"),
        (lambda out: out.parent.joinpath("file").write_bytes(b"x"), None),
    ],
)
def test_any_other_place_is_refused_and_left_as_it_is(tmp_path, prepare, why):
    out = tmp_path / "out"
    prepare(out)
    if why is None:  # a file stands where a folder above it should
        out, why = tmp_path / "file" / "out", "the record cannot be begun there .*; choose another folder"
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(RecordError, match=why):
        RecordFolder.create(out)
    assert sorted(tmp_path.rglob("*")) == before


def test_inputs_are_kept_byte_for_byte(tmp_path):
    content = b"\xef\xbb\xbfname: gr\xc3\xbcn\r\n\x00\xff"
    with RecordFolder.create(tmp_path / "r") as record:
        record.add_input("dialects/scpi-meter.yaml", content)
        record.add_input("dialects/scpi-meter.yaml", content)
        with pytest.raises(RecordError, match="exists already, and nothing in a record is ever overwritten"):
            record.add_input("dialects/scpi-meter.yaml", b"other")
    assert (tmp_path / "r" / "data" / "inputs" / "dialects" / "scpi-meter.yaml").read_bytes() == content


@pytest.mark.parametrize("name", ["", ".", "/etc/x", "../x", "a/../../x", "C:\\x", "a\\b", "a\0b", "\udc80"])
def test_an_input_cannot_lead_out_of_the_record(tmp_path, name):
    with RecordFolder.create(tmp_path / "r") as record, pytest.raises(RecordError, match="expected a name inside"):
        record.add_input(name, b"x")
    assert list((tmp_path / "r" / "data" / "inputs").iterdir()) == []


def test_closing_ends_the_journal_cleanly(tmp_path):
    with RecordFolder.create(tmp_path / "r") as record:
        journal = record.start_journal(start_utc="x")
        journal.append("node.voltage", 0.0, 15.0)
        record.beat()
        assert record.failure is None
    record.close()
    reader = JournalReader(tmp_path / "r" / "data" / "samples-1.arrows")
    assert sum(len(batch) for batch in reader) == 1
    assert reader.torn is None
    assert reader.table == CHANNELS


def test_a_reopened_record_goes_on_in_a_new_segment(tmp_path):
    for start in (0, 1):
        record = RecordFolder.reopen(tmp_path / "r") if start else RecordFolder.create(tmp_path / "r")
        record.event(float(start), "note")
        record.start_journal(start_utc="x").append("node.voltage", float(start), 1.0)
        record.close()
    assert [path.name for path in journal_segments(tmp_path / "r")] == ["samples-1.arrows", "samples-2.arrows"]
    assert [event["t"] for event in read_events(tmp_path / "r" / "data" / "events.jsonl")[0]] == [0.0, 1.0]


def test_segments_are_ordered_by_number_not_by_letter(tmp_path):
    (tmp_path / "data").mkdir()
    for name in ("samples-10.arrows", "samples-2.arrows", "samples-x.arrows", "samples-.arrows"):
        (tmp_path / "data" / name).touch()
    assert [path.name for path in journal_segments(tmp_path)] == ["samples-2.arrows", "samples-10.arrows"]


def test_only_an_abandoned_record_is_reopened(tmp_path):
    with pytest.raises(RecordError, match="holds no record to go on with"):
        RecordFolder.reopen(tmp_path)
    with RecordFolder.create(tmp_path / "r"), pytest.raises(RecordError, match="is still being written by process"):
        RecordFolder.reopen(tmp_path / "r")
    (tmp_path / "r" / "data" / "manifest.json").write_text("{}")
    with pytest.raises(RecordError, match="is sealed and cannot go on"):
        RecordFolder.reopen(tmp_path / "r")


def test_a_journal_that_fails_shows_as_the_records_failure(tmp_path, monkeypatch):
    from sequencer.engine import journal

    record = RecordFolder.create(tmp_path / "r")
    started = record.start_journal(start_utc="x")

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(journal, "write_all", full)
    started.append("node.voltage", 0.0, 1.0)
    record.close()
    assert record.failure.errno == 28


def test_naming_a_record_loads_no_heavy_library():
    heavy = "{'numpy', 'pyarrow', 'pandas', 'pydantic'}"
    code = f"import sys, sequencer.engine.record; print(sorted({heavy} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=HOME, timeout=60)
    assert (done.stdout.strip(), done.returncode) == ("[]", 0)
