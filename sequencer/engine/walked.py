"""What walks while charging found: where a running charge stops for temperature or for one cell, how fast, and whether
it goes on; read from the traces, the events only say when what was set."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from sequencer.analysis.edges import EdgeInterval, end_budget
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence, Trace
from sequencer.engine.found import Found
from sequencer.engine.swept import resistor_lines

STOPPED = 0.05  # of the control's current
GOES_ON = 0.5


@dataclass(frozen=True)
class Leg:
    """One setting of a walk: what was set, when, and when the charge stopped within it (None: it did not)."""

    event: dict[str, Any]
    start_s: float
    end_s: float
    stop_s: tuple[float, float] | None  # last reading above, first below


class Walks:
    """All walks of a record."""

    def __init__(self, evidence: Evidence, accuracy: Accuracy) -> None:
        self._evidence = evidence
        self._accuracy = accuracy
        self._current = evidence.trace("charger.current")
        self._control_A = self._first_control()

    def _first_control(self) -> float | None:
        """Current of the first good control, A."""
        for event in self._evidence.events("control"):
            if event["good"]:
                window = self._current.within(event["end_s"] - 2.0, event["end_s"])
                return float(np.mean(window.value)) if window.value.size else None
        return None

    def legs(self, finding: str, way: str, cell: int | None = None) -> list[Leg]:
        made = [
            event
            for event in self._evidence.events("walk")
            if event["finding"] == finding and event["way"] == way and event.get("cell") == cell
        ]
        return [self._leg(event) for event in made]

    def _leg(self, event: dict[str, Any]) -> Leg:
        window = self._current.within(event["start_s"], event["end_s"] + 0.01)
        # Without a good control nobody knows what a stopped charge is: nothing is called stopped then.
        below = np.flatnonzero(window.value < STOPPED * (self._control_A or 0.0))
        stop_s = None
        if below.size:
            first = int(below[0])
            before_s = float(window.time_s[first - 1]) if first else float(event["start_s"])
            stop_s = (before_s, float(window.time_s[first]))
        return Leg(event, event["start_s"], event["end_s"], stop_s)

    def as_list(self) -> list[dict[str, Any]]:
        """Every leg as data, for the maps in a report: what was set, when, and when the charge stopped."""
        legs = [self._leg(event) for event in self._evidence.events("walk")]
        return [
            {
                "finding": leg.event["finding"],
                "way": leg.event["way"],
                "cell": leg.event.get("cell"),
                "cell_V": _finite(self.cell_V(leg.event["cell"], leg)) if leg.event.get("cell") else None,
                "celsius": leg.event.get("celsius"),
                "ohm": leg.event.get("ohm"),
                "start_s": leg.start_s,
                "end_s": leg.end_s,
                "stop_s": None if leg.stop_s is None else leg.stop_s[1],
                "goes_on": self._goes_on(leg),
            }
            for leg in legs
        ]

    # temperatures

    def temperature(self, side: str) -> Found:
        """The limit for going on, in ohms."""
        legs = self.legs(f"temperature.{side}", "out")
        if self._control_A is None or not legs:
            return Found(absent="it was not walked")
        stopped = next((leg for leg in legs if leg.stop_s is not None), None)
        if stopped is None:
            return Found(trouble=f"the charge went on as far as {legs[-1].event['celsius']:.2f} °C")
        index = legs.index(stopped)
        if index == 0:
            return Found(trouble=f"the charge stopped at {stopped.event['celsius']:.2f} °C, the first step of the walk")
        last = legs[index - 1]
        low, high = sorted((float(last.event["ohm"]), float(stopped.event["ohm"])))
        lines = resistor_lines(self._accuracy, "thermistor.resistor", (low + high) / 2)
        return Found(
            end_budget(EdgeInterval(low, high, "", ""), lines),
            interval=(low, high),
            n=len(legs),
            start_s=legs[0].start_s,
            end_s=stopped.end_s,
            words=f"{_between(last, stopped)}; {self._back(side)}",
        )

    def _back(self, side: str) -> str:
        back = self.legs(f"temperature.{side}", "back")
        resumed = next((leg for leg in back if self._goes_on(leg)), None)
        if resumed is not None:
            return f"goes on again at {resumed.event['celsius']:.2f} °C"
        return "did not go on by itself on the way back" if back else "was not walked back"

    def _goes_on(self, leg: Leg) -> bool:
        window = self._current.within(leg.start_s, leg.end_s + 0.01)
        return bool(np.any(window.value > GOES_ON * (self._control_A or np.inf)))

    # cells

    def cell(self, cell: int) -> dict[str, Found]:
        """Trip voltage, stop time and release of one cell, by the last part of their names."""
        legs = self.legs("tap_trip", "out", cell)
        if self._control_A is None or not legs:
            absent = Found(absent="the cell was not raised")
            return {"voltage": absent, "stop_time": absent, "release": absent}
        stopped = next((leg for leg in legs if leg.stop_s is not None), None)
        if stopped is None:
            highest = self.cell_V(cell, legs[-1])
            none = Found(none=f"the charge went on with the cell at {highest:.3f} V", end_s=legs[-1].end_s)
            return {"voltage": none, "stop_time": none, "release": Found(trouble="the charge had not stopped")}
        index = legs.index(stopped)
        return {
            "voltage": self._trip(cell, legs, index),
            "stop_time": self._stop_time(stopped),
            "release": self._release(cell),
        }

    def _trip(self, cell: int, legs: list[Leg], index: int) -> Found:
        stopped = legs[index]
        if index == 0:
            return Found(trouble=f"the charge stopped at {stopped.event['cell_V']:.3f} V, the first step")
        low_V, high_V = sorted((self.cell_V(cell, legs[index - 1]), self.cell_V(cell, stopped)))
        if not np.isfinite(low_V + high_V):
            return Found(trouble="the cell's voltage was not read at the step before or at the trip")
        return Found(
            end_budget(EdgeInterval(low_V, high_V, "", ""), self._cell_lines(cell, high_V), unit="V"),
            interval=(low_V, high_V),
            n=index + 1,
            start_s=legs[0].start_s,
            end_s=stopped.end_s,
            words=f"charging at {low_V:.4f} V, stopped at {high_V:.4f} V",
        )

    def cell_V(self, cell: int, leg: Leg) -> float:
        """Voltage of a cell in a leg: its tap supply's meter; of the top cell what is left to the contacts; or nan.

        Read until the charge stops: afterwards the contacts no longer carry the drop over the pack's resistance.
        """
        cells = self._evidence.pack.cells
        until_s = leg.stop_s[1] if leg.stop_s is not None else leg.end_s
        if cell < cells:
            return _mean(self._evidence.trace(f"tap{cell}.voltage").within(leg.start_s, leg.end_s + 0.01))
        top_V = _mean(self._evidence.trace("charger.voltage").within(leg.start_s + 0.15, until_s - 1e-6))
        below = [self._evidence.trace(f"tap{number}.voltage") for number in range(1, cells)]
        return top_V - sum(_mean(trace.within(leg.start_s, leg.end_s + 0.01)) for trace in below)

    def _cell_lines(self, cell: int, cell_V: float) -> list[Contribution]:
        cells = self._evidence.pack.cells
        if cell < cells:
            return self._accuracy.tap(cell, cell_V)
        lines = self._accuracy.volts("node.charger_voltage", cell_V * cells)
        for number in range(1, cells):
            lines += self._accuracy.tap(number, cell_V)
        return lines

    def _stop_time(self, stopped: Leg) -> Found:
        assert stopped.stop_s is not None
        before_s, after_s = stopped.stop_s
        middle_s, half_s = (before_s + after_s) / 2 - stopped.start_s, (after_s - before_s) / 2
        bracket = Contribution.from_half_width("spacing of the readings", half_s, "rectangular", source="fast pace")
        delay = Contribution.from_half_width(
            "from command to step", 0.05, "rectangular", source="common practice, no source"
        )
        budget = Budget(middle_s, "s", (bracket, delay))
        return Found(budget, n=1, start_s=stopped.start_s, end_s=after_s)

    def _release(self, cell: int) -> Found:
        back = self.legs("tap_trip", "back", cell)
        if not back:
            return Found(absent="the cell was not taken back")
        seen = "resumes" if self._goes_on(back[0]) else "stays off"
        words = f"watched for {back[0].end_s - back[0].start_s:.0f} s"
        return Found(seen=seen, n=1, start_s=back[0].start_s, end_s=back[0].end_s, words=words)


def _between(last: Leg, stopped: Leg) -> str:
    return f"charging at {last.event['celsius']:.2f} °C, stopped at {stopped.event['celsius']:.2f} °C"


def _mean(trace: Trace) -> float:
    return float(np.mean(trace.value)) if trace.value.size else float("nan")


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def walk_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding of the walks in a record, by limit name."""
    if not evidence.events("walk"):
        return {}
    walks = Walks(evidence, accuracy)
    found: dict[str, Found] = {}
    made = {event["finding"] for event in evidence.events("walk")}
    for side in ("run_low", "run_high"):
        if f"temperature.{side}" in made:
            found[f"temperature.{side}"] = walks.temperature(side)
    if "tap_trip" in made:
        for cell in range(1, evidence.pack.cells + 1):
            found |= {f"tap_trip.cell{cell}.{what}": one for what, one in walks.cell(cell).items()}
    return found
