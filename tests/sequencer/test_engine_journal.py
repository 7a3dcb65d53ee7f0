"""The journal as it is written: cheap, the same bytes for the same samples, and unharmed by what the disk does."""

import errno
import os
import subprocess
import sys
import threading
import time
from itertools import count
from pathlib import Path

import numpy as np
import pyarrow as pa
import pytest

import sequencer
from sequencer.engine import journal as journal_module
from sequencer.engine.channels import CHANNELS, SampleFlag
from sequencer.engine.durable import RecordError
from sequencer.engine.journal import LARGEST_BATCH_ROWS, QUEUE_BATCHES, Journal
from sequencer.engine.journal_reader import JournalReader

HOME = Path(sequencer.__file__).parent.parent
START = "2026-01-01T00:00:00Z"


def write(path, samples, **more):
    journal = Journal(path, CHANNELS, start_utc=START, **more)
    for sample in samples:
        journal.append(*sample)
    journal.close()
    return journal


def scans(number, period_s=0.1):
    return [(c.name, k * period_s, k + i / 16) for k in range(number) for i, c in enumerate(CHANNELS)]


def read(path):
    reader = JournalReader(path)
    rows = [
        (CHANNELS[index].name, time_s, value, flag)
        for batch in reader
        for index, time_s, value, flag in zip(
            batch.channel.tolist(), batch.time_s.tolist(), batch.value.tolist(), batch.flag.tolist(), strict=True
        )
    ]
    return rows, reader


def test_everything_appended_is_read_in_order(tmp_path):
    samples = [
        ("node.voltage", 0.0, 15.1, 0),
        ("supply.mode", 0.0, 1, SampleFlag.STALE),
        ("node.voltage", 1.5, -2.0, 4),
    ]
    write(tmp_path / "j", samples)
    rows, reader = read(tmp_path / "j")
    assert rows == samples
    assert reader.torn is None
    assert (reader.header.start_utc, reader.header.channels) == (START, CHANNELS)


def test_values_that_are_no_numbers_are_kept_bit_for_bit(tmp_path):
    # SCPI-1999 volume 1, 7.2.1.4 and 7.2.1.5: 9.9E37 is infinity, 9.91E37 not a number; both may reach a channel.
    values = [float("nan"), float("inf"), -float("inf"), 9.9e37, 9.91e37, 5e-324, -0.0]
    write(tmp_path / "j", [("node.voltage", float(k), value, 2) for k, value in enumerate(values)])
    rows, _ = read(tmp_path / "j")
    assert np.array([row[2] for row in rows]).tobytes() == np.array(values).tobytes()


def test_the_channels_are_known_before_the_first_batch(tmp_path):
    journal = Journal(tmp_path / "j", CHANNELS, start_utc=START)
    rows, reader = read(tmp_path / "j")
    assert (rows, reader.table) == ([], CHANNELS)
    assert reader.torn.why == "it ends without a clean end"
    journal.close()
    assert read(tmp_path / "j")[1].torn is None


def test_any_arrow_reader_reads_it(tmp_path):
    write(tmp_path / "j", scans(25))
    table = pa.ipc.open_stream(tmp_path.joinpath("j").read_bytes()).read_all()
    assert table.column_names == ["channel", "time", "value", "flag"]
    assert table.column("value").to_pylist() == [value for _, _, value in scans(25)]


def test_same_samples_same_bytes_whatever_the_wall_time(tmp_path):
    ticks = count()
    write(tmp_path / "a", scans(40))
    write(tmp_path / "b", scans(40), wall_s=lambda: next(ticks) * 1e-3)
    journal = Journal(tmp_path / "c", CHANNELS, start_utc=START)
    for number, sample in enumerate(scans(40)):
        journal.append(*sample)
        if number % 150 == 0:
            time.sleep(0.01)
    journal.close()
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes() == (tmp_path / "c").read_bytes()


