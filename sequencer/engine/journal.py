"""The journal: every sample of a run, appended by the scan loop and on disk about a second later.

Batches are cut by the samples' own time, never by the wall's, so that the same samples give the same bytes. One
thread serialises, writes and syncs; the queue to it is bounded, so a slow disk slows the loop and memory stays flat.
"""

import io
import math
import os
from array import array
from collections.abc import Callable, Sequence
from contextlib import suppress
from pathlib import Path
from queue import Empty, Queue
from threading import Thread
from typing import Any

import pyarrow as pa

from sequencer.engine.channels import Channel
from sequencer.engine.durable import RecordError, sync_folder, write_all
from sequencer.engine.journal_format import COLUMNS, END_OF_STREAM, FIELDS, Header, checksum, schema_of

QUEUE_BATCHES = 64
LARGEST_BATCH_ROWS = 16_384  # a clock that stands still or runs back must not grow the batch without end
SYNC_EVERY_S = 0.5
IDLE_S = 1.0

_Columns = tuple["array[int]", "array[float]", "array[float]", "array[int]"]


def _no_beat() -> None:
    """For a journal without a record around it."""


class Journal:
    """Appends samples to one segment of a record's journal."""

    def __init__(
        self,
        path: Path,
        channels: Sequence[Channel],
        *,
        start_utc: str,
        wall_s: Callable[[], float] | None = None,
        beat: Callable[[], None] = _no_beat,
    ) -> None:
        """Create the file and start its writer.

        start_utc: ISO 8601 text of the run's start. wall_s: wall seconds from anywhere; with it the file is synced at
        least twice a wall second, without it after each batch. beat: called by the writer about once a wall second.
        Raises OSError if the file exists or the disk refuses.
        """
        self.path = path
        self._index = {channel.name: index for index, channel in enumerate(channels)}
        self._cut_at_s = -math.inf
        self._new_batch()
        self._queue: Queue[_Columns | None] = Queue(QUEUE_BATCHES)
        self._writer = _Writer(path, Header(tuple(channels), start_utc), self._queue, wall_s=wall_s, beat=beat)
        self._writer.start()
        self._closed = False

    @property
    def failure(self) -> Exception | None:
        """Why nothing more reaches the disk, or None. The loop looks at each scan; appending never raises for it."""
        return self._writer.failure

    def append(self, channel_name: str, time_s: float, value: float, flag: int = 0) -> None:
        """Append one sample: `time_s` since the start of the run, `value` in the channel's unit, flag of SampleFlag.

        Waits if the disk is many seconds behind. Raises RecordError for a channel or a value that cannot be stored.
        """
        if time_s >= self._cut_at_s or len(self._flags) >= LARGEST_BATCH_ROWS:
            self._cut(time_s)
        try:
            self._channels.append(self._index[channel_name])
            self._times.append(time_s)
            self._values.append(value)
            self._flags.append(flag)
        except (KeyError, TypeError, OverflowError) as error:
            self._drop_half_a_row()
            raise RecordError(self._refusal(channel_name, time_s, value, flag)) from error

    def _refusal(self, channel_name: str, time_s: object, value: object, flag: object) -> str:
        if channel_name not in self._index:
            return f'{self.path}: no channel "{channel_name}" in this journal; it has {", ".join(self._index)}'
        return (
            f"{self.path}: {channel_name} cannot take value {value!r} at time {time_s!r} with flag {flag!r}; "
            "expected two numbers and a flag from 0 to 255"
        )

    def _drop_half_a_row(self) -> None:
        rows = len(self._flags)  # appended last
        del self._channels[rows:], self._times[rows:], self._values[rows:]

    def _new_batch(self) -> None:
        self._channels, self._times, self._values, self._flags = array("h"), array("d"), array("d"), array("B")

    def _cut(self, time_s: float) -> None:
        if self._flags:
            self._queue.put((self._channels, self._times, self._values, self._flags))
            self._new_batch()
        if math.isfinite(time_s):
            self._cut_at_s = max(self._cut_at_s, math.floor(time_s) + 1.0)

    def close(self) -> None:
        """Write what is left and the clean end, sync, close. Waits for the disk. May be called again."""
        if self._closed:
            return
        self._closed = True
        self._cut(math.nan)
        self._queue.put(None)
        self._writer.join()


