"""Sealing: all or nothing, and afterwards every change shows."""

import hashlib
import json
import os
import stat

import pytest

from sequencer.engine import durable, sealed_samples, sealing
from sequencer.engine.durable import RecordError
from sequencer.engine.journal_reader import JournalReader
from sequencer.engine.record import RecordFolder
from sequencer.engine.sealing import read_manifest, seal, seal_abandoned, verify

MANIFEST = {"run": "r-1", "ended": "complete", "purpose": "Größe <b>Ω</b>", "drift": float("nan")}


def written(out):
    record = RecordFolder.create(out)
    record.add_input("procedure.yaml", b"packmime: procedure 1\n")
    record.add_input("dialects/scpi-load.yaml", b"x: 1\n")
    record.event(0.0, "run-start", run="r-1", rehearsal=False)
    journal = record.start_journal(start_utc="2026-01-01T00:00:00Z")
    for k in range(40):
        journal.append("node.voltage", k * 0.25, 15.0 + k)
    record.event(9.75, "run-end", ended="complete")
    return record


def snapshot(folder):
    return {p.relative_to(folder).as_posix(): p.read_bytes() for p in sorted(folder.rglob("*")) if p.is_file()}


def writable(path):
    path.parent.chmod(0o755)
    if path.exists():
        path.chmod(0o644)
    return path


def test_a_sealed_record_holds_a_hash_of_every_file(tmp_path):
    manifest = seal(written(tmp_path / "r"), MANIFEST)
    files = snapshot(tmp_path / "r" / "data")
    assert json.loads(files.pop("manifest.json")) == manifest
    assert sorted(files) == [
        "events.jsonl", "inputs/dialects/scpi-load.yaml", "inputs/procedure.yaml", "samples-1.arrows", "samples.parquet"
    ]  # fmt: skip
    assert manifest["files"] == {name: hashlib.sha256(content).hexdigest() for name, content in files.items()}
    assert manifest["journal"] == [{"file": "samples-1.arrows", "batches": 10, "rows": 40, "torn": None}]
    assert (manifest["purpose"], manifest["drift"], manifest["format"]) == ("Größe <b>Ω</b>", None, 1)
    assert list(manifest)[:3] == ["run", "ended", "purpose"]
    assert verify(tmp_path / "r") == []


def test_nothing_under_data_can_be_written_by_accident(tmp_path):
    seal(written(tmp_path / "r"), MANIFEST)
    for path in [tmp_path / "r" / "data", *(tmp_path / "r" / "data").rglob("*")]:
        if path.is_file() or os.name != "nt":  # Windows knows no read-only folder
            assert not path.stat().st_mode & (stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH), path
    assert (tmp_path / "r").stat().st_mode & stat.S_IWUSR  # judgements go there


def test_a_record_is_sealed_once(tmp_path):
    seal(written(tmp_path / "r"), MANIFEST)
    before = snapshot(tmp_path / "r")
    for again in (lambda: seal(tmp_path / "r", MANIFEST), lambda: seal_abandoned(tmp_path / "r")):
        with pytest.raises(RecordError, match="is sealed already"):
            again()
    assert snapshot(tmp_path / "r") == before


def test_a_live_record_is_not_sealed(tmp_path):
    record = written(tmp_path / "r")
    with pytest.raises(RecordError, match="is still being written by process"):
        seal_abandoned(tmp_path / "r")
    seal(record, MANIFEST)  # its own writer may, and stops writing by that


def test_a_folder_without_record_is_not_sealed(tmp_path):
    with pytest.raises(RecordError, match="holds no record to seal"):
        seal(tmp_path, MANIFEST)


def change(path):
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 1
    writable(path).write_bytes(data)


NAMES = [
    "events.jsonl",
    "inputs/dialects/scpi-load.yaml",
    "inputs/procedure.yaml",
    "samples-1.arrows",
    "samples.parquet",
]


@pytest.mark.parametrize("name", [*NAMES, "manifest.json"])
def test_a_changed_bit_is_found_in_every_file(tmp_path, name):
    seal(written(tmp_path / "r"), MANIFEST)
    change(tmp_path / "r" / "data" / name)
    found = verify(tmp_path / "r")
    assert found[0].startswith(f"data/{name}: was changed since sealing")
    assert len(found) == 1 or name == "manifest.json"  # the bit may fall into the hash of another file


@pytest.mark.parametrize("name", NAMES)
def test_a_missing_file_is_found(tmp_path, name):
    seal(written(tmp_path / "r"), MANIFEST)
    writable(tmp_path / "r" / "data" / name).unlink()
    assert verify(tmp_path / "r") == [f"data/{name}: is missing since sealing"]


@pytest.mark.parametrize("name", ["inputs/more.yaml", "samples-2.arrows", "новый Ω.txt"])
def test_an_added_file_is_found(tmp_path, name):
    seal(written(tmp_path / "r"), MANIFEST)
    writable(tmp_path / "r" / "data" / name).write_bytes(b"x")
    assert verify(tmp_path / "r") == [f"data/{name}: was added after sealing"]


def test_several_changes_are_all_named(tmp_path):
    seal(written(tmp_path / "r"), MANIFEST)
    data = tmp_path / "r" / "data"
    change(data / "events.jsonl")
    writable(data / "samples-1.arrows").unlink()
    writable(data / "inputs" / "more.yaml").write_bytes(b"x")
    assert sorted(note.partition(":")[0] for note in verify(tmp_path / "r")) == [
        "data/events.jsonl", "data/inputs/more.yaml", "data/samples-1.arrows"
    ]  # fmt: skip


