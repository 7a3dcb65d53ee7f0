"""Files that survive a power cut: written beside their place, synced, then renamed into it; and read-only once done."""

import hashlib
import os
import stat
from contextlib import suppress
from io import RawIOBase
from pathlib import Path


class RecordError(Exception):
    """A record cannot be written, sealed, read or judged; the message says whose fault it is and what to do."""


def write_all(file: RawIOBase, data: bytes) -> None:
    """Write every byte of `data` to an unbuffered file, which may take them in parts.

    Raises OSError (disk full, file too large, device gone).
    """
    rest = memoryview(data)
    while rest:
        written = file.write(rest)
        rest = rest[written or 0 :]


def partial_of(path: Path) -> Path:
    """The name under which a file is written before it is complete."""
    return path.with_name(path.name + ".partial")


def write_new(path: Path, data: bytes) -> None:
    """Write a file that must not exist yet; it appears whole or not at all.

    Raises RecordError if it exists (nothing in a record is overwritten), OSError if the disk refuses.
    """
    if path.exists():
        raise RecordError(f"{path}: exists already, and nothing in a record is ever overwritten; write to a new name")
    replace(path, data)


def replace(path: Path, data: bytes) -> None:
    """Write a file, in place of an older one if there is one; it appears whole or not at all. Raises OSError."""
    partial = partial_of(path)
    try:
        partial.write_bytes(data)
        promote(path)
    except OSError:
        with suppress(OSError):
            partial.unlink(missing_ok=True)
        raise


def promote(path: Path) -> None:
    """Sync the finished partial file of `path` and give it its name. Raises OSError."""
    partial = partial_of(path)
    with partial.open("rb+") as file:  # writable, because Windows syncs no other
        os.fsync(file.fileno())
    os.replace(partial, path)
    sync_folder(path.parent)


def sync_folder(folder: Path) -> None:
    """Make new names in a folder survive a power cut, where the system can: Windows opens no folder for that."""
    if os.name == "nt":
        return
    with suppress(OSError):  # some network file systems refuse to sync a folder; the files themselves are synced
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


def make_read_only(top: Path) -> None:
    """Take the write permission from every file under `top`, and from the folders where the system has such.

    A file system without permissions is let be: these bits stop accidents, the hashes of the manifest prove.
    """
    for folder, _, names in os.walk(top, topdown=False):
        for name in names:
            with suppress(OSError):
                os.chmod(os.path.join(folder, name), stat.S_IRUSR | stat.S_IRGRP | stat.S_IROTH)
        if os.name != "nt":
            with suppress(OSError):
                os.chmod(folder, 0o555)


def sha256_of(path: Path) -> str:
    """SHA-256 of a file's bytes, as 64 hexadecimal digits (FIPS 180-4). Raises OSError."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
