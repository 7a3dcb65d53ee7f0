"""Who writes a record, and whether it still does."""

import json
import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

import sequencer
from sequencer.engine import heartbeat
from sequencer.engine.durable import RecordError
from sequencer.engine.heartbeat import Heartbeat, is_live, writer_of

HOME = Path(sequencer.__file__).parent.parent
WRITER = """
import sys, pathlib
from sequencer.engine.heartbeat import Heartbeat
beat = Heartbeat.take(pathlib.Path(sys.argv[1]))
print("taken", flush=True)
sys.stdin.read()
"""


@pytest.fixture
def record(tmp_path):
    (tmp_path / "data").mkdir()
    return tmp_path


def test_a_folder_without_heartbeat_is_not_live(record):
    assert not is_live(record)


def test_live_from_taking_to_release_even_seen_from_the_same_process(record):
    beat = Heartbeat.take(record)
    assert is_live(record)
    with pytest.raises(RecordError, match=f"still being written by process {os.getpid()} on "):
        Heartbeat.take(record)
    beat.release()
    assert not is_live(record)
    assert (record / "data" / "heartbeat").exists()
    Heartbeat.take(record).release(remove=True)
    assert not (record / "data" / "heartbeat").exists()


@pytest.mark.parametrize("end", ["orderly", "killed"])
def test_another_process_is_seen_while_it_lives_and_not_after(record, end):
    command = [sys.executable, "-c", WRITER, str(record)]
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, cwd=HOME) as writer:
        assert writer.stdout.readline().split() == [b"taken"]
        assert is_live(record)
        assert writer_of(record).startswith(f"process {writer.pid} on ")
        if end == "killed":
            writer.kill()
        else:
            writer.stdin.close()
        writer.wait(timeout=20)
        assert not is_live(record)
    if end == "killed" and os.name != "nt":
        assert writer.returncode == -signal.SIGKILL


def test_a_writer_on_another_host_is_judged_by_the_age_of_its_last_touch(record):
    path = record / "data" / "heartbeat"
    path.write_text(json.dumps({"pid": 1, "host": "a host in another room"}))
    assert is_live(record)  # touched just now
    old_s = path.stat().st_mtime - heartbeat.DEAD_AFTER_S - 5
    os.utime(path, (old_s, old_s))
    assert not is_live(record)


def test_a_beat_makes_an_old_file_young(record):
    beat = Heartbeat.take(record)
    path = record / "data" / "heartbeat"
    os.utime(path, (1000, 1000))
    beat.beat()
    assert path.stat().st_mtime > 1_000_000
    beat.release()


def test_without_locks_the_age_decides_even_on_the_same_host(record, monkeypatch):
    monkeypatch.setattr(heartbeat, "_lock", lambda file, shared: None)
    beat = Heartbeat.take(record)
    assert is_live(record)
    os.utime(record / "data" / "heartbeat", (1000, 1000))
    assert not is_live(record)
    beat.release()


@pytest.mark.parametrize("content", [b"", b"{", b'{"pid": "x"}', b"[1]", b"\xff"])
def test_a_damaged_heartbeat_names_nobody_and_stops_nothing(record, content):
    path = record / "data" / "heartbeat"
    path.write_bytes(content)
    assert writer_of(record) == "an unknown process"
    os.utime(path, (1000, 1000))
    assert not is_live(record)