@pytest.mark.parametrize(
    "edit",
    [
        lambda text: text.replace(b'"complete"', b'"stopped"'),
        lambda text: text.replace(b'"r-1"', b'"r-2"'),
        lambda text: text + b"\n",
        lambda text: text[: text.index(b',\n  "manifest_sha256"')] + b"\n}\n",
        lambda text: text.replace(b'  "run"', b'   "run"'),
    ],
)
def test_an_edited_manifest_is_found(tmp_path, edit):
    seal(written(tmp_path / "r"), MANIFEST)
    path = tmp_path / "r" / "data" / "manifest.json"
    text = path.read_bytes()
    writable(path).write_bytes(edit(text))
    assert path.read_bytes() != text
    assert verify(tmp_path / "r") == ["data/manifest.json: was changed since sealing"]


@pytest.mark.parametrize("content", [b"", b"{", b"[]", b'{"files": []}', b"\xff"])
def test_a_manifest_that_is_none_any_more_is_told(tmp_path, content):
    seal(written(tmp_path / "r"), MANIFEST)
    writable(tmp_path / "r" / "data" / "manifest.json").write_bytes(content)
    assert read_manifest(tmp_path / "r" / "data" / "manifest.json")[0] is None
    assert verify(tmp_path / "r") == ["data/manifest.json: was changed since sealing, and is no manifest now"]


def test_an_unsealed_record_cannot_be_verified_and_says_so(tmp_path):
    written(tmp_path / "r").close()
    assert verify(tmp_path / "r") == ["the record is not sealed, so nothing tells whether it is as it was written"]


FULL = OSError(28, "No space left on device")


def _fail_at(place):
    """Let the n-th sync during sealing fail: the samples', or the manifest's."""

    def arrange(monkeypatch):
        calls, original = [], os.fsync

        def sync(number):
            calls.append(number)
            if len(calls) == place:
                raise FULL
            original(number)

        monkeypatch.setattr(durable.os, "fsync", sync)

    return arrange


def _refuse_samples(monkeypatch):
    def refuse(*_):
        raise FULL

    monkeypatch.setattr(sealed_samples, "_table", refuse)


def _refuse_manifest(monkeypatch):
    def refuse(*_):
        raise FULL

    monkeypatch.setattr(sealing, "write_new", refuse)


@pytest.mark.parametrize("arrange", [_refuse_samples, _refuse_manifest, _fail_at(1), _fail_at(3)])
def test_a_disk_that_fills_while_sealing_leaves_a_readable_unsealed_record(tmp_path, monkeypatch, arrange):
    record = written(tmp_path / "r")
    record.close()
    before = snapshot(tmp_path / "r" / "data")
    with monkeypatch.context() as patch:
        arrange(patch)
        with pytest.raises(RecordError, match=r"cannot be sealed .*No space left.*it stays readable, so mend the disk"):
            seal(record, MANIFEST)
    after = snapshot(tmp_path / "r" / "data")
    assert {name: after[name] for name in before} == before
    assert "manifest.json" not in after
    assert not [name for name in after if name.endswith(".partial")]
    seal(tmp_path / "r", MANIFEST)
    assert verify(tmp_path / "r") == []


def test_what_a_crash_while_sealing_left_is_swept_by_the_next_one(tmp_path):
    written(tmp_path / "r").close()
    data = tmp_path / "r" / "data"
    for name in ("samples.parquet.partial", "samples.parquet", "manifest.json.partial"):
        (data / name).write_bytes(b"half")
    manifest = seal(tmp_path / "r", MANIFEST)
    assert "samples.parquet.partial" not in manifest["files"]
    assert verify(tmp_path / "r") == []
    assert not (data / "samples.parquet.partial").exists()


def test_events_that_the_disk_did_not_take_keep_a_record_from_being_sealed(tmp_path, monkeypatch):
    from sequencer.engine import events

    record = written(tmp_path / "r")

    def refuse(*_):
        raise FULL

    monkeypatch.setattr(events, "write_all", refuse)
    record.event(11.0, "safe-state", verified=True)
    with pytest.raises(RecordError, match="the disk did not take the last events"):
        seal(record, MANIFEST)
    assert not (tmp_path / "r" / "data" / "manifest.json").exists()


def test_a_torn_journal_is_sealed_as_far_as_it_reads_and_the_manifest_says_so(tmp_path):
    written(tmp_path / "r").close()
    path = tmp_path / "r" / "data" / "samples-1.arrows"
    path.write_bytes(path.read_bytes()[:-1500])
    manifest = seal(tmp_path / "r", MANIFEST)
    reader = JournalReader(path)
    rows = sum(len(batch) for batch in reader)
    assert 0 < rows < 40
    told = manifest["journal"][0]
    assert (told["rows"], told["torn"]) == (rows, str(reader.torn))


def test_an_abandoned_record_is_sealed_with_what_it_still_tells(tmp_path):
    record = written(tmp_path / "r")
    record.event(12.5, "safe-state", verified=True)
    record.close()
    manifest = seal_abandoned(tmp_path / "r")
    assert (manifest["ended"], manifest["run"], manifest["rehearsal"]) == ("abandoned", "r-1", False)
    assert (manifest["duration_s"], manifest["ended_utc"], manifest["safe"]) == (12.5, None, True)
    assert verify(tmp_path / "r") == []
