"""What a record holds, as the judging needs it: files as models, windows, traces. Reads the record and nothing else."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.bench import Bench
from drivers.bench_file import BenchFile
from drivers.dialect import Dialect
from drivers.text.binding import Bound
from drivers.text.document import compose
from drivers.text.faults import Faults
from sequencer.engine.durable import RecordError
from sequencer.engine.inputs import rebind
from sequencer.engine.record_reader import Record
from sequencer.engine.sealing import verify
from sequencer.model.curves import Curve
from sequencer.model.limits import Declared
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure, load_procedure
from sequencer.model.specification import Specification

Floats = NDArray[np.float64]
FACTS = frozenset({"mains", "contact", "note", "standin", "trip", "bench-fault", "link-lost", "link-recovered"})
SAME_MOMENT_s = 0.06  # readings of one scan lie closer together than this in virtual and in wall time


@dataclass(frozen=True)
class Window:
    """A stretch of the run, s, and the event that declared it."""

    start_s: float
    end_s: float
    event: dict[str, Any]


@dataclass(frozen=True)
class Trace:
    """One quantity over time: (n,) each, good samples only, time rising."""

    time_s: Floats
    value: Floats

    def within(self, start_s: float, end_s: float) -> Trace:
        inside = (self.time_s >= start_s - 1e-9) & (self.time_s <= end_s + 1e-9)
        return Trace(self.time_s[inside], self.value[inside])

    def at(self, moments_s: Floats) -> Floats:
        """The last value known at each moment; nan before the first."""
        index = np.searchsorted(self.time_s, moments_s + SAME_MOMENT_s, side="right") - 1
        if self.value.size == 0:
            return np.full(moments_s.shape, np.nan)
        return np.where(index >= 0, self.value[np.maximum(index, 0)], np.nan)


KEPT_s = 1.1  # an event ends with a scan; at the quiet pace the next one comes a second later


def counted(events: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """All events but those by which a broken step would be judged: it was repeated, and says nothing by itself.

    What was switched meanwhile remains a fact.
    """
    begun: dict[int, int] = {}
    void: set[int] = set()
    for index, event in enumerate(events):
        if event["event"] == "step-start":
            begun[event["step"]] = index
        elif event["event"] == "step-broken":
            void |= set(range(begun[event["step"]], index))
    return [event for index, event in enumerate(events) if index not in void or event["event"] in FACTS]


@dataclass(frozen=True)
class Evidence:
    """A record opened for judging."""

    record: Record
    manifest: dict[str, Any]
    procedure: Procedure
    specification: Specification
    specification_bytes: bytes
    pack: Pack
    bench: BenchFile
    curve: Curve | None = None

    @property
    def declared(self) -> Declared:
        return Declared(self.specification, self.pack.cells, self.curve)

    @property
    def ended(self) -> str:
        return str(self.manifest["ended"])

    def events(self, name: str) -> list[dict[str, Any]]:
        """Every event of a name that counts, with the samples that belong to it.

        Events and samples are written to files of their own: where a full disk cut the samples short, an event may tell
        of a stretch of which only the beginning was kept, and that beginning says nothing.
        """
        named = [event for event in counted(self.record.events) if event["event"] == name]
        return [event for event in named if event.get("end_s", 0.0) <= self._kept_until_s + KEPT_s]

    @cached_property
    def _kept_until_s(self) -> float:
        """Time of the last scan of which samples were kept; without any, nothing is cut."""
        times = self.record.series("loop.period").time_s
        return float(times[-1]) if len(times) else math.inf

    @property
    def trip(self) -> dict[str, Any] | None:
        return next(iter(self.events("trip")), None)

    def window(self, finding: str) -> Window | None:
        """The window in which a finding was made complete, or None."""
        made = [event for event in self.events("finding-window") if event["finding"] == finding]
        return Window(made[-1]["start_s"], made[-1]["end_s"], made[-1]) if made else None

    def begun(self, kind: str) -> float | None:
        """When the last step of a kind began, s; None if none did."""
        return next((event["t"] for event in reversed(self.events("step-start")) if event["does"] == kind), None)

    def trace(self, channel: str) -> Trace:
        series = self.record.series(channel)
        good = (np.asarray(series.flag) == 0) & np.isfinite(series.value)
        return Trace(np.asarray(series.time_s)[good], np.asarray(series.value)[good])


def open_evidence(folder: Path, specification: tuple[str, bytes] | None = None) -> Evidence:
    """Open a sealed record. `specification` (name, bytes) takes the place of the record's own.

    Raises RecordError (not a record, unsealed, changed since sealing), BadInput (a specification with faults).
    """
    record = Record.open(folder, check=False)
    if record.manifest is None:
        raise RecordError(f"{folder}: is not sealed; seal it first")
    tampered = verify(folder)
    if tampered:
        raise RecordError(f"{folder}: is not as it was sealed, and is not judged: {'; '.join(tampered)}")
    name, content = specification or ("specification.yaml", record.input_bytes("specification.yaml"))
    return Evidence(
        record=record,
        manifest=record.manifest,
        procedure=_procedure(record),
        specification=rebind(Specification, content, name, "specification").model,
        specification_bytes=content,
        pack=rebind(Pack, record.input_bytes("pack.yaml"), "pack.yaml", "pack").model,
        bench=_bench(record),
        curve=_curve(record),
    )


def _curve(record: Record) -> Curve | None:
    if "curve.yaml" not in record.inputs:
        return None
    return rebind(Curve, record.input_bytes("curve.yaml"), "curve.yaml", "curve").model


def _procedure(record: Record) -> Procedure:
    assert record.manifest is not None
    faults = Faults()
    document = compose(record.input_bytes("procedure.yaml"), "procedure.yaml")
    bound = load_procedure(document, record.manifest.get("changes", {}), faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def _bench(record: Record) -> BenchFile:
    assert record.manifest is not None
    bound = rebind(Bench, record.input_bytes("bench.yaml"), "bench.yaml", "bench")
    spoken = {part["name"]: part["dialect"] for part in record.manifest["instruments"]}
    dialects = {dialect: _dialect(record, dialect) for dialect in sorted(set(spoken.values()))}
    return BenchFile(bound, {name: dialects[dialect] for name, dialect in spoken.items()})


def _dialect(record: Record, dialect: str) -> Bound[Dialect]:
    name = f"dialects/{dialect}.yaml"
    return rebind(Dialect, record.input_bytes(name), name, "dialect")
