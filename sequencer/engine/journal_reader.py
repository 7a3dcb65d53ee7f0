"""Reading a journal: batch after batch, up to the first one that is short, wrong or of zeros."""

from collections.abc import Generator, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa

from sequencer.engine.channels import Channel
from sequencer.engine.journal_format import COLUMNS, END_OF_STREAM, Header, checksum, header_of
from sequencer.engine.series import Rows, Series, joined, joined_rows

CHUNK_ROWS = 200_000

# What Arrow raises on damaged bytes; its own classes derive from these or from ArrowException.
_DAMAGE = (pa.ArrowException, OSError, ValueError, KeyError, TypeError, MemoryError, OverflowError)


@dataclass(frozen=True)
class Torn:
    """Where a journal stops being readable. batch: number from 0; offset: bytes from the start of the file."""

    file: str
    batch: int
    offset: int
    why: str

    def __str__(self) -> str:
        return f"{self.file}: readable up to batch {self.batch} at byte {self.offset}; {self.why}"


class _Wrong(Exception):
    """A batch that Arrow reads but the journal's own rules refuse."""


class JournalReader:
    """One segment. Iterate once, to the end; then `torn`, `batches` and `rows` tell what was found."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.header: Header | None = None
        self.torn: Torn | None = None
        self.batches = 0
        self.rows = 0
        self.last_time_s = 0.0

    @property
    def table(self) -> tuple[Channel, ...]:
        """The segment's channels in the order of their index; none before the header was read."""
        return self.header.channels if self.header else ()

    def __iter__(self) -> Generator[Rows, None, None]:
        """Each whole batch, checked; never a value that was not written. Raises OSError if the file is not there."""
        size = self.path.stat().st_size
        if size == 0:
            self._tear(0, "the file is empty")
            return
        with pa.memory_map(str(self.path)) as source:  # mapped: a damaged length finds an end and takes no memory
            yield from self._read(source, size)

    def _tear(self, offset: int, why: str) -> None:
        self.torn = Torn(self.path.name, self.batches, offset, why)

    def _read(self, source: Any, size: int) -> Generator[Rows, None, None]:
        try:
            stream = pa.ipc.open_stream(source)
            self.header, crc = header_of(stream.schema)
        except _DAMAGE as error:
            self._tear(0, self._zeros_or(0, size, f"no header could be read ({_first_line(error)})"))
            return
        while True:
            offset = source.tell()
            try:
                batch, metadata = stream.read_next_batch_with_custom_metadata()
                rows, crc, clean = self._checked(batch, metadata, crc)
            except StopIteration:
                self._tear(offset, self._zeros_or(offset, size, "it ends without a clean end"))
                return
            except _Wrong as error:
                self._tear(offset, str(error))
                return
            except _DAMAGE as error:
                self._tear(offset, self._zeros_or(offset, size, f"the batch is cut or damaged ({_first_line(error)})"))
                return
            if clean:
                self._check_end(source.tell())
                return
            self._count(rows)
            yield rows

    def _checked(self, batch: Any, metadata: Any, crc: int) -> tuple[Rows, int, bool]:
        """The batch's rows, the checksum up to here, and whether it is the clean end. Raises _Wrong or ValueError."""
        told = dict(metadata or {})
        if told.get(b"n") != str(self.batches).encode():
            raise _Wrong(f"a batch is numbered {told.get(b'n', b'nothing').decode(errors='replace')}")
        buffers = [_bytes_of(column) for column in batch.columns]
        crc = checksum(buffers, crc)
        if told.get(b"crc") != f"{crc:08x}".encode():
            raise _Wrong("the batch does not have its checksum")
        columns = [np.frombuffer(data, kind) for data, (_, _, kind) in zip(buffers, COLUMNS, strict=True)]
        if batch.num_rows and columns[0].max() >= len(self.table):
            raise _Wrong("the batch has a channel that the header has not")
        rows = Rows(*columns)
        if told.get(b"end") not in (None, b"clean") or (b"end" in told) != (batch.num_rows == 0):
            raise _Wrong("the batch has no rows, or says wrongly that it is the last")
        return rows, crc, b"end" in told

    def _check_end(self, offset: int) -> None:
        with self.path.open("rb") as file:
            file.seek(offset)
            rest = file.read(len(END_OF_STREAM) + 1)
        if rest != END_OF_STREAM:
            self._tear(offset, "all batches are whole, but the end marker after them is cut or changed")

    def _count(self, rows: Rows) -> None:
        self.batches += 1
        self.rows += len(rows)
        self.last_time_s = float(rows.time_s[-1])

    def _zeros_or(self, offset: int, size: int, why: str) -> str:
        if offset >= size:
            return why
        with self.path.open("rb") as file:
            file.seek(offset)
            ahead = file.read(4096)
        return f"{size - offset} bytes follow that begin with zeros" if not any(ahead) else why


def _first_line(error: BaseException) -> str:
    return str(error).partition("\n")[0] or type(error).__name__


def _bytes_of(column: Any) -> memoryview:
    """The bytes of one column's values. Raises _Wrong if it has a bitmap of nulls or too few bytes."""
    missing, data = column.buffers()
    size = len(column) * column.type.bit_width // 8
    if missing is not None or column.offset or (size and (data is None or data.size < size)):
        raise _Wrong("the batch has not the shape of a journal's batch")
    return memoryview(data)[:size] if size else memoryview(b"")


def chunks(reader: JournalReader, least_rows: int) -> Iterator[Rows]:
    """The batches of a segment, joined until they hold at least `least_rows`; copies, so nothing holds the file."""
    held: list[Rows] = []
    count = 0
    for rows in reader:
        held.append(rows)
        count += len(rows)
        if count >= least_rows:
            yield joined_rows(held)
            held, count = [], 0
    if held:
        yield joined_rows(held)


def collect(readers: Sequence[JournalReader], names: Sequence[str]) -> dict[str, Series]:
    """The channels asked for, joined over segments in their order; one pass, and only these channels in memory.

    A channel that no segment has is empty. Raises OSError if a file cannot be opened.
    """
    parts: dict[str, list[Series]] = {name: [] for name in names}
    for reader in readers:
        for rows in chunks(reader, CHUNK_ROWS):
            for index, channel in enumerate(reader.table):
                if channel.name in parts:
                    parts[channel.name].append(rows.of(rows.channel == index))
    return {name: joined(found) for name, found in parts.items()}
