"""What watching the taps found: the current that each cell exchanges because it stands high or low, by trace and event.

A screening: it says "found, so much" or "none found above L in t min", with offsets and periods; never an absence.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from drivers.text.si import si
from sequencer.analysis.balance import Exchange, Phases, balance, standing_A
from sequencer.analysis.estimates import Estimate, mean_estimate
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence
from sequencer.engine.found import Found
from sequencer.engine.swept import ended_early, given_up
from sequencer.engine.tap_watch import LEFT_OUT, PERIODS
from sequencer.engine.walks import GOES_ON

Floats = NDArray[np.float64]
SCREENING, NONE_ABOVE = "balancing.screening", "balancing.none_above"
ON_PURPOSE = (
    "on purpose: a screening shows no absence; that takes a positive control at this limit on every tap, and hours in"
    " every phase of a charge"
)
MOST_AWAY = 0.1  # of a phase in which the charger's current may be below half of what it is otherwise
FEWEST_READINGS = 8  # of a tap in a phase
ZERO_SHARE = 2.0  # of what the scanner's accuracy and thermal voltages allow: a larger zero is a fault of the bench


class Untold(Exception):
    """Why the record does not tell."""


@dataclass(frozen=True)
class Screened:
    """What one watch showed. offset_V : of a high or low cell.   exchanges : two a cell, or one of two cells."""

    exchanges: tuple[Exchange, ...]
    phases: Phases
    zeros_A: Floats
    standing_A: Floats
    offset_V: float
    start_s: float
    end_s: float
    patterns_s: float
    longest_s: float

    @property
    def detectable_A(self) -> float:
        """What would have been found in any cell."""
        return max(one.detectable_A for one in self.exchanges)

    @property
    def found(self) -> tuple[Exchange, ...]:
        """What was found, the largest first; the others only where they are clearly a cell's own."""
        seen = sorted((one for one in self.exchanges if one.seen), key=lambda one: -abs(one.out_A))
        return (*seen[:1], *(one for one in seen[1:] if one.clear))

    def of(self, cell: int) -> Exchange:
        """The larger of what a cell exchanges when high and when low."""
        return max((one for one in self.exchanges if one.cell == cell), key=lambda one: abs(one.out_A))


