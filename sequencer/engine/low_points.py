"""The insertions of deep-discharge starts as a record holds them; classes are read anew from the traces, the events
only say when what was set."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from drivers.text.si import si
from sequencer.analysis.low_start import NOTHING_A, Response, response_of
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.agreement import currents_differ
from sequencer.engine.evidence import Evidence
from sequencer.engine.fixture import NODE_TOLERANCE, NODE_TOLERANCE_V
from sequencer.engine.found import Found
from sequencer.engine.insertion import TAP_TOLERANCE_V, MEAN_s
from sequencer.engine.low_starts import full_above_A
from sequencer.engine.site import nominal_current
from sequencer.engine.swept import ended_early, given_up
from sequencer.model.low_start import OR


@dataclass(frozen=True)
class LowStartPoint:
    """One start: what was set, when, and what it showed. cell : the weak one, from 1; else None.

    astray : why the pack was not what it should have been when the current began; None where it was.
    """

    role: str
    cell_V: float
    cell: int | None
    start_s: float
    end_s: float
    response: Response
    void: bool
    astray: str | None

    @property
    def where(self) -> str:
        told = f"{self.cell_V:.2f} V per cell"
        return told if self.cell is None else f"cell {self.cell} at {self.cell_V:.2f} V"


@dataclass(frozen=True)
class LowStarts:
    """All starts of a record."""

    evidence: Evidence
    accuracy: Accuracy
    points: tuple[LowStartPoint, ...]
    full_A: float
    given_up: str | None

    @classmethod
    def of(cls, evidence: Evidence, accuracy: Accuracy) -> LowStarts:
        full_A = full_above_A(nominal_current(evidence.specification, evidence.pack)[0])
        points = tuple(_point(evidence, event, full_A) for event in evidence.events("low-start"))
        return cls(evidence, accuracy, points, full_A, given_up(evidence, "low_start"))

    @property
    def starts(self) -> list[LowStartPoint]:
        return [point for point in self.points if point.role.startswith("start")]

    def as_list(self) -> list[dict[str, Any]]:
        """Every start as data, for the figure in a report."""
        return [
            {
                "role": point.role.partition(",")[0],
                "cell_V": point.cell_V,
                "cell": point.cell,
                "start_s": point.start_s,
                "end_s": point.end_s,
                "kind": point.response.kind,
                "current_A": None if point.response.current is None else point.response.current.value,
                "pulses": len(point.response.pulses),
                "peak_A": max((pulse.peak_A for pulse in point.response.pulses), default=None),
                "void": point.void,
                "words": point.astray or point.response.words,
            }
            for point in self.points
        ]

    # states

    def state(self, points: Sequence[LowStartPoint], expected: str | None, missing: str) -> Found:
        """What the charger did at these starts: of several, the first that is not as declared.

        Shown again because nothing flowed, a start must be answered alike twice; full current is told by one.
        """
        if not points:
            return self.not_shown(missing)
        allowed = (expected or "").split(OR)
        sure = [point for point in points if not point.void and self.untold(point) is None]
        odd = [point for point in sure if point.response.kind not in allowed]
        full = next((point for point in odd if point.response.kind == "full current"), None)
        if full is None and (unlike := _unlike(odd, sure)) is not None:
            return unlike
        if odd:
            return self._seen(full or odd[0], len(points))
        told = {(point.cell_V, point.cell) for point in sure}
        unsure = next((point for point in points if (point.cell_V, point.cell) not in told), None)
        if unsure is not None:
            why = self.untold(unsure) or "the control after it failed twice; what was seen there counts for nothing"
            return Found(trouble=f"{unsure.where}: {why}", start_s=unsure.start_s, end_s=unsure.end_s)
        return self._seen(sure[0], len(points))

    def _seen(self, point: LowStartPoint, count: int) -> Found:
        words = f"{point.where}: {point.response.words}"
        return Found(seen=point.response.kind, n=count, start_s=point.start_s, end_s=point.end_s, words=words)

    def untold(self, point: LowStartPoint) -> str | None:
        """Why a start says nothing of the charger; None where it does."""
        if point.response.kind == "undecided":
            return point.response.words
        if point.astray is not None:
            return point.astray
        if point.response.current is None:
            return None
        return currents_differ(self.evidence, self.accuracy, point.end_s - MEAN_s, point.end_s)

    def not_shown(self, what: str) -> Found:
        """What was not shown is inconclusive where the step gave up, and not run where it never came so far."""
        if self.given_up is not None:
            return Found(trouble=f"{what}: {self.given_up}")
        return Found(absent=what + ended_early(self.evidence))

    @property
    def precharged(self) -> list[LowStartPoint]:
        return [p for p in self.points if p.response.kind == "precharges" and p.response.current and p.role != "weak"]


def _unlike(odd: list[LowStartPoint], sure: list[LowStartPoint]) -> Found | None:
    """Why one start that was answered in two ways tells nothing; None where there is none."""
    for one in odd:
        for other in sure:
            same = (one.cell_V, one.cell) == (other.cell_V, other.cell)
            if same and one.response.kind != other.response.kind:
                first, then = sorted((one, other), key=lambda point: point.start_s)
                told = f"{one.where}: {first.response.words}; shown again: {then.response.words}"
                return Found(trouble=f"{told}: mains or a contact that came and went?", start_s=first.start_s)
    return None


def _point(evidence: Evidence, event: dict[str, Any], full_A: float) -> LowStartPoint:
    window = evidence.trace("charger.current").within(event["start_s"], event["end_s"])
    response = response_of(window.time_s, window.value, full_A=full_A, watched_s=float(event["watched_s"]))
    began = np.flatnonzero(window.value > NOTHING_A)
    until_s = float(window.time_s[began[0]]) - 1e-6 if began.size else event["end_s"]
    return LowStartPoint(
        role=event["role"],
        cell_V=event["cell_V"],
        cell=event["cell"],
        start_s=event["start_s"],
        end_s=event["end_s"],
        response=response,
        void=bool(event["void"]),
        astray=_astray(evidence, event, until_s),
    )


def _astray(evidence: Evidence, event: dict[str, Any], until_s: float) -> str | None:
    """Why the pack was not what it should have been until the current began: its node, or the weak cell."""
    node = evidence.trace("node.voltage").within(event["start_s"], until_s).value
    pack_V = float(event["pack_V"])
    if node.size and not abs(float(np.mean(node)) - pack_V) <= NODE_TOLERANCE_V + NODE_TOLERANCE * pack_V:
        return (
            f"the node stood at {si(float(np.mean(node)), 'V')}, and not at {si(pack_V, 'V')}, when the current began"
        )
    cell = event["cell"]
    if cell is None:
        return None
    weak_V = _weak_V(evidence, int(cell), event["start_s"], until_s)
    if not abs(weak_V - event["cell_V"]) <= TAP_TOLERANCE_V:
        return f"the weak cell was set to {event['cell_V']:.3f} V and reads {weak_V:.3f} V"
    return None


def _weak_V(evidence: Evidence, cell: int, start_s: float, end_s: float) -> float:
    """Voltage of one cell as its supply's own meter reads it; of the top cell what is left to the node; V."""

    def mean(channel: str) -> float:
        value = evidence.trace(channel).within(start_s, end_s).value
        return float(np.mean(value)) if value.size else float("nan")

    if cell < evidence.pack.cells:
        return mean(f"tap{cell}.voltage")
    return mean("node.voltage") - sum(mean(f"tap{number}.voltage") for number in range(1, cell))
