"""The sealed samples: row by row what the journal holds, and read one channel at a time."""

import errno

import numpy as np
import pyarrow.parquet as pq
import pytest

from sequencer.engine import sealed_samples
from sequencer.engine.channels import Channel
from sequencer.engine.durable import RecordError
from sequencer.engine.journal import Journal
from sequencer.engine.journal_reader import JournalReader, collect
from sequencer.engine.sealed_samples import SealedSamples, write_samples

NAMES = ["node.voltage", "charger.current", "load.current", "set.mains", "never.sampled"]
CHANNELS = tuple(Channel(name, "1", "measured") for name in NAMES)


def segment(path, first_s=0, scans=200):
    journal = Journal(path, CHANNELS, start_utc="x")
    draw = np.random.default_rng(scans)
    for scan in range(scans):
        for name in NAMES[:-1]:  # the last channel stays without samples
            value = float("nan") if scan % 17 == 0 else float(draw.normal())
            journal.append(name, first_s + scan * 0.1, value, scan % 3)
    journal.close()
    return path


@pytest.fixture
def segments(tmp_path):
    return [segment(tmp_path / "samples-1.arrows"), segment(tmp_path / "samples-2.arrows", first_s=1000, scans=30)]


@pytest.mark.parametrize("stretch_rows", [1, 500, 10_000])
def test_every_channel_is_bit_for_bit_the_journals(segments, tmp_path, monkeypatch, stretch_rows):
    monkeypatch.setattr(sealed_samples, "STRETCH_ROWS", stretch_rows)
    readers = write_samples(segments, tmp_path / "s.parquet")
    assert [(reader.rows, reader.torn) for reader in readers] == [(200 * 4, None), (30 * 4, None)]
    truth = collect([JournalReader(path) for path in segments], NAMES)
    with SealedSamples(tmp_path / "s.parquet") as sealed:
        assert sealed.channels == CHANNELS
        for name in NAMES:
            assert sealed.series(name).same_bits(truth[name])
        assert len(sealed.series(NAMES[-1])) == 0


def test_a_channel_is_read_without_the_others(segments, tmp_path, monkeypatch):
    write_samples(segments, tmp_path / "s.parquet")
    read = []
    original = SealedSamples.group
    monkeypatch.setattr(SealedSamples, "group", lambda self, group: (read.append(group), original(self, group))[1])
    with SealedSamples(tmp_path / "s.parquet") as sealed:
        sealed.series("charger.current")
        assert [sealed.channel_of(group) for group in read] == ["charger.current"] * 2  # one a segment
        assert sealed.groups == 2 * 4


def test_any_parquet_reader_reads_it(segments, tmp_path):
    write_samples(segments, tmp_path / "s.parquet")
    table = pq.read_table(tmp_path / "s.parquet", filters=[("channel", "=", "node.voltage")])
    truth = collect([JournalReader(path) for path in segments], ["node.voltage"])["node.voltage"]
    assert table.column("time").to_numpy().tolist() == truth.time_s.tolist()
    assert pq.ParquetFile(tmp_path / "s.parquet").metadata.row_group(0).column(2).compression == "ZSTD"


def test_same_journal_same_bytes(segments, tmp_path):
    write_samples(segments, tmp_path / "a.parquet")
    write_samples(segments, tmp_path / "b.parquet")
    assert (tmp_path / "a.parquet").read_bytes() == (tmp_path / "b.parquet").read_bytes()


def test_no_segments_give_a_file_without_samples(tmp_path):
    write_samples([], tmp_path / "s.parquet")
    with SealedSamples(tmp_path / "s.parquet") as sealed:
        assert (sealed.channels, sealed.groups) == ((), 0)


def test_what_a_failing_disk_wrote_wrongly_is_found_before_it_counts(segments, tmp_path, monkeypatch):
    original = sealed_samples._table

    def one_bit_off(name, series, schema):
        if name == "load.current":
            series.value[-1] = np.nextafter(series.value[-1], np.inf)
        return original(name, series, schema)

    monkeypatch.setattr(sealed_samples, "_table", one_bit_off)
    with pytest.raises(RecordError, match=r"load\.current was not written as the journal has it; the disk may be"):
        write_samples(segments, tmp_path / "s.parquet")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["samples-1.arrows", "samples-2.arrows"]


@pytest.mark.parametrize("spoil", [lambda groups: groups[:-1], lambda groups: [*groups, groups[0]]])
def test_rows_too_few_or_too_many_are_found(segments, tmp_path, monkeypatch, spoil):
    original = sealed_samples._groups
    spoilt = []

    def first_time_wrong(readers):
        groups = list(original(readers))
        spoilt.append(1)
        return iter(spoil(groups) if len(spoilt) == 1 else groups)

    monkeypatch.setattr(sealed_samples, "_groups", first_time_wrong)
    with pytest.raises(RecordError, match="the disk may be failing"):
        write_samples(segments, tmp_path / "s.parquet")


def test_a_full_disk_leaves_no_half_file(segments, tmp_path, monkeypatch):
    def full(path):
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(sealed_samples, "promote", full)
    with pytest.raises(OSError, match="No space left"):
        write_samples(segments, tmp_path / "s.parquet")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["samples-1.arrows", "samples-2.arrows"]


def test_damage_to_the_file_never_gives_wrong_samples(segments, tmp_path):
    write_samples(segments, tmp_path / "s.parquet")
    data = (tmp_path / "s.parquet").read_bytes()
    truth = collect([JournalReader(path) for path in segments], ["node.voltage"])["node.voltage"]
    draw = np.random.default_rng(7)
    refused = 0
    for _ in range(100):
        damaged = bytearray(data)
        damaged[draw.integers(4, len(data) // 4)] ^= 1 << draw.integers(0, 8)  # the pages of the first channel
        (tmp_path / "d.parquet").write_bytes(damaged)
        try:
            with SealedSamples(tmp_path / "d.parquet") as sealed:
                read = sealed.series("node.voltage")
        except RecordError:
            refused += 1
        else:
            assert read.same_bits(truth)
    assert refused > 30


@pytest.mark.parametrize("content", [b"", b"PAR1", b"x" * 5000])
def test_what_is_no_such_file_is_refused_in_words(tmp_path, content):
    (tmp_path / "s.parquet").write_bytes(content)
    with pytest.raises(RecordError, match="the sealed samples cannot be read"):
        SealedSamples(tmp_path / "s.parquet")
