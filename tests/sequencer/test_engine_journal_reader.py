"""Reading a damaged journal: a thousand ways to damage it, and never a value that was not written."""

import numpy as np
import pyarrow as pa
import pytest

from sequencer.engine.channels import CHANNELS, Channel
from sequencer.engine.journal import Journal
from sequencer.engine.journal_format import END_OF_STREAM
from sequencer.engine.journal_reader import JournalReader, chunks, collect

THREE = CHANNELS[:3]


def write(path, first=0, seconds=12, channels=THREE, start_utc="x"):
    journal = Journal(path, channels, start_utc=start_utc)
    truth = []
    for scan in range(4 * seconds):
        for index, channel in enumerate(channels):
            sample = (index, first + scan * 0.25, index + 1 + scan / 8, scan % 5 == 0)
            journal.append(channel.name, *sample[1:])
            truth.append(sample)
    journal.close()
    return truth


def rows_of(batch):
    return list(
        zip(batch.channel.tolist(), batch.time_s.tolist(), batch.value.tolist(), batch.flag.tolist(), strict=True)
    )


def read(path):
    reader = JournalReader(path)
    return [row for batch in reader for row in rows_of(batch)], reader


@pytest.fixture(scope="module")
def whole(tmp_path_factory):
    path = tmp_path_factory.mktemp("journal") / "whole"
    truth = write(path)
    return path.read_bytes(), truth


def cut(data, draw):
    return data[: draw.integers(0, len(data))]


def flip(data, draw):
    damaged = bytearray(data)
    damaged[draw.integers(0, len(data))] ^= 1 << draw.integers(0, 8)
    return bytes(damaged)


def zero_tail(data, draw):
    kept = draw.integers(0, len(data))
    return data[:kept] + bytes(len(data) - kept)


def overwrite(data, draw):
    place = int(draw.integers(0, len(data) - 8))
    return data[:place] + draw.bytes(8) + data[place + 8 :]


@pytest.mark.parametrize("damage", [cut, flip, zero_tail, overwrite])
def test_no_damage_makes_a_wrong_value_pass_for_a_right_one(whole, tmp_path, damage):
    data, truth = whole
    draw = np.random.default_rng([20260101, len(damage.__name__)])
    told = 0
    for trial in range(400):
        damaged = damage(data, draw)
        (tmp_path / "j").write_bytes(damaged)
        rows, reader = read(tmp_path / "j")
        assert rows == truth[: len(rows)], f"trial {trial}: a wrong value"
        assert reader.torn is not None or len(rows) == len(truth), f"trial {trial}: samples missing, not told"
        told += reader.torn is not None
    assert told >= 300  # the rest fell on padding, or changed nothing


@pytest.mark.parametrize("damage", [flip, zero_tail])
def test_the_same_damage_deceives_a_reader_without_checksums(whole, damage):
    """Proves that the trials above can fail: the plain stream reader takes many of these files for good ones."""
    data, truth = whole
    draw = np.random.default_rng([20260101, len(damage.__name__)])
    values = [value for _, _, value, _ in truth]
    deceived = 0
    for _ in range(400):
        try:
            table = pa.ipc.open_stream(damage(data, draw)).read_all()
            deceived += table.column(2).to_pylist() != values
        except (pa.ArrowException, OSError, ValueError):
            pass
    assert deceived > 20


@pytest.mark.parametrize(
    ("change", "batch", "why"),
    [
        (lambda d, ends: d[: ends[3]], 4, "it ends without a clean end"),
        (lambda d, ends: d[: ends[3]] + bytes(900), 4, "900 bytes follow that begin with zeros"),
        (lambda d, ends: d[: ends[3]] + END_OF_STREAM, 4, "it ends without a clean end"),
        (lambda d, ends: d[: ends[3] + 40], 4, "the batch is cut or damaged"),
        (lambda d, ends: d[: ends[2]] + d[ends[3] :], 3, "a batch is numbered 4"),
        (lambda d, ends: d[: ends[3]] + d[ends[2] :], 4, "a batch is numbered 3"),
        (lambda d, ends: d[: ends[3] - 9] + b"\x01" + d[ends[3] - 8 :], 3, "the batch does not have its checksum"),
        (lambda d, ends: d[:-1], 12, "all batches are whole, but the end marker after them is cut or changed"),
        (lambda d, ends: d + b"x", 12, "all batches are whole, but the end marker after them is cut or changed"),
        (lambda d, ends: b"", 0, "the file is empty"),
        (lambda d, ends: bytes(5000), 0, "5000 bytes follow that begin with zeros"),
        (lambda d, ends: d[:100], 0, "no header could be read"),
        (lambda d, ends: b"not a journal at all, but text", 0, "no header could be read"),
    ],
)
def test_a_tear_is_told_by_place_and_reason(whole, tmp_path, change, batch, why):
    data, truth = whole
    ends = _ends_of_batches(data)
    damaged = change(data, ends)
    (tmp_path / "j").write_bytes(damaged)
    rows, reader = read(tmp_path / "j")
    assert rows == truth[: 12 * batch]
    assert (reader.torn.file, reader.torn.batch) == ("j", batch)
    assert reader.torn.why.startswith(why)
    ends[-1] = len(data) - len(END_OF_STREAM)  # after the clean end comes its marker alone
    assert reader.torn.offset == [0, *ends][batch]
    assert str(reader.torn) == f"j: readable up to batch {batch} at byte {reader.torn.offset}; {reader.torn.why}"


