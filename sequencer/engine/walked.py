"""What walks while charging found: where a running charge stops for temperature or for one cell, how fast, and whether
it goes on; read from the traces, the events only say when what was set."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from sequencer.analysis.edges import EdgeInterval, end_budget
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.decade import Decade, in_kelvins
from sequencer.engine.evidence import Evidence, Trace
from sequencer.engine.found import Found
from sequencer.engine.insertion import MEAN_s
from sequencer.engine.swept import ended_early, given_up
from sequencer.engine.targets import ends
from sequencer.engine.walks import GOES_ON, OVER_V, STOPPED

TAP_LEADS_ohm = 1.0  # between a tap's channel and the charger's pin, beyond the shunt: common practice, no source
FOLLOWS_V = 0.05  # a cell that reads further from what it was set to was not raised as the procedure says
FULL = 0.95  # of the control's current: what is less has begun to fall
JUST_BEFORE_s = 0.3  # a reading of the fast pace and more
BEFORE_s = 3.5  # looked back so far for what a cell stood at before it was raised


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
        finding = f"temperature.{side}"
        probe, approach, out = (self.legs(finding, way) for way in ("probe", "approach", "out"))
        if self._control_A is None or not probe:
            return self._not_walked("walk", "it was not walked")
        if probe[0].stop_s is not None:
            told = f"the charge stopped when the thermistor was moved by its smallest step, to {_celsius(probe[0])}"
            return Found(trouble=f"{told}: the resistor's own switching stops it, or anything would")
        legs = [*probe, *approach, *out]
        stopped = next((leg for leg in legs if leg.stop_s is not None), None)
        if stopped is None:
            return self._never_stopped(side, legs[-1])
        index = legs.index(stopped)
        # On the way to the first step a setting stands for one response time only: that it let the charge go on
        # says nothing, and 25 °C is the last that is known to.
        last = legs[index - 1] if index > len(probe) + len(approach) else probe[0]
        words = f"charging at {_celsius(last)}, stopped at {_celsius(stopped)}; {self._back(side)}"
        trouble = self._no_control_after(stopped.end_s, "walk")
        return replace(self._between(last, stopped, len(legs), words, trouble), start_s=legs[0].start_s)

    def release(self, side: str) -> Found:
        """Where a charge that had stopped went on by itself on the way back, in ohms; `side` is "low" or "high"."""
        finding = f"temperature.run_{side}"
        stopped = self.temperature(f"run_{side}")
        if stopped.absent is not None or stopped.trouble is not None:
            return Found(absent=stopped.absent, trouble=stopped.trouble)
        back = self.legs(finding, "back")
        if not back:
            return Found(none="the charge had not stopped") if stopped.none else Found(absent="it was not walked back")
        resumed = next((leg for leg in back if self._goes_on(leg)), None)
        if resumed is None:
            words = f"did not go on by itself as far as {_celsius(back[-1])}"
            return Found(none=words, start_s=back[0].start_s, end_s=back[-1].end_s)
        index = back.index(resumed)
        before = back[index - 1] if index else self._stopping(finding)
        return self._between(before, resumed, len(back), f"off at {_celsius(before)}, on at {_celsius(resumed)}")

    def _stopping(self, finding: str) -> Leg:
        """The leg in which the charge stopped."""
        legs = [leg for way in ("approach", "out") for leg in self.legs(finding, way)]
        return next(leg for leg in legs if leg.stop_s is not None)

    def _between(self, one: Leg, other: Leg, count: int, words: str, trouble: str | None = None) -> Found:
        """The interval between two settings of the thermistor, as they were measured where the bench can do that."""
        settings = float(one.event["ohm"]), float(other.event["ohm"])
        decade = Decade.of(self._evidence, self._accuracy, "thermistor.resistor")
        low, high = sorted(settings)
        interval = EdgeInterval(low, high, "", "").converted(decade.ohm)
        budget = end_budget(interval, decade.lines(*settings))
        return Found(
            budget,
            interval=(interval.low, interval.high),
            n=count,
            start_s=one.start_s,
            end_s=other.end_s,
            words=words + in_kelvins(self._evidence, budget) + decade.words(*settings),
            trouble=trouble,
        )

    def _never_stopped(self, side: str, last: Leg) -> Found:
        """A fail where the walk came to its end, which lies beyond all that is declared."""
        window = self._evidence.specification.temperature
        step = next((s.sweep_temperature for s in self._evidence.procedure.steps if s.sweep_temperature), None)
        assert window is not None
        assert window.run is not None
        assert step is not None
        cold = side.endswith("low")
        _, outer_C = ends(window.run[0 if cold else 1], cold, step)
        if last.event["way"] != "out" or abs(last.event["celsius"] - outer_C) > 1e-3:
            return self._not_walked("walk", f"still charging at {_celsius(last)}, when the walk ended")
        return Found(none=f"the charge went on as far as {_celsius(last)}", end_s=last.end_s, start_s=last.start_s)

    def _not_walked(self, finding: str, what: str) -> Found:
        why = given_up(self._evidence, finding)
        return Found(absent=what + ended_early(self._evidence)) if why is None else Found(trouble=f"{what}: {why}")

    def _no_control_after(self, end_s: float, finding: str) -> str | None:
        """Why a stop counts for nothing: of the two controls after it none was good. None where one was."""
        after = [event for event in self._evidence.events("control") if event["start_s"] >= end_s][:2]
        if any(event["good"] for event in after):
            return None
        why = given_up(self._evidence, finding) if len(after) == 2 else None
        return f"no good control after the charge had stopped: {why or 'the run ended before it'}"

    def _back(self, side: str) -> str:
        back = self.legs(f"temperature.{side}", "back")
        resumed = next((leg for leg in back if self._goes_on(leg)), None)
        if resumed is not None:
            return f"goes on again at {_celsius(resumed)}"
        return "did not go on by itself on the way back" if back else "was not walked back"

    def _goes_on(self, leg: Leg) -> bool:
        """Whether the charge went on in a leg and stayed: the mean of its last seconds, or all of a shorter leg."""
        window = self._current.within(max(leg.end_s - MEAN_s, leg.start_s), leg.end_s + 0.01)
        above = window.value > GOES_ON * (self._control_A or np.inf)
        if leg.event["finding"] != "tap_trip":  # a leg of a thermistor walk ends with the first reading above
            return bool(np.any(above))
        return bool(window.value.size) and float(np.mean(window.value)) > GOES_ON * (self._control_A or np.inf)

    # cells

    def cell(self, cell: int) -> dict[str, Found]:
        """Trip voltage, stop time and release of one cell, by the last part of their names."""
        approach, out = self.legs("tap_trip", "approach", cell), self.legs("tap_trip", "out", cell)
        legs = [*approach, *out]
        if self._control_A is None or not legs:
            absent = self._not_walked("tap_trip", "the cell was not raised")
            return {"voltage": absent, "stop_time": absent, "release": absent}
        stopped = next((leg for leg in legs if leg.stop_s is not None), None)
        if stopped is None:
            none = self._cell_never_stopped(cell, legs[-1])
            release = none if none.none is None else Found(none="the charge had not stopped")
            return {"voltage": none, "stop_time": none, "release": release}
        trouble = self._no_control_after(stopped.end_s, "tap_trip")
        if trouble is not None:
            lost = Found(trouble=trouble)
            return {"voltage": lost, "stop_time": lost, "release": lost}
        early = legs.index(stopped) <= len(approach)
        return {
            "voltage": self._trip(cell, legs, stopped, early),
            "stop_time": self._stop_time(cell, early),
            "release": self._release(cell),
        }

    def _cell_never_stopped(self, cell: int, last: Leg) -> Found:
        """A fail where the cell was raised to the procedure's end."""
        step = next((s.raise_cell for s in self._evidence.procedure.steps if s.raise_cell is not None), None)
        assert step is not None
        highest_V = self.cell_V(cell, last)
        if last.event["way"] != "out" or abs(last.event["cell_V"] - step.end) > 1e-4:
            return self._not_walked("tap_trip", f"still charging at {last.event['cell_V']:.3f} V, when it ended")
        if not abs(highest_V - step.end) <= FOLLOWS_V:
            return Found(trouble=f"the cell was set to {step.end:.3f} V and reads {highest_V:.3f} V")
        return Found(none=f"the charge went on with the cell at {highest_V:.3f} V", end_s=last.end_s)

    def _trip(self, cell: int, legs: list[Leg], stopped: Leg, early: bool) -> Found:
        """Between the last step at which it charged and the first at which it stopped; early: from the nominal cell."""
        last = self._before(legs[0]) if early else legs[legs.index(stopped) - 1]
        low_V, high_V = sorted((self.cell_V(cell, last), self.cell_V(cell, stopped)))
        if not np.isfinite(low_V + high_V):
            return Found(trouble="the cell's voltage was not read at the step before or at the trip")
        return Found(
            end_budget(EdgeInterval(low_V, high_V, "", ""), self._cell_lines(cell, high_V, stopped), unit="V"),
            interval=(low_V, high_V),
            n=legs.index(stopped) + 1,
            start_s=legs[0].start_s,
            end_s=stopped.end_s,
            words=f"charging at {low_V:.4f} V, stopped at {high_V:.4f} V",
        )

    @staticmethod
    def _before(first: Leg) -> Leg:
        """The time in which a cell had not been raised yet."""
        return Leg(first.event, first.start_s - BEFORE_s, first.start_s - 0.01, None)

    def cell_V(self, cell: int, leg: Leg) -> float:
        """Voltage of a cell in a leg at the charger's pins; of the top cell what is left to the contacts; or nan.

        The tap supply's meter less what drops over its shunt, by the scanner. Read until the charge stops: afterwards
        the contacts no longer carry the drop over the pack's resistance.
        """
        cells = self._evidence.pack.cells
        if cell < cells:
            return self._channel_V(cell, leg) - self._drop_V(cell, leg) + self._drop_V(cell - 1, leg)
        until_s = self._full_until_s(leg)
        voltage = self._evidence.trace("charger.voltage")
        standing = voltage.within(leg.start_s + 0.15, until_s - 1e-6)
        if not standing.value.size:  # stopped at once: the step left the pack's voltage as it was just before
            standing = voltage.within(leg.start_s - JUST_BEFORE_s, min(leg.start_s, until_s) - 1e-6)
        top_V = _mean(standing)
        below_V = sum(self._channel_V(number, leg) for number in range(1, cells))
        return top_V - (below_V - self._drop_V(cells - 1, leg))

    def _full_until_s(self, leg: Leg) -> float:
        """Until when the whole current flowed in a leg: one aperture may have seen a part of its fall."""
        if leg.stop_s is None:
            return leg.end_s
        window = self._current.within(leg.start_s, leg.stop_s[1])
        falling = np.flatnonzero(window.value < FULL * (self._control_A or 0.0))
        return float(window.time_s[falling[0]]) if falling.size else leg.stop_s[1]

    def _channel_V(self, number: int, leg: Leg) -> float:
        return _mean(self._evidence.trace(f"tap{number}.voltage").within(leg.start_s, leg.end_s + 0.01))

    def _drop_V(self, number: int, leg: Leg) -> float:
        """What the current of a tap drops over its shunt; 0 at B-, and where no scanner says."""
        if number == 0:
            return 0.0
        shunt_ohm = self._evidence.bench.bench.wiring.taps[number - 1].shunt_ohm
        current_A = _mean(self._evidence.trace(f"tap{number}.current").within(leg.start_s, leg.end_s + 0.01))
        return current_A * shunt_ohm if np.isfinite(current_A) else 0.0

    def _cell_lines(self, cell: int, cell_V: float, leg: Leg) -> list[Contribution]:
        cells = self._evidence.pack.cells
        if cell < cells:
            below = self._drop_lines(cell - 1, leg) if cell > 1 else []
            return [*self._accuracy.tap(cell, cell_V), *self._drop_lines(cell, leg), *below]
        lines = self._accuracy.volts("node.charger_voltage", cell_V * cells)
        for number in range(1, cells):
            lines += self._accuracy.tap(number, cell_V)
        return lines + self._drop_lines(cells - 1, leg)

    def _drop_lines(self, number: int, leg: Leg) -> list[Contribution]:
        """Of what drops between a tap's channel and the charger's pin: the shunt by scanner, the rest as a bound."""
        shunt_ohm = self._evidence.bench.bench.wiring.taps[number - 1].shunt_ohm
        drop_V = abs(self._drop_V(number, leg))
        leads = Contribution.from_half_width(
            f"tap {number}, leads and source", drop_V / shunt_ohm * TAP_LEADS_ohm, source="common practice, no source"
        )
        return [*self._accuracy.scanned(f"taps.{number - 1}.meter", drop_V, f"tap {number}, shunt"), leads]

    def _stop_time(self, cell: int, early: bool) -> Found:
        """From the step that clearly passes the trip to the charge's stop."""
        if early:
            return Found(trouble="the charge stopped on the way to the first step; which move did it cannot be told")
        over = next(iter(self.legs("tap_trip", "over", cell)), None)
        if over is None:
            return Found(trouble="the stop was not timed: the charge stopped on the way to the step that times it")
        if over.stop_s is None:
            seconds = over.end_s - over.start_s
            return Found(none=f"the charge had not stopped {seconds:.1f} s after a step {OVER_V * 1e3:.0f} mV beyond")
        before_s, after_s = over.stop_s
        middle_s, half_s = (before_s + after_s) / 2 - over.start_s, (after_s - before_s) / 2
        bracket = Contribution.from_half_width("spacing of the readings", half_s, "rectangular", source="fast pace")
        delay = Contribution.from_half_width(
            "from command to step", 0.05, "rectangular", source="common practice, no source"
        )
        budget = Budget(middle_s, "s", (bracket, delay))
        return Found(budget, n=1, start_s=over.start_s, end_s=after_s)

    def _release(self, cell: int) -> Found:
        back = self.legs("tap_trip", "back", cell)
        if not back:
            return Found(absent="the cell was not taken back")
        seen = "resumes" if self._goes_on(back[0]) else "stays off"
        words = f"watched for {back[0].end_s - back[0].start_s:.0f} s"
        return Found(seen=seen, n=1, start_s=back[0].start_s, end_s=back[0].end_s, words=words)


def _celsius(leg: Leg) -> str:
    return f"{leg.event['celsius']:.2f} °C"


def _mean(trace: Trace) -> float:
    return float(np.mean(trace.value)) if trace.value.size else float("nan")


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def walk_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding of the walks in a record, by limit name."""
    if not (evidence.events("walk") or given_up(evidence, "walk") or given_up(evidence, "tap_trip")):
        return {}
    walks = Walks(evidence, accuracy)
    found: dict[str, Found] = {}
    made = {event["finding"] for event in evidence.events("walk")}
    window = evidence.specification.temperature
    if (made & {"temperature.run_low", "temperature.run_high"} or given_up(evidence, "walk")) and window and window.run:
        found |= {f"temperature.{side}": walks.temperature(side) for side in ("run_low", "run_high")}
        found |= {f"temperature.release_{side}": walks.release(side) for side in ("low", "high")}
    if "tap_trip" in made or given_up(evidence, "tap_trip"):
        for cell in range(1, evidence.pack.cells + 1):
            found |= {f"tap_trip.cell{cell}.{what}": one for what, one in walks.cell(cell).items()}
    return found
