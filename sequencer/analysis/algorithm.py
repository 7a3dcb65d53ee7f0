"""From the phases of a charge to the name of its algorithm, with a probability and a sentence."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, field

import numpy as np

from sequencer.analysis.phases import Phase
from sequencer.analysis.regulation import LADDER_LEVELS
from sequencer.analysis.sanitise import Log
from sequencer.analysis.smoothing import despiked, moving_mean
from sequencer.analysis.stages import Course, plateaus
from sequencer.analysis.trace import Trace
from sequencer.analysis.wording import quantity, resolution_of

BEST = 0.98  # a passive log never makes one surer
FULL_FALL = 0.5  # of the current: from here on a constant-voltage phase is beyond doubt
CLEAR_FALL = 0.06  # of a slope: more than a limit in power makes of what the voltage rises by in a few samples
FEW_SAMPLES = 10
OSCILLATION = 0.02  # of the plateau


@dataclass(frozen=True)
class Finding:
    """Algorithm, probability, flags and sentence; shows_cutoff: the last current says something about the cut-off."""

    algorithm: str
    confidence: float
    flags: tuple[str, ...]
    why: str
    shows_cutoff: bool


@dataclass
class _Doubt:
    """Factors below 1 for all that could make the name wrong, and the flags that tell of them."""

    confidence: float = BEST
    flags: list[str] = field(default_factory=list)

    def cast(self, factor: float, flag: str | None = None) -> None:
        self.confidence *= factor
        if flag:
            self.flags.append(flag)


def find_algorithm(trace: Trace, course: Course, log: Log) -> Finding:
    """Names the algorithm of a log in which current flows."""
    doubt = _Doubt()
    _doubt_log(doubt, trace, log)
    _flag_course(doubt, trace, course)
    name, why = ("inconclusive", _OFFSET_WHY) if _looks_like_offset(trace, course) else _named(trace, course)
    if name in ("cc-cv", "stepped-cc-cv", "cv-only"):
        _doubt_held(doubt, course)
    if course.ends_in_charge:
        _doubt_open_end(doubt, name)
    _doubt_plateaus(doubt, trace, course, name)
    _doubt_unexplained(doubt, trace, course)
    if name == "inconclusive":
        doubt.confidence = min(doubt.confidence, 0.5)
    last = _last_held(course)
    return Finding(
        name, round(doubt.confidence, 3), tuple(doubt.flags), why, last is not None and last.fall >= FULL_FALL
    )


_OFFSET_WHY = "one constant current from first row to last, and a voltage that does not move: it may be an offset"


def _looks_like_offset(trace: Trace, course: Course) -> bool:
    """One plateau over the whole log with no voltage rise: a zero error of the meter would look the same."""
    if len(course.phases) != 1 or course.phases[0].kind != "cc":
        return False
    voltage = despiked(trace.voltage_V)
    return float(np.ptp(voltage)) <= 8.0 * trace.noise_V + 2.0 * trace.u_V


def _named(trace: Trace, course: Course) -> tuple[str, str]:
    if course.train is not None:
        train = course.train
        height, on, off = quantity(train.level_A, "A", step=0.0), train.on_s, train.off_s
        return "pulsed", f"pulses of {height}, {on:.4g} s on and {off:.4g} s off, carry the charge"
    levels = plateaus(trace, course.phases)
    held = _last_held(course)
    power = [phase for phase in course.phases if phase.kind == "constant-power"]
    steps = ", ".join(_level(trace, phase) for phase in levels)
    if len(levels) >= 2:
        if held is not None:
            return "stepped-cc-cv", f"plateaus of {steps}, then {_held_words(trace, held)}"
        return "stepped-cc", f"plateaus of {steps}, each with a rising voltage, and no held voltage"
    if held is not None and (levels or power):
        start = f"a plateau of {steps}" if levels else "a slope at constant power"
        return "cc-cv", f"{start}, then {_held_words(trace, held)}"
    return _named_without(trace, course, levels, power, held)


def _named_without(
    trace: Trace, course: Course, levels: list[Phase], power: list[Phase], held: Phase | None
) -> tuple[str, str]:
    if held is not None:
        if any(phase.kind == "taper" for phase in course.phases):
            return "cc-cv", f"a current that folds back, then {_held_words(trace, held)}"
        return "cv-only", f"no plateau, only {_held_words(trace, held)}"
    power_s = sum(trace.duration(phase.start, phase.stop) for phase in power)
    level_s = sum(trace.duration(phase.start, phase.stop) for phase in levels)
    if power_s > level_s:
        watts = float(np.median(trace.voltage_V[power[0].start : power[0].stop]
                                * trace.current_A[power[0].start : power[0].stop]))  # fmt: skip
        return "constant-power", f"the current falls as the voltage rises, with {quantity(watts, 'W')} throughout"
    if levels:
        return "cc-only", f"a plateau of {_level(trace, levels[0])} and no held voltage after it"
    return "inconclusive", "current flows, but neither a plateau nor a held voltage nor a held power is seen"


def _level(trace: Trace, phase: Phase) -> str:
    """A plateau to the digits that its uncertainty lets stand; without any, to six."""
    u_A = math.hypot(trace.u_A, trace.noise_A / math.sqrt(phase.stop - phase.start))
    return quantity(phase.level_A, "A", step=resolution_of(u_A))


def _held_words(trace: Trace, held: Phase) -> str:
    voltage = float(np.median(trace.voltage_V[held.start : held.stop]))
    manner = f" in {held.levels} small steps" if held.levels else ""
    level = quantity(voltage, "V", step=1e-3)
    return f"the voltage stays at {level} while the current falls by {held.fall:.0%}{manner}"


def _last_held(course: Course) -> Phase | None:
    """The constant-voltage phase that the charge ends with; one in the middle does not count."""
    charging = [phase for phase in course.phases if phase.kind in ("cc", "cv", "constant-power", "taper")]
    return charging[-1] if charging and charging[-1].kind == "cv" else None


def _doubt_log(doubt: _Doubt, trace: Trace, log: Log) -> None:
    lost = (log.not_finite + log.out_of_order) / (log.rows + log.not_finite + log.out_of_order)
    doubt.cast(1.0 - min(0.6, 4.0 * lost))
    if trace.noise_A > 0.01 * trace.scale_A:
        doubt.cast(0.93, "noisy")


def _flag_course(doubt: _Doubt, trace: Trace, course: Course) -> None:
    kinds = {phase.kind for phase in course.phases}
    if course.interrupted:
        doubt.cast(0.97, "interruption")
    slopes = [phase for phase in course.phases if phase.kind == "taper"]
    if any(phase.fall >= CLEAR_FALL or phase.stop - phase.start >= FEW_SAMPLES for phase in slopes):
        doubt.cast(0.95, "thermal-foldback")
    elif slopes:  # too few samples of too small a fall: a power limit would look the same
        doubt.cast(0.95, "undersampled")
    if "constant-power" in kinds and kinds & {"cc", "cv"}:
        doubt.cast(0.97, "power-limited")
    for kind in ("float", "top-up"):
        if kind in kinds:
            doubt.flags.append(kind)
    if course.train is not None and course.train.shortest < 3:
        doubt.cast(0.8, "undersampled")
    if any(phase.kind == "cc" and _oscillates(trace, phase) for phase in course.phases):
        doubt.cast(0.85, "oscillation")


def _doubt_held(doubt: _Doubt, course: Course) -> None:
    held = _last_held(course)
    if held is None:
        return
    if held.fall < FULL_FALL:
        doubt.cast(0.7 + 0.3 * held.fall / FULL_FALL, "ends-at-knee" if held.fall < 0.2 else "short-constant-voltage")
    if held.levels:
        doubt.cast(0.95 if held.levels >= 2 * LADDER_LEVELS else 0.85)
    if held.stop - held.start < FEW_SAMPLES:
        doubt.cast(0.7 + 0.03 * (held.stop - held.start), "undersampled")


def _doubt_open_end(doubt: _Doubt, name: str) -> None:
    """The log ends while current flows: what would have come is not known."""
    factor = {"cc-only": 0.75, "stepped-cc": 0.75, "constant-power": 0.85}.get(name, 0.99)
    doubt.cast(factor, "ends-in-charge")


def _doubt_plateaus(doubt: _Doubt, trace: Trace, course: Course, name: str) -> None:
    levels = plateaus(trace, course.phases)
    few = [phase for phase in levels if phase.stop - phase.start < FEW_SAMPLES]
    if few and name != "pulsed":
        doubt.cast(0.93, "undersampled")
    if name.startswith("stepped"):
        gaps = [abs(a.level_A - b.level_A) / a.level_A for a, b in itertools.pairwise(levels)]
        if min(gaps) < 0.1:
            doubt.cast(0.8)
        if len(levels) > 8:
            doubt.cast(0.8)


def _doubt_unexplained(doubt: _Doubt, trace: Trace, course: Course) -> None:
    """Charge that no phase accounts for."""
    told = sum(trace.charge_between(p.start, p.stop) for p in course.phases if p.kind != "rest")
    positive = np.maximum(trace.current_A, 0.0)
    every = float(np.sum(0.5 * (positive[1:] + positive[:-1]) * np.diff(trace.time_s))) / 3600.0
    missing = 1.0 - told / every if every > 0.0 else 0.0
    if missing > 0.1:
        doubt.cast(max(0.3, 1.1 - missing))


def _oscillates(trace: Trace, phase: Phase) -> bool:
    """Whether a plateau swings: scatter of more than 2 % with a tenth of its power at one frequency."""
    current = trace.current_A[phase.start : phase.stop]
    if current.size < 30:
        return False
    rest = current - moving_mean(current, max(11, current.size // 20))
    scatter = float(np.std(rest))
    if scatter < OSCILLATION * phase.level_A:
        return False
    spectrum = np.abs(np.fft.rfft(rest)) ** 2
    return float(np.max(spectrum[1:])) > 0.1 * float(np.sum(spectrum[1:])) and current.size >= 60