def _head_of(schema: Any) -> bytes:
    """The bytes before the first batch. Arrow writes them with that batch, a second too late for a reader of ours."""
    buffer = io.BytesIO()
    pa.ipc.new_stream(buffer, schema).close()
    return buffer.getvalue().removesuffix(END_OF_STREAM)


class _Writer(Thread):
    """Takes batches from the queue to the disk. After a failure it goes on taking, so that the loop never hangs."""

    def __init__(
        self,
        path: Path,
        header: Header,
        queue: "Queue[_Columns | None]",
        *,
        wall_s: Callable[[], float] | None,
        beat: Callable[[], None],
    ) -> None:
        super().__init__(name=f"journal {path.name}", daemon=True)  # a crash elsewhere must be able to end the process
        self.failure: Exception | None = None
        self._queue = queue
        self._wall_s = wall_s or (lambda: math.inf)
        self._beat = beat
        self._file = path.open("xb", buffering=0)
        schema, self._crc = schema_of(header)
        self._head = _head_of(schema)
        self._buffer = io.BytesIO()
        self._stream = pa.ipc.new_stream(self._buffer, schema)
        self._number = 0
        self._synced_at_s = -math.inf
        self._unsynced = True
        try:
            write_all(self._file, self._head)
            self._good_end = len(self._head)
        except OSError:
            self._file.close()
            raise
        sync_folder(path.parent)

    def run(self) -> None:
        """Until the end is asked for: write each batch, sync in time, beat."""
        while True:
            try:
                columns = self._queue.get(timeout=IDLE_S)
            except Empty:
                self._guarded(self._idle)
                continue
            if columns is None:
                break
            self._guarded(self._take, columns)
        self._guarded(self._end)
        self._file.close()

    def _guarded(self, step: Callable[..., None], *arguments: _Columns) -> None:
        if self.failure is not None:
            return
        try:
            step(*arguments)
        except Exception as error:  # whatever it is, the loop must learn of it and the thread must go on taking
            self.failure = error

    def _take(self, columns: _Columns) -> None:
        self._write_batch(columns, {})
        now_s = self._wall_s()
        if now_s - self._synced_at_s >= SYNC_EVERY_S or now_s == math.inf:
            self._sync()
            self._synced_at_s = now_s
            self._beat()

    def _idle(self) -> None:
        self._sync()
        self._beat()

    def _end(self) -> None:
        self._write_batch((array("h"), array("d"), array("d"), array("B")), {"end": "clean"})
        self._stream.close()
        self._write_buffer()
        self._sync()

    def _write_batch(self, columns: _Columns, more: dict[str, str]) -> None:
        self._crc = checksum(columns, self._crc)
        rows = len(columns[0])
        arrays = [
            pa.Array.from_buffers(kind, rows, [None, pa.py_buffer(column)])
            for column, (_, kind, _) in zip(columns, COLUMNS, strict=True)
        ]
        batch = pa.RecordBatch.from_arrays(arrays, schema=FIELDS)
        self._stream.write_batch(batch, custom_metadata={"n": str(self._number), "crc": f"{self._crc:08x}", **more})
        self._number += 1
        self._write_buffer()

    def _write_buffer(self) -> None:
        data = self._buffer.getvalue().removeprefix(self._head)
        try:
            write_all(self._file, data)
        except OSError:
            with suppress(OSError):  # half a batch serves nobody; its room may take the last events of the run
                self._file.truncate(self._good_end)
            raise
        self._good_end += len(data)
        self._buffer.seek(0)
        self._buffer.truncate()
        self._unsynced = True

    def _sync(self) -> None:
        if self._unsynced:
            os.fsync(self._file.fileno())
            self._unsynced = False
