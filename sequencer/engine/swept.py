"""What the insertions of sweeps found: currents of bands, edges, starts; classes are read anew from the traces."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from drivers.text.si import si
from sequencer.analysis.classes import Seen, class_of
from sequencer.analysis.edges import EdgeInterval, end_budget
from sequencer.analysis.estimates import mean_between
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence
from sequencer.engine.found import Found
from sequencer.engine.insertion import MEAN_s

CONTACT_ohm = 0.1  # what a relay contact and its lead may add: common practice, no source


@dataclass(frozen=True)
class Point:
    """One insertion of a sweep, its class read from the traces."""

    role: str
    ohm: float | None  # None: open or short
    celsius: float | None
    start_s: float
    end_s: float
    seen: Seen
    void: bool


@dataclass(frozen=True)
class Points:
    """All insertions of one sweep."""

    evidence: Evidence
    accuracy: Accuracy
    points: tuple[Point, ...]

    @classmethod
    def of(cls, evidence: Evidence, accuracy: Accuracy, finding: str) -> Points:
        current = evidence.trace("charger.current")
        made = [event for event in evidence.events("point") if event["finding"] == finding]
        return cls(evidence, accuracy, tuple(_point(evidence, current, event) for event in made))

    def as_list(self, finding: str) -> list[dict[str, Any]]:
        """Every point as data, for the maps in a report."""
        return [
            {
                "finding": finding,
                "role": point.role,
                "ohm": point.ohm,
                "celsius": point.celsius,
                "start_s": point.start_s,
                "end_s": point.end_s,
                "kind": point.seen.kind,
                "current_A": None if point.seen.current is None else point.seen.current.value,
                "void": point.void,
                "words": point.seen.words,
            }
            for point in self.points
        ]

    def at(self, *roles: str) -> list[Point]:
        return [point for point in self.points if point.role in roles]

    def state(self, roles: Iterable[str]) -> Found:
        """Whether the charger charged at any of these points."""
        points = self.at(*roles)
        if not points:
            return Found(absent="no such point was shown")
        start_s, end_s = points[0].start_s, points[-1].end_s
        flowing = [point for point in points if point.seen.flows]
        if flowing:
            words = f"{_where(flowing[0])}: {flowing[0].seen.words}"
            return Found(seen="charges", n=len(points), start_s=flowing[0].start_s, end_s=flowing[0].end_s, words=words)
        void = [point for point in points if point.void]
        if void:
            return Found(
                trouble=f"the control after {_where(void[0])} failed twice; what was seen there counts for nothing"
            )
        undecided = [point for point in points if point.seen.kind != "no charge"]
        if undecided:
            return Found(trouble=f"{_where(undecided[0])}: {undecided[0].seen.words}")
        words = f"{len(points)} point{'s' * (len(points) > 1)}"
        return Found(seen="no charge", n=len(points), start_s=start_s, end_s=end_s, words=words)

    def band_current(self, number: int, low_A: float | None, high_A: float | None) -> Found:
        """The current that a band selects: of its points, the one closest to a limit."""
        points = self.at(*(f"band{number}.{part}" for part in ("low", "middle", "high")))
        if not points:
            return Found(absent="the band was not swept")
        if any(point.void for point in points):
            return Found(trouble="a control failed twice within the band")
        silent = next((point for point in points if point.seen.kind != "charges"), None)
        if silent is not None:
            return Found(none=f"{_where(silent)}: {silent.seen.words}", start_s=silent.start_s, end_s=silent.end_s)
        middle_A = ((low_A or 0.0) + (high_A or 0.0)) / 2
        worst = max(points, key=lambda point: abs(_mean_A(point) - middle_A))
        return self._current(worst, len(points))

    def _current(self, point: Point, count: int) -> Found:
        current = self.evidence.trace("charger.current")
        estimate = mean_between(current.time_s, current.value, point.end_s - MEAN_s, point.end_s)
        lines = [*self.accuracy.current(estimate.value)]
        if estimate.s > 0 and estimate.n_eff > 1:
            lines.append(
                Contribution.from_readings("repeatability", estimate.s, estimate.n_eff, source=f"{estimate.n} readings")
            )
        words = f"at {_where(point)}, of {count} insertions"
        return Found(
            Budget(estimate.value, "A", tuple(lines)),
            n=count,
            start_s=estimate.start_s,
            end_s=estimate.end_s,
            words=words,
        )

    def edge(self, inside_role: str, roles: Iterable[str], place: str) -> Found:
        """The bracket between the outermost setting like the inside one and the innermost unlike it, in ohms."""
        points = [point for point in self.at(inside_role, *roles) if point.ohm is not None and not point.void]
        inside = next((point for point in points if point.role == inside_role), None)
        if inside is None:
            return Found(absent="the edge was not looked for")
        alike = [point for point in points if point.seen.label == inside.seen.label]
        others = [point for point in points if point.seen.label != inside.seen.label]
        if inside.seen.kind != "charges":
            return Found(trouble=f"{_where(inside)}, inside, does not charge: {inside.seen.words}")
        if not others:
            furthest = max(alike, key=lambda point: abs(np.log((point.ohm or 1.0) / (inside.ohm or 1.0))))
            return Found(trouble=f"still the same at {_where(furthest)}: no edge was found so far out")
        return self._bracket(inside, alike, others, place)

    def _bracket(self, inside: Point, alike: list[Point], others: list[Point], place: str) -> Found:
        assert inside.ohm is not None
        distance = {id(p): abs(float(np.log((p.ohm or 1.0) / inside.ohm))) for p in (*alike, *others)}
        last = max(alike, key=lambda point: distance[id(point)])
        first = min(others, key=lambda point: distance[id(point)])
        if distance[id(last)] > distance[id(first)]:
            return Found(trouble=f"answers contradict each other: {_where(first)} and {_where(last)}")
        assert last.ohm is not None
        assert first.ohm is not None
        low, high = sorted((last.ohm, first.ohm))
        lines = resistor_lines(self.accuracy, place, (low + high) / 2)
        interval = EdgeInterval(low, high, "", "")
        words = f"{_where(last)}: {last.seen.kind}; {_where(first)}: {first.seen.kind}"
        return Found(
            end_budget(interval, lines),
            interval=(low, high),
            n=len(alike) + len(others),
            start_s=min(point.start_s for point in (*alike, *others)),
            end_s=max(point.end_s for point in (*alike, *others)),
            words=words,
        )


def _point(evidence: Evidence, current: Any, event: dict[str, Any]) -> Point:
    window = current.within(event["start_s"], event["end_s"])
    declared = declared_currents(evidence)
    seen = class_of(window.time_s, window.value, declared_A=declared, watched_s=float(event["watched_s"]))
    ohm = event.get("ohm")
    return Point(
        role=event["role"],
        ohm=ohm if isinstance(ohm, (int, float)) else None,
        celsius=event.get("celsius"),
        start_s=event["start_s"],
        end_s=event["end_s"],
        seen=seen,
        void=bool(event["void"]),
    )


def declared_currents(evidence: Evidence) -> list[tuple[float, float]]:
    """(low, high) of each current that an ID can select; of the first stage where no bands are declared."""
    specification = evidence.specification
    bands = [(band.current.low, band.current.high) for band in specification.id_bands]
    known = [(low, high) for low, high in bands if low is not None and high is not None and low > 0]
    if known:
        return known
    stage = specification.charge.stages[0].current
    return [(stage.low if stage.low and stage.low > 0 else stage.high or 1.0, stage.high or 1.0)]


def _where(point: Point) -> str:
    if point.celsius is not None and point.ohm is not None:
        return f"{point.celsius:.2f} °C ({si(point.ohm, 'Ω')})"
    return point.role if point.ohm is None else si(point.ohm, "Ω")


def _mean_A(point: Point) -> float:
    return point.seen.current.value if point.seen.current is not None else 0.0


def resistor_lines(accuracy: Accuracy, place: str, ohm: float) -> list[Contribution]:
    """Budget lines of a programmable resistor at a place, such as "id.resistor"."""
    name, _, dialect = accuracy.file.at(place)
    spans = sorted((span for span in dialect.accuracy.resistance if span.range >= ohm), key=lambda span: span.range)
    if not spans:
        raise ValueError(f"{name}: its dialect states no accuracy for {si(ohm, 'Ω')}")
    half = spans[0].set * ohm + spans[0].residual
    source = f"accuracy, dialect {dialect.name}"
    contact = Contribution.from_half_width("contact", CONTACT_ohm, "rectangular", source="common practice, no source")
    return [Contribution.from_half_width(name, half, "rectangular", source=source), contact]


def id_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding of an ID sweep, by limit name."""
    points = Points.of(evidence, accuracy, "id")
    if not points.points:
        return {}
    found: dict[str, Found] = {}
    outside: list[str] = []
    for number, band in enumerate(evidence.specification.id_bands, 1):
        found[f"id.band{number}.current"] = points.band_current(number, band.current.low, band.current.high)
        for side, end in (("lower", "low"), ("upper", "high")):
            name = f"band{number}.{side}"
            outside.append(f"{name}_outside")
            roles = (f"{name}_edge", f"{name}_outside")
            found[f"id.{name}_edge"] = points.edge(f"band{number}.{end}", roles, "id.resistor")
    found["id.outside"] = points.state(outside)
    found["id.open"], found["id.short"] = points.state(["open"]), points.state(["short"])
    return found


def start_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Limits for starting, and what open and short do, by limit name."""
    points = Points.of(evidence, accuracy, "temperature")
    if not points.points:
        return {}
    found = {
        f"temperature.{side}": points.edge(f"{side}_inside", (side, f"{side}_outside"), "thermistor.resistor")
        for side in ("start_low", "start_high")
    }
    found["temperature.open"], found["temperature.short"] = points.state(["open"]), points.state(["short"])
    return found
