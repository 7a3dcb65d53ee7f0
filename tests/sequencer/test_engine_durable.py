"""Files appear whole or not at all."""

import os
import stat

import pytest

from sequencer.engine import durable
from sequencer.engine.durable import RecordError, make_read_only, replace, sha256_of, write_all, write_new


def test_sha256_of_the_published_example(tmp_path):
    # FIPS 180-4 example "abc" (NIST, "Examples with intermediate values", SHA-256, one-block message).
    (tmp_path / "abc").write_bytes(b"abc")
    assert sha256_of(tmp_path / "abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_a_new_file_never_replaces_an_older_one(tmp_path):
    write_new(tmp_path / "a", b"first")
    with pytest.raises(RecordError, match="exists already, and nothing in a record is ever overwritten"):
        write_new(tmp_path / "a", b"second")
    assert (tmp_path / "a").read_bytes() == b"first"


def test_a_failing_disk_leaves_the_old_file_and_no_half_one(tmp_path, monkeypatch):
    replace(tmp_path / "a", b"first")

    def refuse(_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(durable.os, "fsync", refuse)
    with pytest.raises(OSError, match="No space left"):
        replace(tmp_path / "a", b"second")
    assert [path.name for path in tmp_path.iterdir()] == ["a"]
    assert (tmp_path / "a").read_bytes() == b"first"


class _Hesitant:
    """An unbuffered file that takes at most three bytes a call, as a full disk or a pipe may."""

    def __init__(self) -> None:
        self.taken = b""

    def write(self, data: bytes) -> int:
        self.taken += bytes(data[:3])
        return min(3, len(data))


def test_a_file_that_takes_bytes_in_parts_gets_them_all():
    file = _Hesitant()
    write_all(file, b"0123456789")
    assert file.taken == b"0123456789"


def test_read_only_takes_the_write_bits(tmp_path):
    top = tmp_path / "top"
    (top / "inner").mkdir(parents=True)
    (top / "inner" / "file").write_bytes(b"x")
    make_read_only(top)
    assert not (top / "inner" / "file").stat().st_mode & (stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH)
    if os.name != "nt":  # Windows knows no read-only folder
        assert stat.S_IMODE((top / "inner").stat().st_mode) == 0o555
        assert stat.S_IMODE(top.stat().st_mode) == 0o555
