"""Stages of a whole log: phases of every run, rests between them, pre-charge, float, top-up, pulses."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from sequencer.analysis.estimates import mean_estimate
from sequencer.analysis.phases import FLOAT_SHARE, Kind, Phase, phases_of_run, same_level
from sequencer.analysis.pulses import PulseTrain, pulse_train
from sequencer.analysis.regulation import STILL_SHARE, tolerance_V
from sequencer.analysis.segments import active_runs
from sequencer.analysis.trace import Trace

PRECHARGE_CURRENT = 0.4  # of the plateau that follows: a pre-charge has less
PRECHARGE_VOLTAGE = 0.8  # of the largest voltage of the charge: a pre-charge ends below (3.0 V of 4.2 V is 0.71)
TOP_UP_SHARE = 0.1  # of the charge before: a later run with less is a top-up
START_PULSE_SHARE = 0.01  # of all charge: an earlier run or plateau with less is a start pulse


@dataclass(frozen=True)
class Quantity:
    """A value and its standard uncertainty."""

    value: float
    u: float

    def as_dict(self) -> dict[str, float]:
        """{"value", "u"}"""
        return {"value": self.value, "u": self.u}


@dataclass(frozen=True)
class Stage:
    """One stage.

    current_A: mean of a plateau, float, rest or pulse height; where the current falls, its average over time.
    voltage_V: mean of cv, float and pulse stages, else the voltage at the stage's end.
    charge_Ah, charge_u_Ah: charge passed, and its standard uncertainty.
    """

    kind: Kind
    start_s: float
    end_s: float
    current_A: Quantity
    voltage_V: Quantity
    charge_Ah: float
    charge_u_Ah: float

    def as_dict(self) -> dict[str, Any]:
        """As in the stages of `classify --json`."""
        return {
            "kind": self.kind,
            "start_s": self.start_s,
            "end_s": self.end_s,
            "current_A": self.current_A.as_dict(),
            "voltage_V": self.voltage_V.as_dict(),
            "charge_Ah": self.charge_Ah,
            "charge_u_Ah": self.charge_u_Ah,
        }


@dataclass(frozen=True)
class Course:
    """All phases of a log in order, and what was seen beside them."""

    phases: tuple[Phase, ...]
    train: PulseTrain | None
    interrupted: bool
    ends_in_charge: bool


def course_of(trace: Trace) -> Course:
    """Phases of a log in which current flows (trace.scale_A > 0)."""
    runs = active_runs(trace.current_A, trace.charges_above_A, noise_A=trace.noise_A)
    train = pulse_train(trace, runs)
    found, interrupted = _all_runs(trace, runs, train)
    phases = _floats(trace, _precharges(trace, found))
    ends = bool(runs) and runs[-1][1] >= trace.time_s.size
    return Course(tuple(_with_rests(trace, phases)), train, interrupted, ends)


def _all_runs(trace: Trace, runs: list[tuple[int, int]], train: PulseTrain | None) -> tuple[list[Phase], bool]:
    total = sum(trace.charge_between(a, b) for a, b in runs)
    phases: list[Phase] = []
    passed, interrupted = 0.0, False
    for number, (a, b) in enumerate(runs):
        if train and train.first <= number <= train.last:
            if number == train.first:
                phases.append(Phase("pulse", a, runs[train.last][1], train.level_A))
            continue
        charge = trace.charge_between(a, b)
        if passed <= START_PULSE_SHARE * total and charge <= START_PULSE_SHARE * total:
            phases.append(Phase("pulse", a, b, float(np.median(trace.current_A[a:b]))))
        elif passed > 0.5 * total and charge <= TOP_UP_SHARE * passed and _was_full(trace, phases):
            phases.append(Phase("top-up", a, b, float(np.median(trace.current_A[a:b]))))
        else:
            interrupted |= passed > START_PULSE_SHARE * total and train is None
            phases += phases_of_run(trace, a, b)
        passed += charge
    return phases, interrupted


def _was_full(trace: Trace, phases: list[Phase]) -> bool:
    """Whether the charge before had reached the voltage that the log never passes by much."""
    if not phases:
        return False
    top = float(np.quantile(trace.voltage_V, 0.999))
    reached = float(np.max(trace.voltage_V[phases[0].start : phases[-1].stop]))
    return reached >= top - tolerance_V(trace, top)


def _precharges(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """The first plateaus, as long as each is well below the next one in current and low in voltage."""
    marked = list(phases)
    top = float(np.quantile(trace.voltage_V, 0.999))
    for index, phase in enumerate(marked[:-1]):
        if phase.kind != "cc":
            continue
        after = next((later for later in marked[index + 1 :] if later.kind == "cc"), phase)
        if phase.level_A > PRECHARGE_CURRENT * after.level_A:
            break
        if float(trace.voltage_V[phase.stop - 1]) <= PRECHARGE_VOLTAGE * top:
            marked[index] = replace(phase, kind="precharge")
        elif trace.charge_between(phase.start, phase.stop) <= START_PULSE_SHARE * float(trace.charge_Ah[-1]):
            marked[index] = replace(phase, kind="pulse")
    return marked


def _floats(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """Low plateaus at the end, after a held voltage or with a voltage that does not rise any more."""
    marked = list(phases)
    for index in range(len(marked) - 1, 0, -1):
        phase = marked[index]
        if phase.kind == "top-up":
            continue
        if phase.kind not in ("cc", "float") or phase.level_A > FLOAT_SHARE * trace.scale_A:
            break
        rise = float(trace.voltage_V[phase.stop - 1] - trace.voltage_V[phase.start])
        steady = max(STILL_SHARE * float(trace.voltage_V[phase.start]), 4.0 * trace.noise_V)
        if marked[index - 1].kind in ("cv", "float") or rise <= steady:
            marked[index] = replace(phase, kind="float")
    return marked


def _with_rests(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """Stretches without current between, before and after the phases, where they last at least three samples."""
    filled: list[Phase] = []
    edge = 0
    for phase in [*phases, None]:
        start = phase.start if phase else trace.time_s.size
        if start - edge >= 3 and float(np.median(trace.current_A[edge:start])) <= trace.charges_above_A:
            filled.append(Phase("rest", edge, start, 0.0))
        if phase:
            filled.append(phase)
            edge = phase.stop
    return filled


def stage_of(trace: Trace, phase: Phase, train: PulseTrain | None) -> Stage:
    """The phase with its current, voltage and charge."""
    steady = phase.kind in ("cv", "float", "pulse")
    voltage = held_mean(trace, phase) if steady else end_voltage(trace, phase)
    charge = trace.charge_between(phase.start, phase.stop)
    start_s, end_s = float(trace.time_s[phase.start]), float(trace.time_s[phase.stop - 1])
    return Stage(
        phase.kind, start_s, end_s, _stage_current(trace, phase, train), voltage, charge, _charge_u_Ah(trace, phase)
    )


def _charge_u_Ah(trace: Trace, phase: Phase) -> float:
    """Of the trapezoids of a stage: the instruments' error, all in one direction; noise; one spacing at either end.

    JCGM 100:2008, 5.2.2: errors common to all readings add up, independent ones in quadrature. The stage begins and
    ends somewhere between two readings: half a spacing either way, rectangular, with the current that flows there.
    """
    current, time_s = trace.current_A[phase.start : phase.stop], trace.time_s[phase.start : phase.stop]
    if time_s.size < 2:
        return 0.0
    common_As = trace.u_A * trace.duration(phase.start, phase.stop)
    noise_As = trace.noise_A * float(np.sqrt(np.sum(np.diff(time_s) ** 2)))
    edges_As = [abs(float(current[at])) * float(time_s[one] - time_s[two]) / math.sqrt(12.0)
                for at, one, two in ((0, 1, 0), (-1, -1, -2))]  # fmt: skip
    return math.hypot(common_As, noise_As, *edges_As) / 3600.0


def _stage_current(trace: Trace, phase: Phase, train: PulseTrain | None) -> Quantity:
    current = trace.current_A[phase.start : phase.stop]
    if phase.kind == "pulse" and train is not None:
        return _mean(current[current > 0.5 * train.level_A], trace.u_A, trace.noise_A)
    duration_s = trace.duration(phase.start, phase.stop)
    if phase.kind in ("cv", "taper", "constant-power") and duration_s > 0.0:
        average = 3600.0 * trace.charge_between(phase.start, phase.stop) / duration_s
        return Quantity(average, math.hypot(trace.u_A, trace.noise_A / math.sqrt(current.size)))
    return _mean(current, trace.u_A, trace.noise_A)


def held_mean(trace: Trace, phase: Phase) -> Quantity:
    """Mean voltage of a phase without its first tenth, in which the charger's loop takes over."""
    voltage = trace.voltage_V[phase.start : phase.stop]
    return _mean(voltage[voltage.size // 10 :], trace.u_V, trace.noise_V)


def end_voltage(trace: Trace, phase: Phase) -> Quantity:
    """Voltage of the phase's last sample; the way since the sample before it is part of its uncertainty."""
    last, before = float(trace.voltage_V[phase.stop - 1]), float(trace.voltage_V[max(phase.start, phase.stop - 2)])
    return Quantity(last, math.hypot(trace.u_V, trace.noise_V, (last - before) / math.sqrt(12.0)))


def end_current(trace: Trace, phase: Phase) -> Quantity:
    """Last current before the charge ended, not counting a sample that already lies on the way down."""
    current = trace.current_A[phase.start : phase.stop]
    last = float(current[-1])
    way = abs(last - float(current[-2])) if current.size > 1 else 0.0
    if current.size > 3:
        usual = float(np.max(np.abs(np.diff(current[-4:-1])))) + 6.0 * trace.noise_A
        if float(current[-2]) - last > 3.0 * usual:
            last, way = float(current[-2]), abs(float(current[-2] - current[-3]))
    return Quantity(last, math.hypot(trace.u_A, trace.noise_A, way / math.sqrt(12.0)))


def _mean(level: npt.NDArray[np.float64], instrument_u: float, noise: float) -> Quantity:
    """Mean without glitches (more than 5 % and 6 σ from the median); type A and instrument in quadrature."""
    middle = float(np.median(level))
    near = level[np.abs(level - middle) <= max(6.0 * noise, 0.05 * abs(middle))]
    if near.size < 2:
        return Quantity(middle, math.hypot(noise, instrument_u))
    estimate = mean_estimate(near)
    return Quantity(estimate.value, math.hypot(estimate.u, instrument_u))


def plateaus(trace: Trace, phases: tuple[Phase, ...]) -> list[Phase]:
    """Plateaus that are stages of the algorithm: not slid to, and a level that resumes after a pause only once."""
    found: list[Phase] = []
    for phase in phases:
        if phase.kind == "cc" and not phase.after_foldback:
            if found and same_level(trace, found[-1].level_A, phase.level_A):
                continue
            found.append(phase)
    return found