class Watch:
    """The last watch of the taps in a record."""

    def __init__(self, evidence: Evidence, accuracy: Accuracy) -> None:
        self._evidence = evidence
        self._accuracy = accuracy
        self._taps = evidence.pack.cells - 1
        self._traces = [evidence.trace(f"tap{number}.current") for number in range(1, self._taps + 1)]

    def screened(self) -> Screened:
        """Raises Untold where anything is missing that the answer hangs on."""
        events = self._phase_events()
        estimates = [self._estimates(event["measured_s"], event["end_s"]) for event in events]
        zeros, drift_A_s = self._zeros()
        phases = Phases(
            signs=np.array([event["signs"] for event in events]),
            mean_A=np.array([[one.value for one in row] for row in estimates]),
            u_A=np.array([[one.u for one in row] for row in estimates]),
            dof=np.array([[one.dof for one in row] for row in estimates]),
            middle_s=np.array([(event["measured_s"] + event["end_s"]) / 2 for event in events]),
            drift_A_s=drift_A_s,
            scale=np.array([self._scale(number) for number in range(1, self._taps + 1)]),
        )
        hold_s = events[0]["end_s"] - events[0]["start_s"]
        screened = Screened(
            exchanges=balance(phases),
            phases=phases,
            zeros_A=zeros,
            standing_A=standing_A(phases, zeros),
            offset_V=float(events[0]["offset_V"]),
            start_s=events[0]["start_s"],
            end_s=events[-1]["end_s"],
            patterns_s=sum(event["end_s"] - event["start_s"] for event in events if any(event["signs"])),
            longest_s=(events[0]["measured_s"] - events[0]["start_s"]) / LEFT_OUT if hold_s else 0.0,
        )
        self._check_absorbed(screened)
        return screened

    def _phase_events(self) -> list[dict[str, Any]]:
        events = self._evidence.events("tap-phase")
        why = given_up(self._evidence, "balancing")
        if why is not None:
            raise Untold(why)
        ends = [event for event in self._evidence.events("tap-zero") if event["when"] == "after"]
        if not events or not ends:
            raise Untold("the taps were not watched to the end" + ended_early(self._evidence))
        self._check_charging(events)
        return events

    def _check_charging(self, events: list[dict[str, Any]]) -> None:
        """A charge that a monitor stops and lets go on again shows other cells than those that were set."""
        current = self._evidence.trace("charger.current")
        read = [current.within(event["start_s"], event["end_s"]).value for event in events]
        if not all(one.size for one in read):
            raise Untold("the charger's current was not read in every phase")
        floor_A = GOES_ON * max(float(np.median(one)) for one in read)
        for event, one in zip(events, read, strict=True):
            away = float(np.mean(one < floor_A))
            if away > MOST_AWAY:
                told = f"the charge did not go on while the cells stood apart: away for {away * 100:.0f} % of the time"
                raise Untold(f"{told} from {event['start_s']:.0f} s to {event['end_s']:.0f} s")

    def _estimates(self, start_s: float, end_s: float) -> list[Estimate]:
        """Mean current of each tap between two moments, with what its readings are worth."""
        found = []
        for number, trace in enumerate(self._traces, 1):
            window = trace.within(start_s, end_s)
            if window.value.size < FEWEST_READINGS:
                raise Untold(f"tap {number} has {window.value.size} readings from {start_s:.0f} s to {end_s:.0f} s")
            found.append(mean_estimate(window.value))
        return found

    def _zeros(self) -> tuple[Floats, Floats]:
        """Mean zero of each tap, A, and what it drifts, A/s. A zero that no accuracy explains is the bench's fault."""
        before, after = (
            next((event for event in self._evidence.events("tap-zero") if event["when"] == when), None)
            for when in ("before", "after")
        )
        if before is None or after is None:
            raise Untold("a zero with the charger removed is missing")
        read = [[one.value for one in self._estimates(event["start_s"], event["end_s"])] for event in (before, after)]
        zeros_A = np.array(read)
        for number, zero_A in enumerate(np.abs(zeros_A).max(axis=0), 1):
            most_A = ZERO_SHARE * self._zero_bound_A(number)
            if zero_A > most_A:
                told = f"tap {number} reads {si(float(zero_A), 'A', 2)} with the charger removed"
                raise Untold(f"{told}; its scanner's accuracy allows {si(most_A, 'A', 2)}: a leak, or another source")
        apart_s = (after["start_s"] + after["end_s"] - before["start_s"] - before["end_s"]) / 2
        return zeros_A.mean(axis=0), (zeros_A[1] - zeros_A[0]) / apart_s

    def _scale(self, number: int) -> float:
        return math.sqrt(3.0) * math.hypot(*(line.contribution for line in self._accuracy.tap_scale(number)))

    def _zero_bound_A(self, number: int) -> float:
        lines = self._accuracy.scanned(f"taps.{number - 1}.meter", 0.0, "zero")
        shunt_ohm = self._evidence.bench.bench.wiring.taps[number - 1].shunt_ohm
        return math.sqrt(3.0) * math.hypot(*(line.contribution for line in lines)) / shunt_ohm

    def _check_absorbed(self, screened: Screened) -> None:
        """A channel carries the currents of its own tap and of all above; what goes into it, it must absorb."""
        flows_A = screened.phases.mean_A - screened.zeros_A
        through_A = np.cumsum(flows_A[:, ::-1], axis=1)[:, ::-1]
        for number, least_A in enumerate(through_A.min(axis=0), 1):
            name, _, dialect = self._evidence.bench.at(f"taps.{number - 1}.supply")
            sinks_A = dialect.sinks or 0.0
            if -least_A > sinks_A + screened.detectable_A:
                told = f"the supply of cell {number} ({name}) would have to absorb {si(-float(least_A), 'A', 3)}"
                raise Untold(
                    f"{told}; its dialect '{dialect.name}' says {si(sinks_A, 'A', 3)}: it may not hold the cell"
                )

    def budget(self, one: Exchange, value_A: float) -> Budget:
        """Of an exchange; value_A : its amount."""
        lines = [
            Contribution("scatter of the phases", one.u_scatter_A, dof=one.dof, source="baselines and readings"),
            Contribution.from_half_width("drift of the zeros", one.drift_A, source="charger removed, before and after"),
            Contribution("what the currents of the cells leave", one.misfit_A, source="residuals of the phases"),
        ]
        for number, flow_A in enumerate(one.taps_A, 1):
            lines += self._accuracy.tap_scale(number, flow_A)
        return Budget(value_A, "A", tuple(lines))


