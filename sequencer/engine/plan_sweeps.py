"""How long sweeps and walks take: counted insertion by insertion, from the specification's dwell times.

A search is taken to be refused at every second setting. What is counted is what the methods do; what the charger
will do is what its specification declares.
"""

from __future__ import annotations

from dataclasses import dataclass

from drivers.text.measures import Band
from sequencer.analysis.balance import sequence
from sequencer.analysis.edges import expected_steps
from sequencer.engine import insertion, resistors, tap_watch, walks
from sequencer.engine.targets import ends, sides, threshold_levels, weak_cells
from sequencer.model.pack import Pack
from sequencer.model.specification import Specification
from sequencer.model.steps import RaiseCell, StartLow, SweepId, SweepTemperature, WatchTaps

PLACE_s = (
    0.3 + insertion.TAP_SETTLE_s + insertion.SIGNALS_s + insertion.PRECHARGE_s
)  # node, load, contacts; of an insertion after the first


@dataclass(frozen=True)
class Times:
    """Insertions and seconds of one step."""

    insertions: int = 0
    seconds: float = 0.0

    def __add__(self, other: Times) -> Times:
        return Times(self.insertions + other.insertions, self.seconds + other.seconds)

    def __mul__(self, count: float) -> Times:
        return Times(round(self.insertions * count), self.seconds * count)


@dataclass(frozen=True)
class Sweeping:
    """Times of insertions with one specification."""

    specification: Specification
    pack: Pack

    @property
    def charging(self) -> Times:
        """A point that charges: place, start delay, settle, mean, take out."""
        dwell = self.specification.dwell
        return Times(1, PLACE_s + dwell.start_delay + insertion.SETTLE_s + insertion.MEAN_s + 2 * dwell.clear)

    @property
    def refused(self) -> Times:
        """A point that does not charge, watched to the end, and the control after it."""
        dwell = self.specification.dwell
        watch_s = max(insertion.START_DELAYS * dwell.start_delay, insertion.SHORTEST_WATCH_s) + insertion.MARGIN_s
        return Times(1, PLACE_s + watch_s + 2 * dwell.clear) + self.charging

    def search(self, steps: int) -> Times:
        return self.charging * (steps - steps // 2) + self.refused * (steps // 2)

    def sweep_id(self, step: SweepId) -> Times:
        times = self.charging + self.refused * 2
        times += self.charging * (3 * len(self.specification.id_bands))
        for side in sides(self.specification, step.outside):
            times += self.charging if side.neighbour else self.refused
            low_ohm, high_ohm = sorted((side.end_ohm, side.beyond_ohm))
            times += self.search(expected_steps(low_ohm, high_ohm, step.resolution))
            times += (self.charging + (self.charging if side.neighbour else self.refused)) * (step.repeats - 1)
        return times

    def sweep_temperature(self, step: SweepTemperature) -> Times:
        window = self.specification.temperature
        assert window is not None
        times = self.charging + self.refused * 2
        for cold, band in zip((True, False), window.start or (), strict=False):
            low, high = sorted(ends(band, cold, step))
            times += self.charging + self.refused
            times += self.search(expected_steps(low, high, step.resolution, "arithmetic"))
            times += (self.charging + self.refused) * (step.repeats - 1)
        for cold, band in zip((True, False), window.run or (), strict=False):
            times += self.charging + Times(0, self._walk_s(step, cold, band))
        return times + self.charging

    def _walk_s(self, step: SweepTemperature, cold: bool, band: Band) -> float:
        dwell = self.specification.dwell
        inner_C, outer_C = ends(band, cold, step)
        expected_C = band.nominal if band.nominal is not None else (inner_C + outer_C) / 2
        legs = abs(expected_C - inner_C) / step.resolution + 2  # the first is the smallest step at 25 °C
        approach = len(walks.approach_C(inner_C, -1.0 if cold else 1.0))
        back = 1.0 if self._goes_on else walks.RELEASE_SPAN_K / walks.RELEASE_STEP_K
        back_s = back * (dwell.start_delay + walks.DWELLS * dwell.response) + 2 * resistors.SETTLE_s
        return (approach + legs * walks.DWELLS) * dwell.response + back_s

    @property
    def _goes_on(self) -> bool:
        """Whether a stopped charge is declared to go on by itself."""
        trip = self.specification.tap_trip
        return trip is not None and trip.release == "resumes"

    def raise_cells(self, step: RaiseCell) -> Times:
        dwell = self.specification.dwell
        trip = self.specification.tap_trip
        band = None if trip is None else trip.voltage
        expected_V = step.end if band is None or band.low is None or band.high is None else (band.low + band.high) / 2
        legs = max(0.0, (expected_V - step.begin) / step.by) + 1
        approach_s = walks.APPROACH_s * max(0.0, (step.begin - step.cell_voltage) / walks.APPROACH_V - 1)
        watch_s = max(insertion.START_DELAYS * dwell.start_delay, insertion.SHORTEST_WATCH_s)
        release_s = dwell.start_delay + insertion.SETTLE_s + insertion.MEAN_s if self._goes_on else watch_s
        walk = Times(0, approach_s + legs * walks.DWELLS * dwell.response + release_s)
        timed = Times(0, approach_s + dwell.response)  # the stop once more, by a clear step; inserted anew if latched
        again = timed if self._goes_on else timed + self.charging
        return (self.charging + walk + again) * self.pack.cells + self.charging

    def watch_taps(self, step: WatchTaps) -> Times:
        """Prepared, zeros, put in; every phase; taken out, zeros."""
        phases_s = len(sequence(self.pack.cells)) * tap_watch.phase_s(step)
        return self.charging + Times(0, PLACE_s + 2 * tap_watch.zero_s(step) + phases_s)

    def start_low(self, step: StartLow) -> Times:
        """Each start as it is declared; what is declared nothing for is taken to be refused."""
        low = self.specification.low_start
        declared = {cell_V: self._declared_start(cell_V) for cell_V in step.voltages}
        times = self.charging
        for response in declared.values():
            times += self._low(response)
        precharged = [cell_V for cell_V, response in declared.items() if "precharges" in response]
        if precharged:
            times += Times(0, self._raised_s(step, max(precharged)))
        if precharged and step.hold:
            given_up_s = low.precharge.time.high if low and low.precharge and low.precharge.time else None
            times += self._low("precharges") + Times(0, min(step.hold, given_up_s or step.hold))
        if weak := len(weak_cells(step, self.specification, self.pack.cells)):
            times += self._low((low.weak_cell if low else None) or "refuses") * weak
        return times

    def _declared_start(self, cell_V: float) -> str:
        low = self.specification.low_start
        found = next((one for one in (low.starts if low else ()) if one.holds(cell_V)), None)
        return "refuses" if found is None else found.response

    def _low(self, response: str) -> Times:
        """One insertion; a precharge is watched as long as a refusal, and needs no control."""
        if response == "full current":
            return self.charging
        return self.refused + self.charging * (0 if "precharges" not in response else -1)

    def _raised_s(self, step: StartLow, from_V: float) -> float:
        """The search for the threshold, up to the middle of what is declared for it."""
        low, dwell = self.specification.low_start, self.specification.dwell
        band = low.precharge.threshold_per_cell if low is not None and low.precharge is not None else None
        levels = threshold_levels(step, band, from_V)
        known = [end for end in (band.low, band.high) if end is not None] if band is not None else []
        middle_V = sum(known) / len(known) if known else step.end
        count = sum(level < middle_V for level in levels) + 1
        return min(count, len(levels)) * walks.DWELLS * dwell.response + insertion.SETTLE_s + insertion.MEAN_s
