"""What deep-discharge starts measured: current, threshold, time of a precharge; height and length of probe pulses."""

from __future__ import annotations

from typing import Any

import numpy as np

from drivers.text.measures import Band
from drivers.text.si import si
from sequencer.analysis.edges import EdgeInterval, end_budget
from sequencer.analysis.low_start import NOTHING_A, PULSE_A, Pulse
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.agreement import currents_differ, voltages_differ
from sequencer.engine.evidence import Trace
from sequencer.engine.found import Found
from sequencer.engine.insertion import MEAN_s
from sequencer.engine.low_points import LowStartPoint, LowStarts

APERTURE_s = 0.02  # of a reading at one cycle of a 50 Hz line: a pulse that ends within it is seen
MEETS = 0.05  # of a pulse's largest reading: a second one within it is of the same height
SETTLED_s = 1.0  # of a step, before its end
NO_CONTROL = "no good control followed, though the mains were cycled: no mains behind the switch, or the charger died"


def precharge_current(starts: LowStarts, limit: Band | None) -> Found:
    if not starts.precharged:
        return _no_precharge(starts)
    point = min(starts.precharged, key=lambda point: _margin_A(point, limit))
    estimate = point.response.current
    assert estimate is not None
    lines = [*starts.accuracy.current(estimate.value)]
    if estimate.s > 0 and estimate.n_eff > 1:
        lines.append(
            Contribution.from_readings("repeatability", estimate.s, estimate.n_eff, source=f"{estimate.n} readings")
        )
    count = len(starts.precharged)
    return Found(
        Budget(estimate.value, "A", tuple(lines)),
        n=count,
        start_s=estimate.start_s,
        end_s=estimate.end_s,
        words=f"at {point.where}" + (f", of {count} starts precharged the closest to a limit" if count > 1 else ""),
        trouble=point.astray
        or currents_differ(starts.evidence, starts.accuracy, point.end_s - MEAN_s, point.end_s)
        or _shunt_wrong(starts),
    )


def _shunt_wrong(starts: LowStarts) -> str | None:
    """Whether shunt, and load minus supply, differ at the full current of a control: a small one hides a wrong gain."""
    good = [event for event in starts.evidence.events("control") if event["good"]]
    if not good:
        return None
    end_s = float(good[-1]["end_s"])
    told = currents_differ(starts.evidence, starts.accuracy, end_s - MEAN_s, end_s)
    return None if told is None else f"at a control, {told}"


def _no_precharge(starts: LowStarts) -> Found:
    """Nothing is precharged: a missing precharge where every start is told, else nothing to go by."""
    if not starts.starts:
        return starts.not_shown("no start voltage was shown")
    unsure = next((p for p in starts.starts if p.void or starts.untold(p) is not None), None)
    if unsure is not None:
        return Found(trouble=f"whether it precharges cannot be told at {unsure.where}: {unsure.response.words}")
    low = starts.evidence.specification.low_start
    where = [one for one in low.starts if one.response == "precharges"] if low is not None else []
    if where and not any(one.holds(point.cell_V) for one in where for point in starts.starts):
        told = " or ".join(one.cell_voltage.text for one in where)
        return starts.not_shown(f"a precharge is declared for {told}, where no start voltage of the procedure lies")
    kinds = ", ".join(f"{point.cell_V:.2f} V: {point.response.kind}" for point in starts.starts)
    return Found(none=f"no start was precharged ({kinds})", start_s=starts.starts[0].start_s)


def threshold(starts: LowStarts) -> Found:
    """Between the last step at which it precharged and the first at which full current followed."""
    raised = next(
        (point for point in starts.starts if point.role == "start, raised" and point in starts.precharged), None
    )
    if raised is None:
        return _no_precharge(starts)
    steps = [event for event in starts.evidence.events("low-step") if event["start_s"] >= raised.start_s]
    if not steps:
        return starts.not_shown("the pack's voltage was not raised")
    number = next((n for n, event in enumerate(steps) if _over_s(starts, event) is not None), None)
    if number is None:
        return _no_threshold(starts, raised, steps[-1])
    return _between(starts, raised, steps, number)


