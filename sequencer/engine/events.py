"""The events of a record: what was decided and done, one JSON object a line, on disk before the next thing happens."""

import json
import os
from contextlib import suppress
from pathlib import Path
from threading import Lock
from typing import Any

from sequencer.engine.documents import to_json
from sequencer.engine.durable import write_all

NAME = "events.jsonl"


class EventLog:
    """Appends events and syncs each. A full disk raises nothing here: on the way to the safe state nothing may.

    What could not be written is kept and tried again with the next event and at the end; `failure` tells.
    """

    def __init__(self, path: Path) -> None:
        """Open or create the file. Raises OSError."""
        self._file = path.open("ab+", buffering=0)
        self._good_end = self._file.seek(0, os.SEEK_END)
        self.waiting = b"" if self._ends_whole() else b"\n"  # closes the torn line of a crash, for a resumed run
        self._lock = Lock()
        self.failure: OSError | None = None

    def _ends_whole(self) -> bool:
        if self._good_end == 0:
            return True
        self._file.seek(-1, os.SEEK_END)
        return self._file.read(1) == b"\n"

    def append(self, t_s: float, event: str, fields: dict[str, Any]) -> None:
        """Append one event at `t_s` seconds since the start of the run.

        Raises ValueError if a field is called "t" or "event", TypeError for a value without a JSON form.
        """
        if clash := {"t", "event"} & fields.keys():
            raise ValueError(f'event "{event}": no field can be called {min(clash)!r}, each event has that itself')
        line = to_json({"t": t_s, "event": event, **fields}, indent=None)
        with self._lock:
            self.waiting += line
            self._write_waiting()

    def _write_waiting(self) -> None:
        try:
            write_all(self._file, self.waiting)
            os.fsync(self._file.fileno())
        except OSError as error:
            self.failure = self.failure or error
            with suppress(OSError):
                self._file.truncate(self._good_end)  # half a line goes, the whole one is tried again
            return
        self._good_end += len(self.waiting)
        self.waiting = b""

    def close(self) -> None:
        """Write what still waits, and close. May be called again."""
        with self._lock:
            if self._file.closed:
                return
            if self.waiting:
                self._write_waiting()
            self._file.close()


def read_events(path: Path) -> tuple[list[dict[str, Any]], list[str]]:
    """All whole events of a file, and a note in words on each line that is none. A missing file has no events.

    Raises OSError if the file cannot be read.
    """
    data = path.read_bytes() if path.exists() else b""
    lines = data.split(b"\n")  # not splitlines: text may hold other line separators
    notes = [f"{path.name}: the last line ends after {len(lines[-1])} bytes and was left out"] if lines[-1] else []
    events = []
    for number, line in enumerate(lines[:-1], start=1):
        event = _parsed(line)
        if event is None:
            notes.append(f"{path.name}: line {number} is no event and was left out")
        else:
            events.append(event)
    return events, notes


def _parsed(line: bytes) -> dict[str, Any] | None:
    try:
        event = json.loads(line.decode("utf-8"))
    except ValueError:  # of JSON and of UTF-8 alike
        return None
    return event if isinstance(event, dict) and "event" in event and isinstance(event.get("t"), int | float) else None
