"""A record opened for reading: sealed, unsealed, live, torn, tampered with."""

import pytest

from sequencer.engine.durable import RecordError
from sequencer.engine.record import RecordFolder
from sequencer.engine.record_reader import Record
from sequencer.engine.sealing import seal

VALUES = [15.0 + k for k in range(40)]


def written(out):
    record = RecordFolder.create(out)
    record.add_input("dialects/scpi-load.yaml", b"\xff\r\n")
    record.event(0.0, "run-start", words="<b>Ω</b>")
    journal = record.start_journal(start_utc="x")
    for k, value in enumerate(VALUES):
        journal.append("node.voltage", k * 0.25, value)
        journal.append("charger.current", k * 0.25, -value, 4)
    return record


def sealed(out):
    record = written(out)
    seal(record, {"duration_s": 11.0, "ended": "complete"})
    return out


def damage(path, content=None):
    path.parent.chmod(0o755)
    path.chmod(0o644)
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 1
    path.write_bytes(bytes(data) if content is None else content)


def test_a_sealed_record_reads_as_it_was_written_and_has_no_notes(tmp_path):
    record = Record.open(sealed(tmp_path / "r"))
    assert record.notes == []
    assert record.series("node.voltage").value.tolist() == VALUES
    assert record.series("charger.current").flag.tolist() == [4] * 40
    assert len(record.series("set.mains")) == 0
    assert record.events == [{"t": 0.0, "event": "run-start", "words": "<b>Ω</b>"}]
    assert (record.inputs, record.input_bytes("dialects/scpi-load.yaml")) == (["dialects/scpi-load.yaml"], b"\xff\r\n")
    assert (record.duration_s, record.manifest["ended"], record.is_live) == (11.0, "complete", False)
    assert "node.voltage" in [channel.name for channel in record.channels]


def test_a_live_record_reads_as_far_as_it_is_and_says_so(tmp_path):
    with written(tmp_path / "r"):
        record = Record.open(tmp_path / "r")
        assert record.is_live
        assert record.manifest is None
        assert record.notes[0].startswith("the record is still being written by process ")
        got = record.series("node.voltage").value.tolist()
        assert got == VALUES[: len(got)]


def test_an_unsealed_record_reads_to_its_end_and_knows_its_duration(tmp_path):
    written(tmp_path / "r").close()
    record = Record.open(tmp_path / "r")
    assert [note.partition(";")[0] for note in record.notes] == ["the record is not sealed"]
    assert record.traces(["node.voltage", "charger.current"])["charger.current"].value.tolist() == [-v for v in VALUES]
    assert record.duration_s == 39 * 0.25


def test_torn_events_and_samples_are_noted_and_the_rest_is_read(tmp_path):
    written(tmp_path / "r").close()
    data = tmp_path / "r" / "data"
    with (data / "events.jsonl").open("ab") as file:
        file.write(b'{"t": 3.0, "ev')
    journal = data / "samples-1.arrows"
    journal.write_bytes(journal.read_bytes()[:-1500])
    record = Record.open(tmp_path / "r")
    assert record.notes[1] == "events.jsonl: the last line ends after 14 bytes and was left out"
    assert record.notes[2].startswith("samples-1.arrows: readable up to batch ")
    assert len(record.events) == 1
    got = record.series("node.voltage").value.tolist()
    assert 0 < len(got) < 40
    assert got == VALUES[: len(got)]


def test_what_was_torn_before_sealing_is_still_told_after(tmp_path):
    written(tmp_path / "r").close()
    journal = tmp_path / "r" / "data" / "samples-1.arrows"
    journal.write_bytes(journal.read_bytes()[:-1500])
    seal(tmp_path / "r", {})
    assert [note.partition(":")[0] for note in Record.open(tmp_path / "r").notes] == ["samples-1.arrows"]


@pytest.mark.parametrize("content", [None, b"", b"PAR1"])
@pytest.mark.parametrize("check", [True, False])
def test_damaged_sealed_samples_are_read_from_the_journal_instead(tmp_path, check, content):
    damage(sealed(tmp_path / "r") / "data" / "samples.parquet", content)
    record = Record.open(tmp_path / "r", check=check)
    assert record.series("node.voltage").value.tolist() == VALUES
    assert record.series("charger.current").value.tolist() == [-value for value in VALUES]
    if check:
        assert record.notes[0] == "data/samples.parquet: was changed since sealing"
    if check or content is not None:
        assert record.notes[-1].endswith("the samples are read from the journal")


def test_missing_sealed_samples_are_read_from_the_journal_instead(tmp_path):
    path = sealed(tmp_path / "r") / "data" / "samples.parquet"
    path.parent.chmod(0o755)
    path.unlink()
    record = Record.open(tmp_path / "r")
    assert record.notes[0] == "data/samples.parquet: is missing since sealing"
    assert record.series("node.voltage").value.tolist() == VALUES


@pytest.mark.parametrize(
    "name", ["events.jsonl", "samples-1.arrows", "inputs/dialects/scpi-load.yaml", "manifest.json"]
)
def test_every_tampered_file_is_noted(tmp_path, name):
    damage(sealed(tmp_path / "r") / "data" / name)
    assert any(note.startswith(f"data/{name}: was changed") for note in Record.open(tmp_path / "r").notes)


def test_a_record_of_several_segments_is_one_record(tmp_path):
    written(tmp_path / "r").close()
    again = RecordFolder.reopen(tmp_path / "r")
    again.start_journal(start_utc="x").append("node.voltage", 100.0, 1.0)
    again.close()
    for prepare in (lambda: None, lambda: seal(tmp_path / "r", {})):
        prepare()
        record = Record.open(tmp_path / "r")
        assert record.series("node.voltage").value.tolist() == [*VALUES, 1.0]
        assert record.duration_s == (100.0 if record.manifest is None else 0.0)


def test_what_is_no_record_is_refused_in_words(tmp_path):
    with pytest.raises(RecordError, match="holds no record; name the folder that a run wrote with --out"):
        Record.open(tmp_path)
    with pytest.raises(RecordError, match="holds no record"):
        Record.open(tmp_path / "nowhere")


def test_what_the_record_lacks_is_refused_with_what_it_has(tmp_path):
    record = Record.open(sealed(tmp_path / "r"))
    with pytest.raises(RecordError, match=r"has no channel 'node\.volts'; it has node\.voltage, "):
        record.series("node.volts")
    with pytest.raises(RecordError, match=r"has no input '\.\./events\.jsonl'; it has dialects/scpi-load\.yaml"):
        record.input_bytes("../events.jsonl")


def test_a_newer_record_is_refused_by_its_format(tmp_path):
    path = sealed(tmp_path / "r") / "data" / "manifest.json"
    damage(path, path.read_bytes().replace(b'"format": 1', b'"format": 2'))
    with pytest.raises(RecordError, match="is a record of format 2, and this program reads 1; use a newer packmime"):
        Record.open(tmp_path / "r")


def test_a_record_without_samples_opens(tmp_path):
    RecordFolder.create(tmp_path / "r").close()
    record = Record.open(tmp_path / "r")
    assert (record.events, record.channels, record.duration_s, record.inputs) == ([], (), 0.0, [])
    with pytest.raises(RecordError, match="it has none"):
        record.series("node.voltage")