def _ends_of_batches(data):
    """Where each batch ends, told by Arrow alone."""
    source = pa.BufferReader(data)
    stream = pa.ipc.open_stream(source)
    ends = []
    while stream.read_next_batch().num_rows:
        ends.append(source.tell())
    return ends


def test_a_batch_of_another_run_does_not_fit_in(tmp_path):
    write(tmp_path / "a", start_utc="one day")
    write(tmp_path / "b", start_utc="two days")  # as long a text, so that the places agree
    ours, theirs = (tmp_path / "a").read_bytes(), (tmp_path / "b").read_bytes()
    place, end = _ends_of_batches(ours)[2:4]
    their_place, their_end = _ends_of_batches(theirs)[2:4]
    (tmp_path / "c").write_bytes(ours[:place] + theirs[their_place:their_end] + ours[end:])
    _, reader = read(tmp_path / "c")
    assert (reader.torn.batch, reader.torn.why) == (3, "the batch does not have its checksum")


def test_channels_are_joined_over_segments_by_name(tmp_path):
    first = write(tmp_path / "1", seconds=3)
    swapped = (THREE[1], THREE[0], Channel("pack.soc", "1", "computed"))
    second = write(tmp_path / "2", first=100, seconds=2, channels=swapped)
    readers = [JournalReader(tmp_path / "1"), JournalReader(tmp_path / "2")]
    got = collect(readers, [THREE[0].name, "pack.soc", "set.mains"])
    expected = [row for row in first if row[0] == 0] + [row for row in second if row[0] == 1]
    assert got[THREE[0].name].time_s.tolist() == [row[1] for row in expected]
    assert got[THREE[0].name].value.tolist() == [row[2] for row in expected]
    assert got[THREE[0].name].flag.tolist() == [row[3] for row in expected]
    assert got["pack.soc"].value.tolist() == [row[2] for row in second if row[0] == 2]
    assert len(got["set.mains"]) == 0
    assert [reader.torn for reader in readers] == [None, None]


def test_a_torn_segment_does_not_hide_the_next(tmp_path):
    first = write(tmp_path / "1", seconds=3)
    write(tmp_path / "2", first=100, seconds=2)
    (tmp_path / "1").write_bytes((tmp_path / "1").read_bytes()[:-900])
    readers = [JournalReader(tmp_path / "1"), JournalReader(tmp_path / "2")]
    times = collect(readers, [THREE[0].name])[THREE[0].name].time_s
    assert readers[0].torn.batch == 2
    assert times.tolist() == [row[1] for row in first if row[0] == 0][:8] + [100 + k / 4 for k in range(8)]


def test_chunks_hold_the_rows_of_their_batches(tmp_path):
    truth = write(tmp_path / "j")
    parts = list(chunks(JournalReader(tmp_path / "j"), 40))
    assert [len(part) for part in parts] == [48, 48, 48]  # whole batches of 12
    assert [row for part in parts for row in rows_of(part)] == truth


def test_a_journal_that_still_grows_is_read_as_far_as_it_is(tmp_path):
    journal = Journal(tmp_path / "j", THREE, start_utc="x")
    for second in range(5):
        journal.append("node.voltage", float(second), 1.0)
    while read(tmp_path / "j")[1].batches < 4:
        pass  # the writer thread needs its moment; batch 4 waits for its second to end
    rows, reader = read(tmp_path / "j")
    assert len(rows) == 4
    assert reader.torn.why == "it ends without a clean end"
    journal.close()
    assert read(tmp_path / "j")[1].torn is None
