"""The phases of one unbroken run of charging current: plateaus, held voltage, held power, other slopes."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from sequencer.analysis.power import holds_power, onset_of_limit, power_of
from sequencer.analysis.regulation import Held, held_voltage, tolerance_V
from sequencer.analysis.segments import Segment, cut
from sequencer.analysis.trace import Trace

Kind = Literal["precharge", "cc", "cv", "constant-power", "taper", "pulse", "rest", "float", "top-up"]

SAME_LEVEL = 0.02  # plateaus closer than this are one
SMALL_STEP = 0.08  # of the plateau before
SLOPE_STEPS = 4  # plateaus in a row, each a small step below, are a slope
SLIDE_SHARE = 0.025  # of the largest current: less between two plateaus is no step
FRAGMENT_TIME = 0.02  # of a run: what is shorter may be a piece of a slope
LEAST_SLOPE = 4  # samples: less may be a transition
LEAST_TIME = 0.005  # of a run: what is shorter is a transition
FLOAT_SHARE = 0.12  # of the largest plateau: a plateau below, after the charge, is a float
NOISE_SIGMAS = 4.0  # by so much single readings of one level may differ
FLOAT_DROP = 0.6  # of the current before: how far the current falls at once into a float


@dataclass(frozen=True)
class Phase:
    """Samples start ... stop-1 of one kind. level_A: plateau current, else the first current.

    fall: share by which the current falls in it.    levels: digital steps of a held voltage, 0 for a smooth one.
    after_foldback: a plateau that was reached by a slope without a held voltage.
    """

    kind: Kind
    start: int
    stop: int
    level_A: float
    fall: float = 0.0
    levels: int = 0
    after_foldback: bool = False


def phases_of_run(trace: Trace, start: int, stop: int) -> list[Phase]:
    """Phases of the run of samples start ... stop-1, in order."""
    segments = cut(trace.time_s, trace.current_A, start, stop, scale_A=trace.scale_A, noise_A=trace.noise_A)
    segments = [segment for segment in segments if not _rises(trace, segment)]
    phases = _slopes_joined(trace, _regulated(trace, segments), FRAGMENT_TIME * trace.duration(start, stop))
    phases = _power_joined(trace, phases)
    least_s = LEAST_TIME * trace.duration(start, stop)
    lasting = [p for p in phases if p.kind == "cv" or trace.duration(p.start, p.stop) >= least_s]
    lasting = [p for p in lasting if p.stop - p.start >= (LEAST_SLOPE if p.kind == "taper" else 2)]
    return _foldback_marked(trace, _small_steps_joined(_merged(trace, lasting)))


def _rises(trace: Trace, segment: Segment) -> bool:
    """A soft start: no phase of its own."""
    if segment.kind != "slope":
        return False
    return float(trace.current_A[segment.stop - 1]) > segment.level_A + 3.0 * trace.noise_A


def _regulated(trace: Trace, segments: list[Segment]) -> list[Phase]:
    """Held voltages found from the end backwards, everything else by its own shape."""
    phases: list[Phase] = []
    last = len(segments) - 1
    while last >= 0:
        found = held_voltage(trace, segments, last)
        if found is None:
            phases[:0] = _alone(trace, segments, last)
            last -= 1
            continue
        first, held = found
        phases[:0] = _with_float(trace, segments[first : last + 1], held)
        if held.start > segments[first].start:
            phases[:0] = _unheld(trace, segments[first], held.start)
        last = first - 1
    return phases


def _unheld(trace: Trace, segment: Segment, stop: int) -> list[Phase]:
    """What comes before the held voltage in the same slope."""
    if stop - segment.start < 2:
        return []
    return [_slope(trace, segment.start, stop, segment.level_A)]


def _alone(trace: Trace, segments: list[Segment], index: int) -> list[Phase]:
    segment = segments[index]
    if segment.kind == "flat":
        return [Phase("cc", segment.start, segment.stop, segment.level_A)]
    if segment.kind == "short":  # part of a slope, or a transition; too short to tell until it is joined
        return [Phase("taper", segment.start, segment.stop, segment.level_A)]
    phase = _slope(trace, segment.start, segment.stop, segment.level_A)
    cut_off = segment.stop == trace.time_s.size and segment.level_A > FLOAT_SHARE * trace.scale_A
    knee = phase.fall < 3.0 * SAME_LEVEL and index > 0 and segments[index - 1].kind == "flat"
    if cut_off and knee and _steady_voltage(trace, segment):
        return [replace(phase, kind="cv")]
    return [phase]


def _steady_voltage(trace: Trace, segment: Segment) -> bool:
    voltage = trace.voltage_V[segment.start : segment.stop]
    return float(np.ptp(voltage)) <= tolerance_V(trace, float(np.median(voltage)))


def _slope(trace: Trace, start: int, stop: int, level_A: float) -> Phase:
    fall = 1.0 - float(trace.current_A[stop - 1]) / level_A if level_A > 0.0 else 0.0
    kind: Kind = "constant-power" if holds_power(trace, start, stop) else "taper"
    return Phase(kind, start, stop, level_A, fall)


def _with_float(trace: Trace, group: list[Segment], held: Held) -> list[Phase]:
    """The held voltage, and the float where it ends in a low plateau that the current fell to at once."""
    plain = Phase("cv", held.start, held.stop, float(trace.current_A[held.start]), held.fall, held.levels)
    for number, before in enumerate(group[:-1] if not held.levels else []):
        low = _low_plateau(trace, group[number + 1 :])
        if low is not None and low.level_A <= FLOAT_DROP * float(trace.current_A[before.stop - 1]):
            return [replace(plain, stop=before.stop), Phase("float", group[number + 1].start, held.stop, low.level_A)]
    return [plain]


def _low_plateau(trace: Trace, tail: list[Segment]) -> Segment | None:
    """The plateau of a float that begins with the first segment: noise may make a slope of its first readings."""
    flat = next((segment for segment in tail if segment.kind == "flat"), None)
    if flat is None or flat.level_A > FLOAT_SHARE * trace.scale_A:
        return None
    leading = tail[: tail.index(flat)]
    near_A = max(SAME_LEVEL * flat.level_A, NOISE_SIGMAS * trace.noise_A)
    return flat if all(abs(segment.level_A - flat.level_A) <= near_A for segment in leading) else None


def _merged(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """Neighbouring plateaus of one level become one: a glitch between them is no step."""
    merged: list[Phase] = []
    for phase in phases:
        held = merged[-1].kind if merged else "rest"
        if phase.kind == "cc" and held in ("cc", "float") and same_level(trace, phase.level_A, merged[-1].level_A):
            longer = max(phase, merged[-1], key=lambda p: trace.duration(p.start, p.stop))
            merged[-1] = replace(longer, kind=held, start=merged[-1].start, stop=phase.stop)
        else:
            merged.append(phase)
    return merged


def _slopes_joined(trace: Trace, phases: list[Phase], fragment_s: float) -> list[Phase]:
    """Noise breaks a slope into pieces, some of which look flat for a moment: what goes on downward joins it."""
    joined: list[Phase] = []
    for phase in phases:
        last = joined[-1] if joined else phase
        short = phase.kind == "cc" and trace.duration(phase.start, phase.stop) < fragment_s
        if last.kind == "taper" and (phase.kind == "taper" or short) and _slides_into(trace, last, phase):
            fall = 1.0 - float(trace.current_A[phase.stop - 1]) / last.level_A
            joined[-1] = replace(last, stop=phase.stop, fall=fall)
        elif short and joined and last.kind == "cc" and _slides_into(trace, last, phase):
            joined.append(replace(phase, kind="taper"))
        else:
            joined.append(phase)
    return joined


def _power_joined(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """One power is one phase, with the plateau before it: where the voltage hardly moves, it looks like a plateau too,
    and a short plateau like a part of the slope."""
    joined: list[Phase] = []
    for limited, group in itertools.groupby(phases, lambda p: p.kind in ("cc", "taper", "constant-power")):
        run = list(group)
        joined += _power_limited(trace, run) if limited else run
    return joined


def _power_limited(trace: Trace, run: list[Phase]) -> list[Phase]:
    """The last phase at constant power reaches as far to both sides as its power does."""
    last = next((number for number in reversed(range(len(run))) if _ends_in_power(trace, run[number])), None)
    if last is None:
        return run
    watts = power_of(trace, run[last].start, run[last].stop)
    for first, end in itertools.product(range(last + 1), range(len(run), last, -1)):
        start, stop = run[first].start, run[end - 1].stop
        onset = onset_of_limit(trace, start, stop, watts)
        if onset is not None:
            level_A = float(np.median(trace.current_A[start : max(onset, start + 1)]))
            plateau = [Phase("cc", start, onset, level_A)] if onset - start >= LEAST_SLOPE else []
            fall = 1.0 - float(trace.current_A[stop - 1]) / float(trace.current_A[onset])
            limited = Phase("constant-power", onset, stop, float(trace.current_A[onset]), fall)
            return [*run[:first], *plateau, limited, *run[end:]]
    return run


def _ends_in_power(trace: Trace, phase: Phase) -> bool:
    """A slope may begin with a plateau that is too short to stand for itself; its power is not held from the start."""
    later = phase.start + (phase.stop - phase.start) // 2
    return phase.kind == "constant-power" or (phase.kind == "taper" and holds_power(trace, later, phase.stop))


def _small_steps_joined(phases: list[Phase]) -> list[Phase]:
    """Four plateaus or more, each a little below the one before, are a slope in digital steps: the first one stays."""
    joined: list[Phase] = []
    index = 0
    while index < len(phases):
        end = index + 1
        while end < len(phases) and phases[end].kind == "cc" == phases[end - 1].kind and _little_below(phases, end):
            end += 1
        joined.append(phases[index])
        if end - index >= SLOPE_STEPS:
            fall = 1.0 - phases[end - 1].level_A / phases[index].level_A
            below = phases[index + 1]
            joined.append(Phase("taper", below.start, phases[end - 1].stop, below.level_A, fall))
            index = end
        else:
            index += 1
    return joined


def _little_below(phases: list[Phase], index: int) -> bool:
    before, level = phases[index - 1].level_A, phases[index].level_A
    return before * (1.0 - SMALL_STEP) <= level < before


def same_level(trace: Trace, a_A: float, b_A: float) -> bool:
    """Whether two plateau currents are one setting."""
    return abs(a_A - b_A) <= max(SAME_LEVEL * max(a_A, b_A), 2.0 * trace.noise_A)


def _foldback_marked(trace: Trace, phases: list[Phase]) -> list[Phase]:
    """Plateaus that the current slid to, rather than stepped to, are no stages of the algorithm."""
    marked: list[Phase] = []
    for phase in phases:
        slid = phase.kind == "cc" and bool(marked) and _slides_into(trace, marked[-1], phase)
        marked.append(replace(phase, after_foldback=True) if slid else phase)
    return marked


def _slides_into(trace: Trace, before: Phase, after: Phase) -> bool:
    """Lower than what comes before, and reached without a step."""
    if after.level_A >= before.level_A or before.kind == "cv":
        return False
    end = float(np.median(trace.current_A[max(before.start, before.stop - 3) : before.stop]))
    begin = float(np.median(trace.current_A[after.start : min(after.stop, after.start + 3)]))
    step = end - begin
    if before.kind in ("taper", "constant-power") and step <= FLOAT_SHARE * trace.scale_A:
        return True
    return step <= max(SLIDE_SHARE * trace.scale_A, 6.0 * trace.noise_A)
