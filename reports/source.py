"""What a report is made of: the files of one judgement folder, and the record that it judged."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np
from numpy.typing import NDArray

from reports.inputs import Measurand, cells, curve, measurands, specification

if TYPE_CHECKING:
    from sequencer.model.curves import Curve
    from sequencer.model.specification import Specification

Floats = NDArray[np.float64]


class Series(Protocol):
    """One channel of a record, in order of time.

    time_s : (n,), s since the run's start.   value : (n,), unit of the channel.   flag : (n,), 0 where good.
    """

    @property
    def time_s(self) -> Floats: ...
    @property
    def value(self) -> Floats: ...
    @property
    def flag(self) -> NDArray[np.integer[Any]]: ...


@dataclass(frozen=True)
class Source:
    """The parsed JSON of a judgement and its record, nothing selected, nothing rounded.

    notes : what the reading of the record found torn, changed or unsealed. measurands : by finding.
    cells : of the pack, specification : as it was judged by, curve : of the thermistor; None where unknown.
    series : channel name -> its Series; None for a channel that is not there.
    """

    name: str
    verdicts: Mapping[str, Any]
    findings: Mapping[str, Any]
    budgets: Mapping[str, Any]
    judgement: Mapping[str, Any]
    manifest: Mapping[str, Any]
    events: Sequence[Mapping[str, Any]]
    notes: Sequence[str]
    series: Callable[[str], Series | None]
    measurands: Mapping[str, Measurand] = field(default_factory=dict)
    cells: int | None = None
    specification: Specification | None = None
    curve: Curve | None = None


def read_json(path: Path) -> Any:
    """The document in a file of a judgement; ValueError names the file where it is none."""
    try:
        return json.loads(path.read_text(encoding="utf-8"))
    except (json.JSONDecodeError, UnicodeDecodeError) as fault:
        raise ValueError(f"{path}: not a JSON document ({fault})") from fault


def read_judgement(folder: Path) -> Source:
    """All that the report of RECORD/judged/NNN needs.

    OSError, ValueError or RecordError where a file is missing or broken.
    """
    from sequencer.engine.evidence import counted
    from sequencer.engine.record_reader import Record

    record = Record.open(folder.parent.parent)
    held = {channel.name for channel in record.channels}
    parts = {name: read_json(folder / f"{name}.json") for name in ("verdicts", "findings", "budgets", "judgement")}
    given = set(record.inputs)
    judged_by = folder / "specification.yaml"
    return Source(
        name=folder.name,
        manifest=record.manifest or {},
        events=counted(record.events),
        notes=record.notes,
        series=lambda name: record.series(name) if name in held else None,
        measurands=measurands(record.input_bytes("findings.yaml")) if "findings.yaml" in given else {},
        cells=cells(record.input_bytes("pack.yaml")) if "pack.yaml" in given else None,
        specification=specification(judged_by.read_bytes()) if judged_by.is_file() else None,
        curve=curve(record.input_bytes("curve.yaml")) if "curve.yaml" in given else None,
        **parts,
    )
