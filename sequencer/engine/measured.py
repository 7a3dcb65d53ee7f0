"""What a full charge in a record measured, each with its budget; from traces, windows and the bench's accuracy."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from itertools import pairwise

import numpy as np

from drivers.text.si import si
from sequencer.analysis.charge import ChargeReading, Plateau, measure_charge
from sequencer.analysis.classify import Classification, classify
from sequencer.analysis.estimates import Estimate, mean_between
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.agreement import currents_differ, voltages_differ
from sequencer.engine.endings import mains_doubt, mains_known, mains_witness, resumed_s
from sequencer.engine.evidence import Evidence, Window
from sequencer.engine.found import Found
from sequencer.engine.pace import FAST_s
from sequencer.engine.stability import turning_points

FEWEST = 5
READ_BEFORE = re.compile(r"charge\.(stage\d+\.current|voltage)")  # whatever ended the charge, these were read before it
AFTER_END_s = 5.0
LAG_SHARE = 1.0 / 3.0
ZERO_s = 2.0  # read for so long before the mains are on, and from so long after they are off
LAST_SCAN_s = 0.05
LATELY_s = 10.0  # at the end of a charge that did not end
IDLE_A = 10e-3  # what an idle charger may take from the pack: common practice, no source
SURGE = 1.05  # times the first plateau: more is worth a word
CLEAR = 0.9  # probability of the class seen, from which on a stage that is missing is missing
STAIRS_s = 30.0  # the last steps of the stand-in before the end
SWING_V = 0.005  # per cell: the stand-in's own small steps stay far below
SWINGS = 6  # turns in a row, each within TURN_WITHIN of the one before: a loop, not a charger's few steps
TURN_WITHIN = 4.0  # times (settling + one fast scan); an unstable loop turns every (2d + 1) scans


def measure_charges(evidence: Evidence) -> Found:
    """Whether the charger charges a nominal pack: the first insertion tells; a later one must not contradict it.

    A charger that charged once and no longer does may have latched a fault, or a contact no longer closes: that is no
    answer to whether it charges.
    """
    windows = [event for event in evidence.events("finding-window") if event["finding"] == "charges"]
    if not windows:
        return Found(absent="the run ended before it was seen")
    found = [_charges_in(evidence, window["start_s"], window["end_s"]) for window in windows]
    later = next((one for one in found[1:] if one.seen != found[0].seen), None)
    if later is None or found[0].seen != "charges":
        return found[0]
    told = later.trouble or f"no longer in a later insertion ({later.words}, at {later.end_s:.0f} s)"
    return Found(trouble=f"it charged at first ({found[0].words}), and {told}")


def _charges_in(evidence: Evidence, start_s: float, end_s: float) -> Found:
    """What one insertion shows; that nothing flows takes both ways to measure the current."""
    current = evidence.trace("charger.current").within(start_s, end_s)
    if current.value.size < FEWEST:
        return Found(trouble=f"only {current.value.size} readings")
    stage = evidence.specification.charge.stages[0].current
    lowest_A = stage.low if stage.low is not None and stage.low > 0 else (stage.high or 0.0)
    mean_A = float(np.mean(current.value))
    seen = "charges" if mean_A > 0.5 * lowest_A else "does not charge"
    words = f"{si(mean_A, 'A')} over {end_s - start_s:.0f} s"
    if seen != "charges":
        highest_V = min(evidence.bench.bench.limits.node, evidence.pack.cells * evidence.pack.cell_bound_V)
        differ = currents_differ(evidence, Accuracy(evidence.bench, highest_V), start_s, end_s)
        if differ is not None:
            return Found(trouble=f"{words}; {differ}")
        words += f"; {mains_known(evidence, start_s, end_s)}"
    return Found(seen=seen, n=current.value.size, start_s=start_s, end_s=end_s, words=words)


class ChargeStep:
    """Measures one charge step of a record."""

    def __init__(self, evidence: Evidence, window: Window) -> None:
        self._evidence = evidence
        self._window = window
        self._cells = evidence.pack.cells
        highest_V = min(evidence.bench.bench.limits.node, evidence.pack.cells * evidence.pack.cell_bound_V)
        self._accuracy = Accuracy(evidence.bench, highest_V)
        self._voltage = evidence.trace("charger.voltage")
        self._current = evidence.trace("charger.current")
        self._swinging = self._swings()
        self._zero_moved = self._zeros()
        self.classification, self.reading = self._read()

    def _read(self) -> tuple[Classification, ChargeReading]:
        window = self._window
        mains_s = self._evidence.begun("insert") or 0.0
        current = self._current.within(mains_s, window.end_s)
        voltage_V = self._voltage.at(current.time_s)
        known = np.isfinite(voltage_V)
        time_s, voltage_V, current_A = current.time_s[known], voltage_V[known], current.value[known]
        u_A = Budget(0.0, "A", tuple(self._accuracy.current(float(np.max(current_A))))).u
        u_V = Budget(0.0, "V", tuple(self._accuracy.volts("node.charger_voltage", float(np.max(voltage_V))))).u
        found = classify(time_s, voltage_V, current_A, current_u_A=u_A, voltage_u_V=u_V)
        # What flows again after the end is no part of the charge; `current_after_end` takes it in.
        again_s = resumed_s(window)
        end_s = window.end_s if again_s is None else again_s - LAST_SCAN_s
        return found, measure_charge(time_s, voltage_V, current_A, found, start_s=mains_s, end_s=end_s)

    def findings(self) -> dict[str, Found]:
        """Every finding that a full charge gives, by limit name."""
        found, doubt = self._findings(), mains_doubt(self._evidence, self._window, self.reading.ended_s)
        if doubt is None:
            return found
        stands = {name for name, one in found.items() if READ_BEFORE.fullmatch(name) and one.budget is not None}
        return {
            name: one if name in stands else replace(one, trouble=one.trouble or doubt) for name, one in found.items()
        }

    def _findings(self) -> dict[str, Found]:
        found = {"charge.algorithm": self._algorithm()}
        for number in range(1, len(self._evidence.specification.charge.stages) + 1):
            plateau = self.reading.plateaus[number - 1] if number <= len(self.reading.plateaus) else None
            found[f"charge.stage{number}.current"] = self._stage_current(number, plateau)
            found[f"charge.stage{number}.threshold"] = self._threshold(number, plateau)
        found["charge.voltage"] = self._regulation()
        found["charge.end_voltage"] = self._end_voltage()
        found["charge.cutoff"] = self._cutoff()
        found["charge.ends"] = self._ends()
        found["charge.current_after_end"] = self._after_end()
        return found

    def _swings(self) -> str | None:
        """Why nothing about voltage, end and shape can be told where the stand-in's loop has swung; None elsewhere.

        A charger that pulses as fast as the bench settles cannot be told from such a loop, and gets the same words.
        """
        moves = self._evidence.trace("set.supply.voltage").within(self._window.start_s, self._window.end_s)
        turns_s = turning_points(moves.time_s.tolist(), moves.value.tolist(), SWING_V * self._cells)
        standin = self._evidence.manifest.get("standin") or {}
        most_s = TURN_WITHIN * (standin.get("settling_s", 0.0) + FAST_s)
        close = [0.0 <= later - earlier <= most_s for earlier, later in pairwise(turns_s)]
        for first in range(len(close) - SWINGS + 2):
            if all(close[first : first + SWINGS - 1]):
                return f"stand-in and charger swung against each other, from {turns_s[first]:.1f} s on"
        return None

    def _missing(self, words: str) -> Found:
        """What the charger does not show is its own doing only where the bench held and the shape is clear."""
        trouble = self._swinging or self._condition_lost(self._window.start_s, self._window.end_s)
        if trouble is None and self.classification.confidence < CLEAR:
            trouble = (
                f"the shape of the charge is clear with a probability of {self.classification.confidence:.2f} only"
            )
        return Found(none=words) if trouble is None else Found(trouble=f"{words}; {trouble}")

    # class and states

    def _algorithm(self) -> Found:
        shown, window = self.classification, self._window
        start_s = shown.stages[0].start_s if shown.stages else window.start_s
        return Found(
            seen=shown.algorithm,
            probability=shown.confidence,
            start_s=start_s,
            end_s=window.end_s,
            words=shown.why,
            trouble=self._swinging,
        )

    def _ends(self) -> Found:
        reading = self.reading
        if self._swinging is not None:
            return Found(trouble=self._swinging)
        if reading.ended:
            words = f"the current fell from {self._shown_cutoff()} to nothing at {reading.ended_s:.1f} s"
            if mains_witness(self._evidence, self._window):
                words += "; it charged again when its mains were cycled, so it had them"
            again_s = resumed_s(self._window)
            if again_s is not None:
                words += f"; it began to charge again at {again_s:.1f} s, by itself"
            return Found(seen="ends", start_s=reading.ended_s, end_s=self._window.end_s, words=words)
        trouble = self._zero_moved or self._disagreement(self._window.end_s - LATELY_s, self._window.end_s)
        if trouble is not None:
            return Found(trouble=trouble)
        last_A = reading.last_current_A.value if reading.last_current_A else math.nan
        words = f"still charging at {si(last_A, 'A')} when the step was given up after {self._window.end_s:.0f} s"
        return Found(seen="does not end", start_s=self._window.start_s, end_s=self._window.end_s, words=words)

    def _shown_cutoff(self) -> str:
        return si(self.reading.cutoff_A.value, "A") if self.reading.cutoff_A else "its plateau"

    # currents

    def _stage_current(self, number: int, plateau: Plateau | None) -> Found:
        if plateau is None:
            return self._missing(f"no constant-current stage {number} was seen")
        estimate = plateau.current_A
        if estimate.n < FEWEST:
            return Found(trouble=f"only {estimate.n} readings on the plateau")
        return _with_words(self._current_found(estimate, []), self._surge(estimate) if number == 1 else "")

    def _surge(self, plateau: Estimate) -> str:
        """Said, though no limit speaks of it: a current well above the plateau, at any moment of the charge."""
        current = self._current.within(self._evidence.begun("insert") or 0.0, self._window.end_s)
        top = int(np.argmax(current.value))
        if current.value[top] <= SURGE * plateau.value:
            return ""
        told = f"the largest single reading was {si(float(current.value[top]), 'A')}"
        return f"{told}, at {current.time_s[top]:.1f} s, outside this plateau"

    def _current_found(self, estimate: Estimate, more: list[Contribution], trouble: str | None = None) -> Found:
        trouble = trouble or self._zero_moved or self._disagreement(estimate.start_s, estimate.end_s)
        lines = [*self._readings(estimate), *self._accuracy.current(estimate.value), *more]
        return _found(Budget(estimate.value, "A", tuple(lines)), estimate, trouble)

    def _zeros(self) -> str | None:
        """Why the shunt's zero is not one, with the mains off before or after the charge; None where it is."""
        at_rest = self._accuracy.current(0.0)
        allowed_A = math.sqrt(3.0) * sum(line.contribution for line in at_rest)
        for start_s, end_s in self._mains_off():
            rest = self._current.within(start_s, end_s)
            if rest.value.size < FEWEST:
                continue
            zero_A = float(np.mean(rest.value))
            if not -allowed_A - IDLE_A <= zero_A <= allowed_A:
                when = "before" if start_s < self._window.start_s else "after"
                told = f"the current reads {si(zero_A, 'A')} with the charger's mains off {when} the charge"
                return f"{told}; its uncertainty there is {si(allowed_A, 'A')}"
        return None

    def _mains_off(self) -> list[tuple[float, float]]:
        """Times in which nothing can come from the charger: the last moments before the mains first come on, and
        from a while after each time they go off until they come on again (a latched charger is cycled)."""
        switched = self._evidence.events("mains")
        on_s = [event["t"] for event in switched if event["on"]]
        first_on_s = on_s[0] if on_s else 0.0
        off_s = [event["t"] for event in switched if not event["on"] and event["t"] >= first_on_s]
        again_s = [min((one for one in on_s if one > off), default=math.inf) for off in off_s]
        rests = [(off + ZERO_s, again - LAST_SCAN_s) for off, again in zip(off_s, again_s, strict=True)]
        return [(first_on_s - ZERO_s, first_on_s - LAST_SCAN_s), *rests]

    @staticmethod
    def _readings(estimate: Estimate, sensitivity: float = 1.0) -> list[Contribution]:
        if not estimate.s > 0 or not estimate.n_eff > 1:
            return []
        source = f"{estimate.n} readings"
        return [
            Contribution.from_readings(
                "repeatability", estimate.s, estimate.n_eff, sensitivity=sensitivity, source=source
            )
        ]

    def _disagreement(self, start_s: float, end_s: float) -> str | None:
        return currents_differ(self._evidence, self._accuracy, start_s, end_s)

    def _cutoff(self) -> Found:
        reading, limit = self.reading, self._evidence.specification.charge.cutoff
        if reading.cutoff_A is not None and reading.ended:
            estimate = reading.cutoff_A
            bracket_A = reading.cutoff_bracket_A or 0.0
            # The charger decided between the last reading and the next: half of the fall there, rectangular.
            middle = replace(estimate, value=estimate.value - bracket_A / 2)
            bracket = Contribution.from_half_width(
                "bracket", bracket_A / 2, "rectangular", source="spacing of the readings"
            )
            return self._current_found(middle, [bracket, self._stairs(estimate.end_s)], self._swinging)
        if reading.last_current_A is None:
            return Found(trouble="the end was seen, and no trend before it")
        last_A = reading.last_current_A.value
        if limit is not None and limit.low is not None and last_A < limit.low:
            # It went on below the lowest that is allowed.
            return self._current_found(reading.last_current_A, [], self._swinging)
        return Found(trouble=f"the charge did not end; the last current was {si(last_A, 'A')}")

    def _stairs(self, until_s: float) -> Contribution:
        """The node moves in steps, so the current at one moment lies off its trend by up to half of one step."""
        moves = self._evidence.trace("set.supply.voltage").within(until_s - STAIRS_s, until_s)
        step_V = float(np.max(np.abs(np.diff(moves.value)), initial=0.0))
        wiring = self._evidence.bench.bench.wiring.node
        standin = self._evidence.manifest.get("standin") or {}
        fixture_ohm = standin.get("Rp_ohm") or wiring.ballast + wiring.current.shunt_ohm
        source = "largest of the last steps, over Rp"
        return Contribution.from_half_width("steps of the stand-in", step_V / fixture_ohm / 2, source=source)

    def _after_end(self) -> Found:
        if not self.reading.ended or self.reading.ended_s is None:
            return Found(none="the charge did not end")
        start_s, end_s = self.reading.ended_s + AFTER_END_s, self._window.end_s
        after = self._current.within(start_s, end_s)
        if after.value.size < FEWEST:
            return Found(trouble=f"only {after.value.size} readings after the end")
        estimate = mean_between(after.time_s, after.value, start_s, end_s)
        lines = [*self._readings(estimate), *self._accuracy.current(estimate.value)]
        trouble = self._zero_moved or self._disagreement(start_s, end_s)
        found = _found(Budget(estimate.value, "A", tuple(lines)), estimate, trouble)
        return _with_words(found, f"largest single reading {si(float(np.max(np.abs(after.value))), 'A')}")

    # voltages, per cell

    def _per_cell(self, estimate: Estimate, more: list[Contribution], trouble: str | None) -> Found:
        share = 1.0 / self._cells
        lines = [
            *self._readings(estimate, share),
            *self._accuracy.volts("node.charger_voltage", estimate.value, share),
            *more,
        ]
        return _found(Budget(estimate.value * share, "V", tuple(lines)), estimate, trouble)

    def _condition_lost(self, start_s: float, end_s: float) -> str | None:
        condition = self._evidence.trace("node.condition").within(start_s, end_s)
        lost = int(np.count_nonzero(condition.value == 0))
        return f"the supply did not hold the node in {lost} of {condition.value.size} scans" if lost else None

    def _untrusted(self, estimate: Estimate) -> str | None:
        """What makes a voltage at the contacts no reading of the charger; None where nothing does."""
        window = estimate.start_s, estimate.end_s
        return (
            self._swinging or self._condition_lost(*window) or voltages_differ(self._evidence, self._accuracy, *window)
        )

    def _threshold(self, number: int, plateau: Plateau | None) -> Found:
        if plateau is None:
            return self._missing(f"no constant-current stage {number} was seen")
        if plateau.threshold_V is None:
            return self._missing(f"stage {number} did not end by a step")
        estimate = plateau.threshold_V
        trouble = self._lag() or self._untrusted(estimate)
        # The node rises once more between the last reading and the end of the stage: half of it there, rectangular.
        half_V = (plateau.threshold_bracket_V or 0.0) / 2
        bracket = Contribution.from_half_width(
            "ramp between readings", half_V, sensitivity=1.0 / self._cells, source="spacing of the readings"
        )
        return self._per_cell(replace(estimate, value=estimate.value + half_V), [bracket], trouble)

    def _lag(self) -> str | None:
        stand_in = self._evidence.manifest.get("standin") or {}
        lag_s, response_s = stand_in.get("lag_s"), self._evidence.specification.dwell.response
        if lag_s is None or lag_s <= LAG_SHARE * response_s:
            return None
        return f"the stand-in lags {lag_s:.2f} s, more than a third of the charger's response time {response_s:g} s"

    def _regulation(self) -> Found:
        estimate = self.reading.regulation_V
        if estimate is None:
            return self._missing("no constant-voltage phase was seen")
        trouble = self._untrusted(estimate)
        if trouble is None and estimate.n < 2 * FEWEST:
            trouble = f"only {estimate.n} readings at constant voltage"
        return Found(trouble=trouble) if estimate.n < 2 * FEWEST else self._per_cell(estimate, [], trouble)

    def _end_voltage(self) -> Found:
        estimate = self.reading.end_voltage_V
        found = self._per_cell(estimate, [], self._untrusted(estimate))
        peak_V = self.reading.peak_V / self._cells
        return _with_words(found, f"largest single reading {peak_V:.4f} V per cell")


def _found(budget: Budget, estimate: Estimate, trouble: str | None) -> Found:
    return Found(budget=budget, n=estimate.n, start_s=estimate.start_s, end_s=estimate.end_s, trouble=trouble)


def _with_words(found: Found, words: str) -> Found:
    return replace(found, words=words)
