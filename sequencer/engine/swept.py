"""What the insertions of sweeps found: currents of bands, edges, starts; classes are read anew from the traces."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from drivers.text.measures import Band
from drivers.text.si import si
from sequencer.analysis.classes import Seen, class_of
from sequencer.analysis.edges import UNDECIDED, EdgeInterval, end_budget
from sequencer.analysis.estimates import mean_between
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.agreement import currents_differ
from sequencer.engine.decade import Decade, in_kelvins
from sequencer.engine.evidence import Evidence
from sequencer.engine.found import Found
from sequencer.engine.insertion import MEAN_s
from sequencer.engine.targets import Side, sides, starts

APART = 0.05  # of a resistance: with a pull-up of 0.1 to 20 times it the contact's voltage moves by 0.2 % and more
SENSE_SHARE = 0.002
SENSE_FLOOR_V = 0.5e-3
Label = Callable[[Seen], str]


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
    finding: str
    points: tuple[Point, ...]
    given_up: str | None = None

    @classmethod
    def of(cls, evidence: Evidence, accuracy: Accuracy, finding: str) -> Points:
        current = evidence.trace("charger.current")
        made = [event for event in evidence.events("point") if event["finding"] == finding]
        points = tuple(_point(evidence, current, event) for event in made)
        return cls(evidence, accuracy, finding, points, given_up(evidence, finding))

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

    def state(self, roles: Sequence[str]) -> Found:
        """Whether the charger charged at any of these points; that it did not takes all of them."""
        points = self.at(*roles)
        flowing = [point for point in points if point.seen.flows]
        if flowing:
            stuck = next((words for point in flowing if (words := self._resistor_stuck(point))), None)
            if stuck is not None:
                return Found(trouble=stuck)
            words = f"{_where(flowing[0])}: {flowing[0].seen.words}"
            return Found(seen="charges", n=len(points), start_s=flowing[0].start_s, end_s=flowing[0].end_s, words=words)
        missing = len(set(roles) - {point.role for point in points})
        if missing:
            points_of = f"{missing} of {len(roles)} point{'s' * (len(roles) > 1)}"
            return self.not_shown(f"{points_of} {'was' if missing == 1 else 'were'} not shown")
        void = [point for point in points if point.void]
        if void:
            return Found(
                trouble=f"the control after {_where(void[0])} failed twice; what was seen there counts for nothing"
            )
        undecided = [point for point in points if point.seen.kind != "no charge"]
        if undecided:
            return Found(trouble=f"{_where(undecided[0])}: {undecided[0].seen.words}")
        words = f"{len(points)} point{'s' * (len(points) > 1)}"
        return Found(seen="no charge", n=len(points), start_s=points[0].start_s, end_s=points[-1].end_s, words=words)

    def not_shown(self, what: str) -> Found:
        """What was not shown is inconclusive where the sweep gave up, and not run where it never came so far."""
        if self.given_up is not None:
            return Found(trouble=f"{what}: {self.given_up}")
        return Found(absent=what + ended_early(self.evidence))

    def _resistor_stuck(self, point: Point) -> str | None:
        """Why a point that must not charge may have shown the charger another point's resistance; None where not.

        The charger's own excitation makes a voltage at the contact, which moves with what really stands there.
        """
        here_V = self._sense_V(point)
        for other in self.points:
            if other.seen.label != point.seen.label or not _apart(point, other):
                continue
            if abs(self._sense_V(other) - here_V) <= max(SENSE_FLOOR_V, SENSE_SHARE * abs(here_V)) < abs(here_V):
                told = f"the contact's voltage at {_where(point)} is that at {_where(other)}, {si(here_V, 'V')}"
                return f"{told}: the resistor did not do as it was told"
        return None

    def _sense_V(self, point: Point) -> float:
        """Mean voltage at the resistor's contact during one point; nan without a reading."""
        name = "id" if self.finding == "id" else "thermistor"
        values = self.evidence.trace(f"{name}.sense").within(point.start_s, point.end_s).value
        return float(np.mean(values)) if values.size else float("nan")

    def band_current(self, number: int, limit: Band) -> Found:
        """The current that a band selects: of its points, the one closest to a limit."""
        roles = [f"band{number}.{part}" for part in ("low", "middle", "high")]
        points = self.at(*roles)
        silent = next((point for point in points if point.seen.kind != "charges" and not point.void), None)
        if silent is not None:
            doubt = self._silent_once(silent, points)
            if doubt is not None:
                return Found(trouble=doubt)
            return Found(none=f"{_where(silent)}: {silent.seen.words}", start_s=silent.start_s, end_s=silent.end_s)
        if any(point.void for point in points):
            return Found(trouble="a control failed twice within the band")
        shown = len({point.role for point in points})
        if shown < len(roles):
            return self.not_shown(f"{shown} of {len(roles)} points of the band were shown")
        return self._current(min(points, key=lambda point: _margin_A(point, limit)), len(points))

    def _silent_once(self, silent: Point, points: list[Point]) -> str | None:
        """Why a point of a band that did not charge may have been the mains' doing; None where it did so again."""
        same = [point for point in points if point.role == silent.role]
        told = f"{_where(silent)}: {silent.seen.words}"
        if any(point.seen.kind == "charges" for point in same):
            return (
                f"{told}; shown again, it charged: a charger that fails at times, or mains that were gone for a while"
            )
        if any(point.void for point in same):
            return f"{told}; the control after it failed twice"
        if len(same) == 1 and self.given_up is not None:
            return f"{told}; it was not shown again: {self.given_up}"
        return None

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
            trouble=currents_differ(self.evidence, self.accuracy, point.end_s - MEAN_s, point.end_s),
        )

    def edge(self, roles: Sequence[str], place: str, label: Label) -> Found:
        """The bracket between the outermost setting like the inmost one and the innermost unlike it, in ohms.

        roles : of the points on one side, from the inside outward; the first of them that charges is the inmost.
        """
        shown = [point for point in self.at(*roles) if point.ohm is not None]
        points = [point for point in shown if not point.void]
        inside = next((point for role in roles for point in points if point.role == role and point.seen.flows), None)
        if inside is None:
            refused = next((point for point in points), None)
            if refused is None:
                return self.not_shown("the edge was not looked for")
            return Found(trouble=f"{_where(refused)}, inside, does not charge: {refused.seen.words}")
        known = [point for point in points if label(point.seen) != UNDECIDED]
        alike = [point for point in known if label(point.seen) == label(inside.seen)]
        others = [point for point in known if label(point.seen) != label(inside.seen)]
        if not others:
            return self._no_edge(roles[-1], alike, inside, shown)
        return self._bracket(inside, alike, others, place)

    def _no_edge(self, outermost: str, alike: list[Point], inside: Point, shown: list[Point]) -> Found:
        """Nothing changed as far out as was looked, which is beyond all that is declared: the edge is missing."""
        furthest = max(alike, key=lambda point: _distance(point, inside))
        if furthest.role == outermost and outermost.endswith("_edge"):
            return Found(trouble=f"the next band selects the same current, at {_where(furthest)}: no edge can be told")
        if furthest.role == outermost:
            told = self._resistor_stuck(furthest)
            if told is not None:
                return Found(trouble=told)
            words = f"no edge as far as {_where(furthest)}: {furthest.seen.words}"
            return Found(none=words, start_s=furthest.start_s, end_s=furthest.end_s)
        beyond = next((point for point in shown if _distance(point, inside) > _distance(furthest, inside)), None)
        if beyond is None:
            return self.not_shown(f"nothing was shown beyond {_where(furthest)}")
        why = "the control after it failed twice" if beyond.void else beyond.seen.words
        return Found(trouble=f"{_where(beyond)} tells nothing: {why}")

    def _bracket(self, inside: Point, alike: list[Point], others: list[Point], place: str) -> Found:
        last = max(alike, key=lambda point: _distance(point, inside))
        first = min(others, key=lambda point: _distance(point, inside))
        if _distance(last, inside) > _distance(first, inside):
            return Found(trouble=f"answers contradict each other: {_where(first)} and {_where(last)}")
        blurred = last.ohm == first.ohm
        if blurred:  # shown again, this setting was answered otherwise: the edge lies somewhere around it
            nearer = [point for point in alike if _distance(point, inside) < _distance(first, inside)]
            further = [point for point in others if _distance(point, inside) > _distance(last, inside)]
            if not (nearer and further):
                return Found(trouble=f"answers contradict each other at {_where(first)}, and nothing lies around it")
            last = max(nearer, key=lambda point: _distance(point, inside))
            first = min(further, key=lambda point: _distance(point, inside))
        return self._interval(last, first, [*alike, *others], place, blurred)

    def _interval(self, last: Point, first: Point, shown: list[Point], place: str, blurred: bool) -> Found:
        """The edge between two settings, as they were measured where the bench can do that."""
        assert last.ohm is not None
        assert first.ohm is not None
        decade = Decade.of(self.evidence, self.accuracy, place)
        low, high = sorted((last.ohm, first.ohm))
        interval = EdgeInterval(low, high, "", "").converted(decade.ohm)
        words = f"{_where(last)}: {last.seen.kind}; {_where(first)}: {first.seen.kind}"
        if blurred:
            words += "; a setting between them was answered once so and once otherwise"
        budget = end_budget(interval, decade.lines(last.ohm, first.ohm))
        kelvins = in_kelvins(self.evidence, budget) if last.celsius is not None else ""
        times = min(sum(point.ohm == one.ohm for point in shown) for one in (last, first))
        repeated = f"; both shown {times} times" if times > 1 else ""
        return Found(
            budget,
            interval=(interval.low, interval.high),
            n=len(shown),
            start_s=min(point.start_s for point in shown),
            end_s=max(point.end_s for point in shown),
            words=words + repeated + kelvins + decade.words(last.ohm, first.ohm),
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


def _margin_A(point: Point, limit: Band) -> float:
    """How far a point's current lies inside its limit, A; below zero outside."""
    mean_A = point.seen.current.value if point.seen.current is not None else 0.0
    low_A = -math.inf if limit.low is None else limit.low
    high_A = math.inf if limit.high is None else limit.high
    return min(mean_A - low_A, high_A - mean_A)


def _distance(point: Point, inside: Point) -> float:
    """How far a setting lies from the inmost one, as a ratio."""
    assert point.ohm is not None
    assert inside.ohm is not None
    return abs(math.log(point.ohm / inside.ohm))


def _apart(one: Point, other: Point) -> bool:
    """Whether two settings differ by so much that the charger's own excitation must show it."""
    if one.ohm is None or other.ohm is None:
        return one.ohm is not other.ohm
    return abs(math.log(one.ohm / other.ohm)) > APART


def id_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding of an ID sweep, by limit name."""
    points = Points.of(evidence, accuracy, "id")
    step = next((step.sweep_id for step in evidence.procedure.steps if step.sweep_id is not None), None)
    if step is None or not (points.points or points.given_up):
        return {}
    outward = sides(evidence.specification, step.outside)
    found = {
        f"id.band{number}.current": points.band_current(number, band.current)
        for number, band in enumerate(evidence.specification.id_bands, 1)
    }
    found |= {f"id.{side.name}_edge": points.edge(_looked_at(side), "id.resistor", _band_of) for side in outward}
    found["id.outside"] = points.state([side.roles[-1] for side in outward if not side.neighbour])
    found["id.open"], found["id.short"] = points.state(["open"]), points.state(["short"])
    return found


def _looked_at(side: Side) -> tuple[str, ...]:
    return side.roles[:-1] if side.neighbour else side.roles


def _band_of(seen: Seen) -> str:
    return seen.label


def start_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Limits for starting, and what open and short do, by limit name."""
    points = Points.of(evidence, accuracy, "temperature")
    if not (points.points or points.given_up):
        return {}
    found = {}
    for side in ("start_low", "start_high"):
        roles = (f"{side}_nominal", f"{side}_inside", side, f"{side}_outside")
        found[f"temperature.{side}"] = points.edge(roles, "thermistor.resistor", starts)
    found["temperature.open"], found["temperature.short"] = points.state(["open"]), points.state(["short"])
    return found


def ended_early(evidence: Evidence) -> str:
    """Words to add to what is missing where the run did not come to its end."""
    return "" if evidence.ended == "complete" else f"; the run ended early: {evidence.manifest.get('why')}"


def given_up(evidence: Evidence, finding: str) -> str | None:
    """Why a sweep or walk ended before all was shown; None where it did not, or the run was ended instead."""
    return next((str(event["why"]) for event in evidence.events("given-up") if event["finding"] == finding), None)
