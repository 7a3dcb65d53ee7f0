"""The samples of a sealed record: one Parquet file made from the journal, and read one channel at a time.

Columns: channel (text), time (s), value (in the channel's unit), flag. Each row group holds one channel over one
stretch of time, in the order of appending, so that asking for a channel touches no other.
"""

import json
from collections.abc import Iterator, Sequence
from contextlib import closing
from dataclasses import astuple
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from sequencer.engine.channels import Channel
from sequencer.engine.durable import RecordError, partial_of, promote
from sequencer.engine.journal_reader import JournalReader, chunks
from sequencer.engine.series import Rows, Series, joined

NAME = "samples.parquet"
STRETCH_ROWS = 250_000
_CHANNEL = pa.dictionary(pa.int32(), pa.string())


def write_samples(segments: Sequence[Path], target: Path) -> list[JournalReader]:
    """Make the Parquet file `target` from a journal's segments, and compare every row of it with them.

    Returns the readers, which tell what each segment held and where it is torn. Raises RecordError if what was written
    is not what was read, OSError if the disk refuses; then no file is left.
    """
    partial = partial_of(target)
    try:
        readers = _write(segments, partial)
        _compare(segments, partial)
        promote(target)
    except BaseException:
        partial.unlink(missing_ok=True)
        raise
    return readers


def _write(segments: Sequence[Path], partial: Path) -> list[JournalReader]:
    readers = [JournalReader(path) for path in segments]
    table = _tables_together([_header_only(path) for path in segments])
    schema = pa.schema(
        [("channel", _CHANNEL), ("time", pa.float64()), ("value", pa.float64()), ("flag", pa.uint8())],
        metadata={"packmime.samples": "1", "packmime.channels": json.dumps([astuple(channel) for channel in table])},
    )
    with pq.ParquetWriter(
        partial,
        schema,
        compression="zstd",
        use_dictionary=["channel", "flag"],
        column_encoding={"time": "BYTE_STREAM_SPLIT", "value": "BYTE_STREAM_SPLIT"},
        write_page_checksum=True,
    ) as writer:
        for name, series in _groups(readers):
            writer.write_table(_table(name, series, schema), row_group_size=len(series))
    return readers


def _header_only(path: Path) -> JournalReader:
    reader = JournalReader(path)
    with closing(iter(reader)) as batches:
        next(batches, None)
    return reader


def _tables_together(readers: Sequence[JournalReader]) -> list[Channel]:
    return list({channel.name: channel for reader in readers for channel in reader.table}.values())


def _groups(readers: Sequence[JournalReader]) -> Iterator[tuple[str, Series]]:
    """The rows as the file orders them: by segment, by stretch of time, by channel."""
    for reader in readers:
        for rows in chunks(reader, STRETCH_ROWS):
            yield from _by_channel(rows, reader.table)


def _by_channel(rows: Rows, table: Sequence[Channel]) -> Iterator[tuple[str, Series]]:
    for index, channel in enumerate(table):
        chosen = np.flatnonzero(rows.channel == index)
        if len(chosen):
            yield channel.name, rows.of(chosen)


def _table(name: str, series: Series, schema: Any) -> Any:
    column = pa.DictionaryArray.from_arrays(np.zeros(len(series), np.int32), [name])
    numbers = [pa.array(values) for values in (series.time_s, series.value, series.flag)]
    return pa.Table.from_arrays([column, *numbers], schema=schema)


def _compare(segments: Sequence[Path], partial: Path) -> None:
    with SealedSamples(partial) as written:
        number = -1
        for number, (name, series) in enumerate(_groups([JournalReader(path) for path in segments])):
            if not written.holds(number, name, series):
                raise RecordError(f"{partial}: {name} was not written as the journal has it; the disk may be failing")
        if written.groups != number + 1:
            raise RecordError(f"{partial}: holds more than the journal; the disk may be failing")


class SealedSamples:
    """An open Parquet file of samples. Raises RecordError on opening if it is none that this program reads."""

    def __init__(self, path: Path) -> None:
        self._path = path
        try:
            self._file = pq.ParquetFile(path, page_checksum_verification=True)
            told = self._file.schema_arrow.metadata or {}
            self.channels = tuple(Channel(*row) for row in json.loads(told[b"packmime.channels"]))
        except (pa.ArrowException, OSError, ValueError, KeyError, TypeError) as error:
            raise RecordError(f"{path}: the sealed samples cannot be read ({error})") from error

    @property
    def groups(self) -> int:
        """How many row groups the file has."""
        return int(self._file.metadata.num_row_groups)

    def channel_of(self, group: int) -> str:
        """The one channel of a row group."""
        statistics = self._file.metadata.row_group(group).column(0).statistics
        return str(statistics.min)

    def group(self, group: int) -> Series:
        """The samples of one row group. Raises RecordError if its bytes are damaged."""
        try:
            table = self._file.read_row_group(group, columns=["time", "value", "flag"])
        except (pa.ArrowException, OSError) as error:
            raise RecordError(f"{self._path}: row group {group} is damaged ({error})") from error
        return Series(*(table.column(name).to_numpy() for name in ("time", "value", "flag")))

    def holds(self, group: int, name: str, series: Series) -> bool:
        """Whether a row group exists and is exactly this stretch of this channel. Raises RecordError if damaged."""
        return group < self.groups and self.channel_of(group) == name and self.group(group).same_bits(series)

    def series(self, name: str) -> Series:
        """One channel, reading only its own row groups; empty if it has no samples. Raises RecordError."""
        return joined([self.group(number) for number in range(self.groups) if self.channel_of(number) == name])

    def __enter__(self) -> "SealedSamples":
        return self

    def __exit__(self, *_: object) -> None:
        self._file.close()