def test_a_batch_ends_where_the_whole_second_changes(tmp_path):
    write(tmp_path / "j", [("node.voltage", t_s, 1.0) for t_s in (0.0, 0.9, 1.0, 1.95, 2.05, 1.99, 2.9, 7.0)])
    assert [batch.time_s.tolist() for batch in JournalReader(tmp_path / "j")] == [
        [0.0, 0.9], [1.0, 1.95], [2.05, 1.99, 2.9], [7.0]
    ]  # fmt: skip


def test_a_clock_that_stands_still_grows_no_batch_without_end(tmp_path):
    write(tmp_path / "j", [("node.voltage", 1.0, 1.0)] * (2 * LARGEST_BATCH_ROWS + 5))
    assert [len(batch) for batch in JournalReader(tmp_path / "j")] == [LARGEST_BATCH_ROWS] * 2 + [5]


@pytest.mark.parametrize(
    ("sample", "why"),
    [
        (("node.volts", 1.0, 1.0), 'no channel "node.volts" in this journal; it has node.voltage, '),
        (("node.voltage", 1.0, None), "node.voltage cannot take value None at time 1.0 with flag 0"),
        (("node.voltage", 1.0, "1"), "cannot take value '1'"),
        (("node.voltage", 1.0, 1.0, 256), "with flag 256; expected two numbers and a flag from 0 to 255"),
    ],
)
def test_a_sample_that_cannot_be_stored_is_refused_and_harms_no_other(tmp_path, sample, why):
    journal = Journal(tmp_path / "j", CHANNELS, start_utc=START)
    journal.append("node.voltage", 0.5, 1.0)
    with pytest.raises(RecordError, match="(?s).*" + why.replace("(", r"\(")):
        journal.append(*sample)
    journal.append("node.voltage", 1.5, 2.0)
    journal.close()
    assert read(tmp_path / "j")[0] == [("node.voltage", 0.5, 1.0, 0), ("node.voltage", 1.5, 2.0, 0)]


def test_an_existing_file_is_never_written_over(tmp_path):
    write(tmp_path / "j", scans(1))
    before = (tmp_path / "j").read_bytes()
    with pytest.raises(FileExistsError):
        Journal(tmp_path / "j", CHANNELS, start_utc=START)
    assert (tmp_path / "j").read_bytes() == before


def test_the_file_is_synced_within_a_second_of_wall_time(tmp_path, monkeypatch):
    syncs, wall = [], [0.0]
    original = os.fsync
    monkeypatch.setattr(journal_module.os, "fsync", lambda number: (syncs.append(wall[0]), original(number))[1])
    beats = threading.Semaphore(0)
    journal = Journal(tmp_path / "j", CHANNELS, start_utc=START, wall_s=lambda: wall[0], beat=beats.release)
    for second in range(5):
        wall[0] = float(second)
        for sample in scans(10):
            journal.append(sample[0], second + sample[1], sample[2])
        if second:
            assert beats.acquire(timeout=10)  # the batch of the second before is written and synced
    journal.close()
    assert {1.0, 2.0, 3.0, 4.0} <= set(syncs)


def test_a_slow_disk_slows_the_loop_and_loses_nothing(tmp_path, monkeypatch):
    gate = threading.Event()
    original = os.fsync
    journal = Journal(tmp_path / "j", CHANNELS, start_utc=START)
    monkeypatch.setattr(journal_module.os, "fsync", lambda number: (gate.wait(30), original(number))[1])
    samples = [("node.voltage", float(second), 1.0, 0) for second in range(3 * QUEUE_BATCHES)]
    appended = []

    def loop():
        for sample in samples:
            journal.append(*sample)
            appended.append(sample)

    thread = threading.Thread(target=loop)
    thread.start()
    thread.join(timeout=0.4)
    assert thread.is_alive()
    assert len(appended) <= QUEUE_BATCHES + 3  # one in the writer's hands, one being cut, one being filled
    gate.set()
    thread.join(timeout=30)
    journal.close()
    assert read(tmp_path / "j")[0] == samples


