"""The journal's bytes: an Arrow IPC stream whose batches carry a number and a running checksum.

Columns: channel (int16, index into the channel table), time (s since the start of the run), value (in the channel's
unit), flag. The schema's metadata holds the format version, the header (start, channel table) and the header's CRC-32.
Each batch's metadata holds "n", its number from 0, and "crc": the CRC-32 of the header, going on over the bytes of all
columns up to and with this batch, so that a batch from elsewhere or a missing one shows as surely as a changed byte.
The last batch has no rows and "end": "clean"; without it, zeros after a crash would read as an orderly end of stream.
"""

import json
import zlib
from collections.abc import Iterable
from dataclasses import astuple, dataclass
from typing import Any

import pyarrow as pa

from sequencer.engine.channels import Channel

VERSION = 1
# Apache Arrow columnar format, "IPC Streaming Format": end-of-stream is a continuation marker and a length of zero.
END_OF_STREAM = b"\xff\xff\xff\xff\x00\x00\x00\x00"
COLUMNS = (
    ("channel", pa.int16(), "<i2"),
    ("time", pa.float64(), "<f8"),
    ("value", pa.float64(), "<f8"),
    ("flag", pa.uint8(), "u1"),
)
FIELDS = pa.schema([pa.field(name, arrow_type, nullable=False) for name, arrow_type, _ in COLUMNS])


@dataclass(frozen=True)
class Header:
    """What one segment of a journal says of itself. start_utc: ISO 8601 text of the run's start."""

    channels: tuple[Channel, ...]
    start_utc: str


def checksum(columns: Iterable[Any], so_far: int) -> int:
    """CRC-32 (ISO 3309, as in zlib) of the bytes of some buffers, going on from an earlier one."""
    for column in columns:
        so_far = zlib.crc32(column, so_far)
    return so_far


def schema_of(header: Header) -> tuple[Any, int]:
    """The Arrow schema that carries a header, and the checksum from which the first batch goes on."""
    told = {"version": VERSION, "start_utc": header.start_utc, "channels": [astuple(c) for c in header.channels]}
    text = json.dumps(told, ensure_ascii=False).encode()
    crc = zlib.crc32(text)
    carried = {"packmime.journal": str(VERSION), "packmime.header": text, "packmime.crc": f"{crc:08x}"}
    return FIELDS.with_metadata(carried), crc


def header_of(schema: Any) -> tuple[Header, int]:
    """The header that a schema carries, and its checksum. Raises ValueError, in words, if it is not ours or damaged."""
    told = schema.metadata or {}
    version = told.get(b"packmime.journal", b"")
    if version != str(VERSION).encode():
        found = version.decode(errors="replace") or "unknown"
        raise ValueError(f"journal format {found}, this program reads {VERSION}")
    text = told.get(b"packmime.header", b"")
    crc = zlib.crc32(text)
    if told.get(b"packmime.crc") != f"{crc:08x}".encode() or not schema.equals(FIELDS):
        raise ValueError("the header is damaged")
    header = json.loads(text)
    return Header(tuple(Channel(*row) for row in header["channels"]), header["start_utc"]), crc