def _between(starts: LowStarts, raised: LowStartPoint, steps: list[dict[str, Any]], number: int) -> Found:
    """The bracket of the change within step `number`, counted from 0."""
    over_s = _over_s(starts, steps[number])
    assert over_s is not None
    before = (raised.end_s, raised.end_s) if number == 0 else (steps[number - 1]["end_s"], steps[number]["start_s"])
    low_V = _cell_V(starts, before[0] - SETTLED_s, before[1])
    # The node may still be on its way to the step when the current comes: it goes no further than the step.
    step_V = steps[number]["cell_V"] - (raised.cell_V if number == 0 else steps[number - 1]["cell_V"])
    high_V = float(np.fmax(_cell_V(starts, over_s - SETTLED_s, over_s - 1e-6, largest=True), low_V + step_V))
    if not np.isfinite(low_V + high_V):
        return Found(trouble="the voltage was not read at the step before or at the change")
    trouble = _steady_before(starts, before[0]) or voltages_differ(
        starts.evidence, starts.accuracy, before[0] - SETTLED_s, before[1]
    )
    cells = starts.evidence.pack.cells
    lines = starts.accuracy.volts("node.charger_voltage", high_V * cells, 1.0 / cells)
    ends = EdgeInterval(min(low_V, high_V), max(low_V, high_V), "", "")
    return Found(
        end_budget(ends, lines, unit="V"),
        interval=(ends.low, ends.high),
        n=number + 1,
        start_s=raised.start_s,
        end_s=float(over_s),
        words=f"precharging at {low_V:.4f} V, full current at {high_V:.4f} V",
        trouble=trouble,
    )


def _over_s(starts: LowStarts, event: dict[str, Any]) -> float | None:
    """When the current passed to full within a step, s."""
    current = starts.evidence.trace("charger.current").within(event["start_s"], event["end_s"])
    over = np.flatnonzero(current.value > starts.full_A)
    return float(current.time_s[over[0]]) if over.size else None


def _cell_V(starts: LowStarts, start_s: float, end_s: float, *, largest: bool = False) -> float:
    """Voltage per cell at the charger's contacts, mean or largest reading; nan without one."""
    value = starts.evidence.trace("charger.voltage").within(start_s, end_s).value
    if not value.size:
        return float("nan")
    return float(np.max(value) if largest else np.mean(value)) / starts.evidence.pack.cells


def _steady_before(starts: LowStarts, moment_s: float) -> str | None:
    """Whether the precharge still flowed before the change; a current that had gone tells nothing of a threshold."""
    current = starts.evidence.trace("charger.current").within(moment_s - SETTLED_s, moment_s).value
    if current.size and float(np.min(current)) > NOTHING_A:
        return None
    return "the precharge had ended before full current came"


def _no_threshold(starts: LowStarts, raised: LowStartPoint, last: dict[str, Any]) -> Found:
    current = starts.evidence.trace("charger.current").within(last["end_s"] - SETTLED_s, last["end_s"]).value
    step = next((s.start_low for s in starts.evidence.procedure.steps if s.start_low is not None), None)
    if step is None or last["cell_V"] < step.end - step.by:
        return starts.not_shown(f"still precharging at {last['cell_V']:.2f} V, when it ended")
    still = bool(current.size) and float(np.mean(current)) > NOTHING_A
    if not still and raised.void:
        return Found(trouble=f"the precharge ended while the pack was raised; {NO_CONTROL}")
    what = "still precharging" if still else "the precharge ended without full current"
    return Found(none=f"{what} with the pack at {last['cell_V']:.2f} V per cell", end_s=last["end_s"])


def precharge_time(starts: LowStarts, limit: Band | None) -> Found:
    """From the first current to the end of a precharge that was held."""
    held = next((point for point in starts.points if point.role == "hold"), None)
    hold = next(iter(starts.evidence.events("low-hold")), None)
    if held is None or hold is None:
        return starts.not_shown("no precharge was held for so long")
    current = starts.evidence.trace("charger.current").within(held.start_s, hold["end_s"])
    flowing = np.flatnonzero(current.value > NOTHING_A)
    first = int(flowing[0])
    after = np.flatnonzero((current.value[first:] <= NOTHING_A) | (current.value[first:] > starts.full_A))
    if not after.size:
        lasted_s = float(current.time_s[-1] - current.time_s[first])
        if limit is not None and limit.high is not None and lasted_s < limit.high:
            return Found(trouble=f"held for {lasted_s:.0f} s only, less than the declared {si(limit.high, 's')}")
        return Found(none=f"the precharge went on for {lasted_s:.0f} s", start_s=held.start_s, end_s=hold["end_s"])
    stop = first + int(after[0])
    begin_s = float(current.time_s[max(first - 1, 0)] + current.time_s[first]) / 2
    half_s = float(current.time_s[stop] - current.time_s[stop - 1]) / 2
    first_half_s = float(current.time_s[first] - current.time_s[max(first - 1, 0)]) / 2
    lines = (
        Contribution.from_half_width("spacing of the readings at the end", half_s, source="pace"),
        Contribution.from_half_width("spacing of the readings at the start", first_half_s, source="pace"),
    )
    value_s = float(current.time_s[stop]) - half_s - begin_s
    full = bool(current.value[stop] > starts.full_A)
    what = "full current" if full else "no current"
    return Found(
        Budget(value_s, "s", lines), n=1, start_s=begin_s, end_s=float(current.time_s[stop]), words=f"then {what}",
        trouble=None if full else _mains_doubt(held, current, stop),
    )  # fmt: skip