def balance_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding about balancing, by limit name; nothing where the taps were not watched."""
    if not watched(evidence):
        return {}
    cells = range(1, evidence.pack.cells + 1)
    purpose = {NONE_ABOVE: Found(absent=ON_PURPOSE)}
    watch = Watch(evidence, accuracy)
    try:
        screened = watch.screened()
    except Untold as why:
        untold = Found(trouble=str(why))
        return {SCREENING: untold, **{f"balancing.cell{cell}.current": untold for cell in cells}, **purpose}
    by_cell = {f"balancing.cell{cell}.current": _of_cell(watch, screened, screened.of(cell)) for cell in cells}
    return {SCREENING: _screening(watch, screened), **by_cell, **purpose}


def beyond_screening(verdict: dict[str, Any], evidence: Evidence) -> bool:
    """Whether a limit was not run because a screening cannot show it: left out by the procedure, on purpose."""
    return bool(verdict["limit"] == NONE_ABOVE and verdict["verdict"] == "not run") and watched(evidence)


def watched(evidence: Evidence) -> bool:
    """Whether the taps were watched, or at least begun to be."""
    return evidence.begun("watch_taps") is not None


def _of_cell(watch: Watch, screened: Screened, one: Exchange) -> Found:
    return Found(
        watch.budget(one, abs(one.out_A)),
        n=len(screened.phases.signs),
        start_s=screened.start_s,
        end_s=screened.end_s,
        words=_cell_words(screened, one),
    )


def _cell_words(screened: Screened, one: Exchange) -> str:
    if one in screened.found:
        return f"{one.kind.format(cells='the cell')}; a screening"
    return f"not found; from {si(max(one.detectable_A, one.clear_A), 'A', 2)} on it would be; a screening"


def _screening(watch: Watch, screened: Screened) -> Found:
    largest = next(iter(screened.found), None)
    return Found(
        None if largest is None else watch.budget(largest, abs(largest.out_A)),
        seen="none found" if largest is None else "found",
        n=len(screened.phases.signs),
        start_s=screened.start_s,
        end_s=screened.end_s,
        detectable=screened.detectable_A,
        words=f"{_amounts(screened)}{conditions(screened)}",
    )


def _amounts(screened: Screened) -> str:
    if not screened.found:
        return ""
    told = []
    for kind in dict.fromkeys(one.kind for one in screened.found):
        mine = [one for one in screened.found if one.kind == kind]
        cells = ", ".join(str(cell) for cell in sorted(one.cell for one in mine))
        named = kind.format(cells=f"cell{'s' * (len(mine) > 1)} {cells}")
        told.append(f"{_span([abs(one.out_A) for one in mine])} {named}")
    return f"{'; '.join(told)}; "


def conditions(screened: Screened) -> str:
    """Under what it was looked for, and what inner taps cannot show."""
    return (
        f"a screening of {screened.patterns_s / 60:.1f} min with cells ±{si(screened.offset_V, 'V', 3)}"
        f" from their mean, while charging, for periods up to {screened.longest_s:g} s (each pattern stands for"
        f" {PERIODS:g} of them), alpha = beta = 5 %; inner taps show differences between cells only;"
        f" whatever the offsets, {_span(screened.standing_A, 2)} flow through each tap, which is no balancing"
    )


def _span(flows_A: Sequence[float] | Floats, digits: int = 3) -> str:
    """The smallest and the largest of some currents; one where they read the same."""
    low_A, high_A = float(np.min(flows_A)), float(np.max(flows_A))
    low, high = si(low_A, "A", digits), si(high_A, "A", digits)
    return high if low == high else f"{low} to {high}"


def as_data(evidence: Evidence, accuracy: Accuracy) -> dict[str, Any] | None:
    """What the figure of the tap currents shows; None where nothing can be told."""
    if not watched(evidence):
        return None
    watch = Watch(evidence, accuracy)
    try:
        screened = watch.screened()
    except Untold:
        return None
    rest = screened.phases.mean_A[~np.any(screened.phases.signs, axis=1)].mean(axis=0)
    return {
        "offset_V": screened.offset_V,
        "longest_s": screened.longest_s,
        "patterns_s": screened.patterns_s,
        "detectable_A": screened.detectable_A,
        "standing_A": screened.standing_A.tolist(),
        "patterns": [
            {"signs": signs, "taps_A": taps}
            for signs, taps in zip(
                screened.phases.signs.tolist(), (screened.phases.mean_A - rest).tolist(), strict=True
            )
            if any(signs)
        ],
        "exchanges": [_exchange(watch, screened, one) for one in screened.exchanges],
    }


def _exchange(watch: Watch, screened: Screened, one: Exchange) -> dict[str, Any]:
    budget = watch.budget(one, one.out_A)
    return {
        "cell": one.cell,
        "way": one.way,
        "out_A": one.out_A,
        "U_A": budget.U,
        "critical_A": one.critical_A,
        "detectable_A": one.detectable_A,
        "found": one in screened.found,
    }
