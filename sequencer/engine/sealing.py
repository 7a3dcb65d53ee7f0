"""Sealing a record: samples made final, every file hashed into the manifest, the folder made read-only.

A record is sealed from the moment its manifest stands; until then whatever fails leaves it readable and unsealed.
"""

import hashlib
import json
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from sequencer.engine import heartbeat, sealed_samples
from sequencer.engine.abandoned import abandoned_manifest
from sequencer.engine.documents import to_json
from sequencer.engine.durable import RecordError, make_read_only, partial_of, sha256_of, write_new
from sequencer.engine.heartbeat import Heartbeat
from sequencer.engine.journal_reader import JournalReader
from sequencer.engine.record import RecordFolder, is_record, journal_segments

MANIFEST = "manifest.json"
FORMAT = 1
_NOT_HASHED = {MANIFEST, heartbeat.NAME}
_SELF = b',\n  "manifest_sha256": "'  # ends the file, over the bytes before it: finds slips, not forgers


def seal(record: RecordFolder | Path, manifest: Mapping[str, Any]) -> dict[str, Any]:
    """Seal a finished record; a RecordFolder is closed first. Returns the manifest as written.

    Adds to the manifest: "format", "journal" (what each segment held, and where it is torn), "files" ({path under
    data/: sha256}) and "manifest_sha256". Raises RecordError if the record is sealed, live, or not one, or the disk
    refuses; TypeError for a manifest without a JSON form.
    """
    if isinstance(record, RecordFolder):
        record.close()
        if record.unwritten_events:
            raise RecordError(f"{record.path}: the disk did not take the last events, so it stays unsealed; free space")
        record = record.path
    return _seal(record, lambda _: dict(manifest))


def seal_abandoned(record: Path) -> dict[str, Any]:
    """Seal a record that a crash left behind, with a manifest made from its run-start event and "ended": "abandoned".

    What the run-start event carries beyond its time goes into the manifest as it is. Raises RecordError as `seal`.
    """
    data = record / "data"
    return _seal(record, lambda readers: abandoned_manifest(data, max([0.0, *(r.last_time_s for r in readers)])))


def verify(record: Path) -> list[str]:
    """Every way in which a record is not as it was sealed, one sentence each: changed, missing and added files."""
    data = record / "data"
    manifest, notes = read_manifest(data / MANIFEST)
    if manifest is None:
        return notes or ["the record is not sealed, so nothing tells whether it is as it was written"]
    sealed: dict[str, str] = manifest.get("files", {})
    present = _files(data)
    notes += [f"data/{name}: is missing since sealing" for name in sealed if name not in present]
    notes += [f"data/{name}: was added after sealing" for name in present if name not in sealed]
    return notes + [note for name in present if name in sealed and (note := _changed(data / name, name, sealed[name]))]


def _changed(path: Path, name: str, sha256: str) -> str | None:
    try:
        return None if sha256_of(path) == sha256 else f"data/{name}: was changed since sealing"
    except OSError as error:
        return f"data/{name}: cannot be read ({error.strerror})"


def read_manifest(path: Path) -> tuple[dict[str, Any] | None, list[str]]:
    """The manifest, or None; and notes in words on what is wrong with it. A missing one is None without a note."""
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        return None, []
    except OSError as error:
        return None, [f"data/{MANIFEST}: cannot be read ({error.strerror})"]
    changed = f"data/{MANIFEST}: was changed since sealing"
    try:
        manifest = json.loads(content)
    except ValueError:
        manifest = None
    if not isinstance(manifest, dict) or not isinstance(manifest.get("files"), dict):
        return None, [f"{changed}, and is no manifest now"]
    return manifest, [] if content == _with_own_hash(content.rpartition(_SELF)[0]) else [changed]


def _with_own_hash(body: bytes) -> bytes:
    return body + _SELF + hashlib.sha256(body).hexdigest().encode() + b'"\n}\n'


def _files(data: Path) -> list[str]:
    found = (path.relative_to(data).as_posix() for path in data.rglob("*") if not path.is_dir())
    return sorted(name for name in found if name not in _NOT_HASHED)


def _seal(record: Path, describe: Callable[[Sequence[JournalReader]], dict[str, Any]]) -> dict[str, Any]:
    data = record / "data"
    if not is_record(record):
        raise RecordError(f"{record}: holds no record to seal; name the folder that a run wrote")
    if (data / MANIFEST).exists():
        raise RecordError(f"{record}: the record is sealed already, and nothing in it is ever overwritten")
    try:
        owner = Heartbeat.take(record)
        try:
            manifest = _write_sealed(record, describe)
        except BaseException:
            owner.release()
            raise
        owner.release(remove=True)
    except OSError as error:
        raise RecordError(
            f"{record}: cannot be sealed ({error}); it stays readable, so mend the disk and seal it then"
        ) from error
    make_read_only(data)
    return manifest


def _write_sealed(record: Path, describe: Callable[[Sequence[JournalReader]], dict[str, Any]]) -> dict[str, Any]:
    data = record / "data"
    for name in (sealed_samples.NAME, MANIFEST):
        partial_of(data / name).unlink(missing_ok=True)
    (data / sealed_samples.NAME).unlink(missing_ok=True)  # of a sealing that did not reach its manifest
    readers = sealed_samples.write_samples(journal_segments(record), data / sealed_samples.NAME)
    manifest = {**describe(readers), "format": FORMAT, "journal": [_told(reader) for reader in readers]}
    manifest["files"] = {name: sha256_of(data / name) for name in _files(data)}
    content = _with_own_hash(to_json(manifest).removesuffix(b"\n}\n"))
    write_new(data / MANIFEST, content)
    result: dict[str, Any] = json.loads(content)
    return result


def _told(reader: JournalReader) -> dict[str, Any]:
    torn = str(reader.torn) if reader.torn else None
    return {"file": reader.path.name, "batches": reader.batches, "rows": reader.rows, "torn": torn}
