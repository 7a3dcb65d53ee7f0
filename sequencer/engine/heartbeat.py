"""Whether a record is still being written: a lock that its writer holds, and a file that it touches.

The lock is the better witness: the system drops it with the process, however that ends, and no reused process
number can fake it. Between two machines, or where the file system has no locks, the age of the last touch decides.
"""

import json
import os
import socket
import sys
import tempfile
from contextlib import suppress
from pathlib import Path
from typing import BinaryIO

from sequencer.engine.durable import RecordError

if sys.platform == "win32":
    import msvcrt
else:
    import fcntl

NAME = "heartbeat"
DEAD_AFTER_S = 30.0  # thirty beats; a network file system may show a touch some seconds late
_LOCK_OFFSET = 1 << 20  # Windows locks bytes against reading, so the locked one lies beyond the text


def _lock(file: BinaryIO, *, shared: bool) -> bool | None:
    """Try to lock without waiting: True if it is ours, False if another holds it, None if there are no locks here."""
    try:
        if sys.platform == "win32":
            file.seek(_LOCK_OFFSET)
            msvcrt.locking(file.fileno(), msvcrt.LK_NBLCK, 1)
        else:
            fcntl.flock(file, (fcntl.LOCK_SH if shared else fcntl.LOCK_EX) | fcntl.LOCK_NB)
    except (BlockingIOError, PermissionError):
        return False
    except OSError:
        return None
    return True


def _writer(path: Path) -> tuple[int | None, str | None]:
    """Process number and host that the file names; None for what it does not tell."""
    try:
        told = json.loads(path.read_bytes())
        return int(told["pid"]), str(told["host"])
    except (OSError, ValueError, TypeError, KeyError):
        return None, None


def _beat_is_recent(path: Path) -> bool:
    """Whether the last touch is young by the clock of the file system itself, so that two hosts need not agree."""
    try:
        with tempfile.TemporaryFile(dir=path.parent) as probe:
            now_s = os.fstat(probe.fileno()).st_mtime
        return now_s - path.stat().st_mtime < DEAD_AFTER_S
    except OSError:
        return True  # who cannot tell must not take a running record for a dead one


def is_live(record: Path) -> bool:
    """Whether some process, this one included, is still writing the record in this folder."""
    path = record / "data" / NAME
    try:
        with path.open("rb") as file:
            free = _lock(file, shared=True)
    except OSError:
        return False
    if free is False:
        return True
    if free and _writer(path)[1] == socket.gethostname():
        return False
    return _beat_is_recent(path)


def writer_of(record: Path) -> str:
    """Who writes, or last wrote, the record: one phrase for messages."""
    pid, host = _writer(record / "data" / NAME)
    return f"process {pid} on {host}" if pid is not None else "an unknown process"


class Heartbeat:
    """The writer's own end: holds the lock from `take` to `release`. A child started by fork would inherit it."""

    def __init__(self, path: Path, file: BinaryIO) -> None:
        self._path = path
        self._file = file

    @classmethod
    def take(cls, record: Path) -> "Heartbeat":
        """Become the one writer of a record. Raises RecordError if there is another, OSError if the disk refuses."""
        path = record / "data" / NAME
        if is_live(record):
            raise RecordError(f"{record}: is still being written by {writer_of(record)}; wait for its end or stop it")
        file = path.open("ab+", buffering=0)
        if _lock(file, shared=False) is False:
            file.close()
            raise RecordError(f"{record}: another process has just begun to write this record; leave it to that one")
        file.truncate(0)
        file.write(json.dumps({"pid": os.getpid(), "host": socket.gethostname()}).encode() + b"\n")
        return cls(path, file)

    def beat(self) -> None:
        """Say that the writer lives; about once a second. Never raises: a lost touch harms nothing here."""
        with suppress(OSError):
            os.utime(self._path)

    def release(self, *, remove: bool = False) -> None:
        """Stop writing; the file stays as a dead heartbeat unless removed. May be called again."""
        self._file.close()
        if remove:
            with suppress(OSError):
                self._path.unlink(missing_ok=True)
