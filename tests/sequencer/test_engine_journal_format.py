"""The journal's bytes against the published standards it stands on."""

import zlib

import pyarrow as pa
import pytest

from sequencer.engine.channels import CHANNELS
from sequencer.engine.journal_format import END_OF_STREAM, FIELDS, Header, checksum, header_of, schema_of


def test_checksum_is_the_published_crc_32():
    # The Rocksoft model's check value of CRC-32 (R. Williams, "A painless guide to CRC error detection algorithms").
    assert checksum([b"123456789"], 0) == 0xCBF43926
    assert checksum([b"1234", b"", b"56789"], 0) == 0xCBF43926


def test_end_marker_is_what_an_arrow_stream_ends_with():
    # Apache Arrow columnar format, "IPC Streaming Format": EOS is 0xFFFFFFFF 0x00000000; and as Arrow itself writes it.
    sink = pa.BufferOutputStream()
    pa.ipc.new_stream(sink, FIELDS).close()
    assert sink.getvalue().to_pybytes().endswith(END_OF_STREAM)
    assert END_OF_STREAM.hex() == "ffffffff00000000"


def test_a_header_comes_back_with_the_checksum_to_go_on_from():
    header = Header(CHANNELS, "2026-01-01T00:00:00Z")
    schema, crc = schema_of(header)
    assert header_of(schema) == (header, crc)
    assert crc == zlib.crc32(schema.metadata[b"packmime.header"])


def _carrying(**changed):
    metadata = dict(schema_of(Header(CHANNELS, "x"))[0].metadata)
    metadata.update({f"packmime.{key}".encode(): value for key, value in changed.items()})
    return FIELDS.with_metadata(metadata)


@pytest.mark.parametrize(
    ("schema", "why"),
    [
        (_carrying(journal=b"2"), "journal format 2, this program reads 1"),
        (_carrying(header=b"{}"), "the header is damaged"),
        (_carrying(crc=b"00000000"), "the header is damaged"),
        (FIELDS, "journal format unknown"),
        (pa.schema([("x", pa.int8())]), "journal format unknown"),
    ],
)
def test_another_header_is_refused_in_words(schema, why):
    with pytest.raises(ValueError, match=why):
        header_of(schema)