def test_a_full_disk_is_reported_and_what_was_written_stays(tmp_path, monkeypatch):
    original, left = journal_module.write_all, [5000]

    def limited(file, data):
        original(file, data[: left[0]])
        left[0] -= len(data)
        if left[0] < 0:
            left[0] = 0
            raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(journal_module, "write_all", limited)
    journal = write(tmp_path / "j", scans(400))
    assert journal.failure.errno == errno.ENOSPC
    rows, reader = read(tmp_path / "j")
    assert [row[:3] for row in rows] == scans(400)[: len(rows)]
    assert reader.batches >= 1
    assert reader.torn.why == "it ends without a clean end"  # half a batch was taken back


def test_a_fault_of_the_writer_itself_is_reported_too(tmp_path, monkeypatch):
    monkeypatch.setattr(journal_module, "checksum", lambda columns, crc: 1 / 0)
    assert isinstance(write(tmp_path / "j", scans(30)).failure, ZeroDivisionError)


LIMITED = """
import pathlib, resource, sys
from sequencer.engine.channels import CHANNELS
from sequencer.engine.journal import Journal
journal = Journal(pathlib.Path(sys.argv[1]), CHANNELS, start_utc="x")
resource.setrlimit(resource.RLIMIT_FSIZE, (20000, 20000))
scan = 0
while journal.failure is None and scan < 100000:
    for index, channel in enumerate(CHANNELS):
        journal.append(channel.name, scan * 0.1, scan + index / 16)
    scan += 1
journal.close()
print(journal.failure.errno, scan)
"""


@pytest.mark.skipif(os.name == "nt", reason="limits on file sizes are a POSIX call")
def test_the_system_refusing_more_bytes_ends_no_process(tmp_path):
    done = subprocess.run(
        [sys.executable, "-c", LIMITED, str(tmp_path / "j")], capture_output=True, text=True, timeout=60, cwd=HOME
    )
    assert done.returncode == 0, done.stderr
    code, scan = map(int, done.stdout.split())
    assert code == errno.EFBIG
    rows, reader = read(tmp_path / "j")
    assert reader.batches >= 2
    assert [row[:3] for row in rows] == scans(scan)[: len(rows)]
    assert 15000 < (tmp_path / "j").stat().st_size <= 20000


BUSY = """
import pathlib, sys
from sequencer.engine.channels import CHANNELS
from sequencer.engine.journal import Journal
announce = lambda: print("batch", flush=True)
journal = Journal(pathlib.Path(sys.argv[1]), CHANNELS, start_utc="x", beat=announce)
scan = 0
while True:
    for index, channel in enumerate(CHANNELS):
        journal.append(channel.name, scan * 0.1, scan + index / 16)
    scan += 1
"""


@pytest.mark.parametrize("batches", [1, 7, 40])
def test_every_batch_announced_before_a_kill_is_readable(tmp_path, batches):
    command = [sys.executable, "-c", BUSY, str(tmp_path / "j")]
    with subprocess.Popen(command, stdout=subprocess.PIPE, cwd=HOME) as writer:
        announced = sum(1 for _ in zip(range(batches), writer.stdout, strict=False))
        writer.kill()
        announced += sum(1 for line in writer.stdout if line == b"batch\n")
    rows, reader = read(tmp_path / "j")
    assert reader.batches >= announced >= batches
    assert [row[:3] for row in rows] == [(n, t, v) for n, t, v in scans(len(rows) // len(CHANNELS))]
    assert reader.torn is not None


def test_appending_costs_the_loop_less_than_two_microseconds(tmp_path):
    journal = Journal(tmp_path / "j", CHANNELS, start_utc=START)
    best_s = min(_seconds_for(journal, second) for second in range(20))  # the best: a shared machine disturbs the rest
    journal.close()
    assert best_s / (50 * len(CHANNELS)) < 2e-6


def _seconds_for(journal, second):
    names = [channel.name for channel in CHANNELS]
    start_s = time.perf_counter()
    for _ in range(50):
        for name in names:
            journal.append(name, second + 0.5, 1.25, 0)
    return time.perf_counter() - start_s
