"""Reading a record: manifest, inputs, events and samples, and in words whatever is not as it should be."""

from collections.abc import Iterable
from pathlib import Path
from typing import Any

from sequencer.engine import events, heartbeat
from sequencer.engine.channels import Channel
from sequencer.engine.durable import RecordError
from sequencer.engine.journal_reader import JournalReader, collect
from sequencer.engine.record import is_record, journal_segments
from sequencer.engine.sealed_samples import NAME as SAMPLES
from sequencer.engine.sealed_samples import SealedSamples
from sequencer.engine.sealing import FORMAT, read_manifest, verify
from sequencer.engine.series import Series


class Record:
    """A record opened for reading.

    manifest: None while unsealed. events: in the order of writing. notes: what is torn, unsealed, live or tampered
    with, one sentence each; empty for a sealed and untouched record.
    """

    def __init__(
        self, path: Path, *, manifest: dict[str, Any] | None, happened: list[dict[str, Any]], notes: list[str]
    ) -> None:
        """Not called directly: see `open`."""
        self.path = path
        self.manifest = manifest
        self.events = happened
        self.notes = notes
        self._last_sample_s = 0.0
        self._sealed = self._open_sealed() if manifest is not None else None
        self.channels: tuple[Channel, ...] = self._sealed.channels if self._sealed else self._survey()

    @classmethod
    def open(cls, path: Path, *, check: bool = True) -> "Record":
        """Open a record, sealed or not; `check` hashes every file of a sealed one.

        Raises RecordError if the folder holds no record, or one of a newer format.
        """
        if not is_record(path):
            raise RecordError(f"{path}: holds no record; name the folder that a run wrote with --out")
        data = path / "data"
        manifest, notes = read_manifest(data / "manifest.json")
        if manifest is not None and manifest.get("format") != FORMAT:
            told = f"a record of format {manifest.get('format')}, and this program reads {FORMAT}"
            raise RecordError(f"{path}: is {told}; use a newer packmime")
        if manifest is not None and check:
            notes = verify(path)
        try:
            happened, torn = events.read_events(data / events.NAME)
        except OSError as error:
            raise RecordError(f"{path}: the events cannot be read ({error})") from error
        return cls(path, manifest=manifest, happened=happened, notes=[*_state(path, manifest), *notes, *torn])

    @property
    def is_live(self) -> bool:
        """Whether a process is still writing it, now."""
        return heartbeat.is_live(self.path)

    @property
    def duration_s(self) -> float:
        """Seconds from the start to the end as the manifest says; without one, to the last event or sample."""
        told = (self.manifest or {}).get("duration_s")
        if told is not None:
            return float(told)
        return max([self._last_sample_s, *(float(event["t"]) for event in self.events)])

    @property
    def inputs(self) -> list[str]:
        """The names of the files that the run read."""
        top = self.path / "data" / "inputs"
        return sorted(path.relative_to(top).as_posix() for path in top.rglob("*") if path.is_file())

    def input_bytes(self, name: str) -> bytes:
        """One file that the run read, as it was. Raises RecordError if the record has no such input."""
        if name not in self.inputs:
            raise RecordError(f"{self.path}: has no input {name!r}; it has {', '.join(self.inputs) or 'none'}")
        return (self.path / "data" / "inputs" / name).read_bytes()

    def series(self, name: str) -> Series:
        """One channel over time. Raises RecordError if the record has no such channel."""
        return self.traces([name])[name]

    def traces(self, names: Iterable[str]) -> dict[str, Series]:
        """Several channels over time: in one pass where there is only the journal. Raises RecordError as `series`."""
        wanted = list(names)
        known = [channel.name for channel in self.channels]
        if unknown := [name for name in wanted if name not in known]:
            raise RecordError(f"{self.path}: has no channel {unknown[0]!r}; it has {', '.join(known) or 'none'}")
        if self._sealed is not None:
            try:
                return {name: self._sealed.series(name) for name in wanted}
            except RecordError as error:
                self._give_up_sealed(error)
        return collect([JournalReader(path) for path in journal_segments(self.path)], wanted)

    def _open_sealed(self) -> SealedSamples | None:
        """The sealed samples, unless they are missing or changed; the journal has its own checksums and stands in."""
        file = f"data/{SAMPLES}"
        try:
            if any(note.startswith(file) for note in self.notes):
                raise RecordError(f"{file}: is not as it was sealed")
            samples = SealedSamples(self.path / "data" / SAMPLES)
        except RecordError as error:
            self._give_up_sealed(error)
            return None
        assert self.manifest is not None
        self.notes += [told["torn"] for told in self.manifest.get("journal", []) if told.get("torn")]
        return samples

    def _give_up_sealed(self, error: RecordError) -> None:
        self._sealed = None
        self.notes.append(f"{error}; the samples are read from the journal")

    def _survey(self) -> tuple[Channel, ...]:
        """One pass over the journal: its channels, its last time, and where it is torn."""
        readers = [JournalReader(path) for path in journal_segments(self.path)]
        for reader in readers:
            for _ in reader:
                pass
        self.notes += [str(reader.torn) for reader in readers if reader.torn]
        self._last_sample_s = max([0.0, *(reader.last_time_s for reader in readers)])
        return tuple({channel.name: channel for reader in readers for channel in reader.table}.values())


def _state(path: Path, manifest: dict[str, Any] | None) -> list[str]:
    if manifest is not None:
        return []
    if heartbeat.is_live(path):
        return [f"the record is still being written by {heartbeat.writer_of(path)}"]
    return [f"the record is not sealed; it was last written by {heartbeat.writer_of(path)}"]