def _mains_doubt(held: LowStartPoint, current: Trace, stop: int) -> str | None:
    """Why a precharge that ended in no current may have been ended by its mains; None where it charges again after."""
    ended = f"the precharge ended at {current.time_s[stop]:.1f} s"
    again = np.flatnonzero(current.value[stop:] > PULSE_A)
    if again.size:
        told = f"{ended} and began again by itself at {current.time_s[stop + int(again[0])]:.1f} s"
        return f"{told}: a charger that restarts, or mains that were gone for a while; this bench cannot tell"
    return f"{ended}; {NO_CONTROL}" if held.void else None


def _pulses(starts: LowStarts) -> list[tuple[LowStartPoint, Pulse]]:
    """Of starts that count: mains that are gone cut a precharge into what looks like a pulse."""
    counted = [point for point in starts.points if not point.void and point.response.kind != "undecided"]
    return [(point, pulse) for point in counted for pulse in point.response.pulses]


def probe_current(starts: LowStarts) -> Found:
    if not _pulses(starts):
        return _no_pulse(starts)
    point, pulse = max(_pulses(starts), key=lambda pair: pair[1].peak_A)
    readings = np.concatenate([_readings_A(starts, at, one) for at, one in _pulses(starts)])
    alike = int(np.count_nonzero(readings >= pulse.peak_A * (1 - MEETS)))
    budget = Budget(pulse.peak_A, "A", tuple(starts.accuracy.current(pulse.peak_A)))
    alone = None if alike > 1 else f"one reading alone stands at {si(pulse.peak_A, 'A')}"
    trouble = alone or _shunt_wrong(starts)
    words = f"at {point.where}, of {len(_pulses(starts))} pulses; {alike} readings within {MEETS:.0%} of the largest"
    return Found(
        budget, n=len(_pulses(starts)), start_s=pulse.start_s, end_s=pulse.start_s + pulse.least_s, words=words,
        trouble=trouble,
    )  # fmt: skip


def _readings_A(starts: LowStarts, point: LowStartPoint, pulse: Pulse) -> np.ndarray[Any, Any]:
    trace = starts.evidence.trace("charger.current")
    return trace.within(pulse.start_s - 1e-6, pulse.start_s + pulse.least_s + 1e-6).value


def probe_time(starts: LowStarts) -> Found:
    if not _pulses(starts):
        return _no_pulse(starts)
    point, pulse = max(_pulses(starts), key=lambda pair: pair[1].least_s)
    if not np.isfinite(pulse.most_s):
        return Found(trouble="the longest pulse was cut off by the end of watching")
    half_s = (pulse.most_s - pulse.least_s) / 2
    lines = (
        Contribution.from_half_width("spacing of the readings", half_s, source=f"{pulse.readings} readings in it"),
        Contribution.from_half_width("aperture", APERTURE_s, source="common practice, no source"),
    )
    end_s = pulse.start_s + pulse.least_s
    words = f"at {point.where}, the longest of {len(_pulses(starts))} pulses"
    return Found(
        Budget((pulse.most_s + pulse.least_s) / 2, "s", lines),
        n=len(_pulses(starts)), start_s=pulse.start_s, end_s=end_s, words=words,
    )  # fmt: skip


def _no_pulse(starts: LowStarts) -> Found:
    """A pulse that was not seen may have been too short: nothing is said against the charger."""
    if not starts.points:
        return starts.not_shown("no start voltage was shown")
    return Found(none="no probe pulse was seen; one shorter than the spacing of the readings may go unseen")


def _margin_A(point: LowStartPoint, limit: Band | None) -> float:
    """How far a current lies inside its limit, A; below zero outside."""
    assert point.response.current is not None
    value_A = point.response.current.value
    if limit is None:
        return -value_A
    low_A = -np.inf if limit.low is None else limit.low
    high_A = np.inf if limit.high is None else limit.high
    return float(min(value_A - low_A, high_A - value_A))
