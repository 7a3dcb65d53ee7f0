"""The record of one run while it is written: a folder with inputs, events and samples, and one writer.

Heavy libraries are reached only when the journal starts, so that naming a record costs a command nothing.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path, PurePosixPath
from typing import TYPE_CHECKING, Any

from sequencer.engine import events
from sequencer.engine.channels import CHANNELS, Channel
from sequencer.engine.durable import RecordError, sync_folder, write_new
from sequencer.engine.heartbeat import Heartbeat

if TYPE_CHECKING:
    from sequencer.engine.journal import Journal

__all__ = ["RecordError", "RecordFolder", "is_record", "journal_segments", "refuse_unless_free"]


def is_record(folder: Path) -> bool:
    """Whether the folder holds a record, sealed or not."""
    data = folder / "data"
    return (data / events.NAME).exists() or (data / "manifest.json").exists() or bool(journal_segments(folder))


def journal_segments(folder: Path) -> list[Path]:
    """The journal's files in the order of their numbers, which is the order of time."""
    found = [path for path in (folder / "data").glob("samples-*.arrows") if _number(path) is not None]
    return sorted(found, key=lambda path: _number(path) or 0)


def _number(path: Path) -> int | None:
    digits = path.stem.removeprefix("samples-")
    return int(digits) if digits.isascii() and digits.isdigit() else None


class RecordFolder:
    """The writer of a record. As a context manager it closes on every way out; sealing is another step."""

    def __init__(self, path: Path, heartbeat: Heartbeat) -> None:
        """Not called directly: see `create` and `reopen`."""
        self.path = path
        self.data = path / "data"
        self._heartbeat = heartbeat
        self._events = events.EventLog(self.data / events.NAME)
        self._journal: Journal | None = None
        sync_folder(self.data)

    @classmethod
    def create(cls, out: Path) -> RecordFolder:
        """Begin a record in a new or empty folder.

        Raises RecordError if the folder holds a record or anything else, or cannot be made.
        """
        refuse_unless_free(out)
        try:
            (out / "data" / "inputs").mkdir(parents=True)
            sync_folder(out.parent)
            sync_folder(out)
            return cls(out, Heartbeat.take(out))
        except OSError as error:
            raise RecordError(f"{out}: the record cannot be begun there ({error}); choose another folder") from error

    @classmethod
    def reopen(cls, folder: Path) -> RecordFolder:
        """Go on with a record that was left unsealed; its next samples go to a new segment.

        Raises RecordError if there is no record, it is sealed, or another process writes it.
        """
        if not is_record(folder):
            raise RecordError(f"{folder}: holds no record to go on with; name the folder that a run wrote")
        if (folder / "data" / "manifest.json").exists():
            raise RecordError(f"{folder}: the record is sealed and cannot go on; begin a new one")
        try:
            return cls(folder, Heartbeat.take(folder))
        except OSError as error:
            raise RecordError(f"{folder}: cannot be written ({error}); look at the disk and its rights") from error

    @property
    def failure(self) -> Exception | None:
        """Why samples or events do not reach the disk, or None; the loop looks at it in each scan."""
        return (self._journal.failure if self._journal else None) or self._events.failure

    @property
    def unwritten_events(self) -> bytes:
        """The lines of events that the disk did not take so far."""
        return self._events.waiting

    def add_input(self, name: str, content: bytes) -> None:
        """Keep a file that the run read, byte for byte, as data/inputs/`name` ("dialects/scpi-meter.yaml").

        Raises RecordError for a name that leads out of the folder or is taken by other bytes, OSError if the disk
        refuses.
        """
        path = self.data / "inputs" / _inside(name)
        if path.is_file() and path.read_bytes() == content:
            return
        path.parent.mkdir(parents=True, exist_ok=True)
        write_new(path, content)

    def event(self, t_s: float, event: str, /, **fields: Any) -> None:
        """Append one event at `t_s` seconds since the start; on disk on return, unless `failure` says otherwise.

        Raises ValueError for a field called "t" or "event", TypeError for a value without a JSON form; never OSError.
        """
        self._events.append(t_s, event, fields)

    def start_journal(
        self, *, start_utc: str, channels: Sequence[Channel] = CHANNELS, wall_s: Callable[[], float] | None = None
    ) -> Journal:
        """Begin the next segment of samples; `start_utc` and `wall_s` as `Journal` takes them. Raises OSError."""
        from sequencer.engine.journal import Journal

        if self._journal is not None:
            self._journal.close()
        last = max((_number(path) or 0 for path in journal_segments(self.path)), default=0)
        path = self.data / f"samples-{last + 1}.arrows"
        self._journal = Journal(path, channels, start_utc=start_utc, wall_s=wall_s, beat=self._heartbeat.beat)
        return self._journal

    def beat(self) -> None:
        """Say that the writer lives, while no journal runs."""
        self._heartbeat.beat()

    def close(self) -> None:
        """Close journal and events, and stop being the writer. May be called again; the record is not sealed yet."""
        if self._journal is not None:
            self._journal.close()
        self._events.close()
        self._heartbeat.release()

    def __enter__(self) -> RecordFolder:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def refuse_unless_free(out: Path) -> None:
    """Raise RecordError unless a record can begin in this folder: it is new or empty."""
    try:
        if not out.exists():
            return
    except OSError as reason:  # a name that no folder can have
        raise RecordError(f"{out}: {reason.strerror}; name another folder for the record") from None
    if not out.is_dir():
        raise RecordError(f"{out}: is a file; a record needs a new or empty folder, so name another")
    if is_record(out):
        raise RecordError(f"{out}: holds a record already, and no record is ever overwritten; name a new folder")
    if any(out.iterdir()):
        raise RecordError(f"{out}: the folder is not empty; a record needs a new or empty one, so name another")


def _inside(name: str) -> PurePosixPath:
    path = PurePosixPath(name)
    leads_out = path.is_absolute() or ".." in path.parts or any(sign in name for sign in "\\:\0")
    if not path.name or leads_out or name.encode(errors="replace").decode() != name:
        raise RecordError(f"input {name!r}: expected a name inside the record, such as dialects/scpi-meter.yaml")
    return path
