"""Whether the charger holds the voltage while its current falls. Voltage beside current decides.

Field practice: constant voltage is a voltage within ±0.3 % (or 3 σ) while the current falls by half or more; in a
thermal foldback the voltage falls with the current.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from sequencer.analysis.segments import Segment
from sequencer.analysis.smoothing import despiked, moving_mean, width_for
from sequencer.analysis.trace import Trace

VOLTAGE_SHARE = 0.003
LADDER_SHARE = 0.01
LEAST_FALL = 0.05  # of the current before: less shows a knee, not what is held after it
LADDER_LEVELS = 6  # so many levels in small steps at a held voltage are one regulation in digital steps
LADDER_STEP = 0.12  # of the first level
STIFF_LEVELS = 3  # so many levels make one regulation when the voltage shows no sawtooth at all, that is
STILL_SHARE = 0.0005  # of the voltage


@dataclass(frozen=True)
class Held:
    """Samples start ... stop-1 in which the voltage is held; levels is the number of digital steps (0: smooth)."""

    start: int
    stop: int
    voltage_V: float
    fall: float
    levels: int


def tolerance_V(trace: Trace, voltage_V: float, share: float = VOLTAGE_SHARE) -> float:
    """How far from a held voltage a sample may lie."""
    return max(share * abs(voltage_V), 3.0 * trace.noise_V)


def held_voltage(trace: Trace, segments: list[Segment], last: int) -> tuple[int, Held] | None:
    """The constant-voltage phase that ends with segment `last`, and the index of its first segment; None if none."""
    found = _held_within(trace, segments, last, VOLTAGE_SHARE)
    if found is not None and (found[1].levels == 0 or found[0] <= 1):
        return found
    coarse = _held_within(trace, segments, last, LADDER_SHARE)  # digital steps have a sawtooth of their own
    return coarse if coarse is not None and coarse[1].levels else found


def _held_within(trace: Trace, segments: list[Segment], last: int, share: float) -> tuple[int, Held] | None:
    first, start = _reach_back(trace, segments, last, share)
    if start >= segments[last].stop:
        return None
    while (
        first < last
        and segments[first].kind == "flat"
        and (_opens(trace, segments, first, last) or _is_stage(trace, segments, first))
    ):
        first += 1
        start = segments[first].start
    group = segments[first : last + 1]
    before = _current_before(trace, segments, first, start)
    stop = segments[last].stop
    fall = 1.0 - _smooth_end(trace, start, stop) / before if before > 0.0 else 0.0
    if fall < LEAST_FALL or _passed_later(trace, segments, stop) or _folds_back(trace, start, stop, fall):
        return None
    if not _one_regulation(trace, group, start, before):
        return None
    flats = sum(segment.kind == "flat" for segment in group)
    voltage = float(np.median(trace.voltage_V[start:stop]))
    return first, Held(start, stop, voltage, fall, flats if flats >= LADDER_LEVELS else 0)


def _reach_back(trace: Trace, segments: list[Segment], last: int, share: float) -> tuple[int, int]:
    """First segment and sample from which the voltage stays where it is in segment `last`."""
    tail = segments[last]
    voltage = float(np.median(trace.voltage_V[max(tail.start, tail.stop - max(3, tail.size // 10)) : tail.stop]))
    allowed = tolerance_V(trace, voltage, share)
    first, start = last, _held_from(trace, tail, voltage, allowed)
    while start == segments[first].start and first > 0 and _continues(trace, segments[first - 1], segments[first]):
        onset = _held_from(trace, segments[first - 1], voltage, allowed)
        if onset >= segments[first - 1].stop or (onset > segments[first - 1].start and _is_flat(segments[first - 1])):
            break
        first, start = first - 1, onset
    return first, start


def _is_flat(segment: Segment) -> bool:
    return segment.kind == "flat"


def _continues(trace: Trace, before: Segment, after: Segment) -> bool:
    return before.level_A >= after.level_A * 0.99 - 4.0 * trace.noise_A


def _held_from(trace: Trace, segment: Segment, voltage_V: float, allowed_V: float) -> int:
    """Sample of the segment from which on the voltage stays within the tolerance; its stop where it never does."""
    width = width_for(trace.noise_V, 0.3 * allowed_V, max(1, segment.size // 10))
    smooth = moving_mean(trace.voltage_V[segment.start : segment.stop], width)
    outside = np.flatnonzero(np.abs(smooth - voltage_V) > allowed_V)
    return segment.start + (int(outside[-1]) + 1 if outside.size else 0)


def _opens(trace: Trace, segments: list[Segment], first: int, last: int) -> bool:
    """Whether a plateau is the one the charge began with (or rose to), not a digital step on the way down."""
    flats = [segment for segment in segments[:first] if segment.kind == "flat"]
    if flats:
        return flats[-1].level_A < segments[first].level_A
    steps_s = [trace.duration(s.start, s.stop) for s in segments[first + 1 : last + 1] if s.kind == "flat"]
    return len(steps_s) < 2 or trace.duration(segments[first].start, segments[first].stop) > 2.0 * max(steps_s[:3])


def _is_stage(trace: Trace, segments: list[Segment], index: int) -> bool:
    """Whether a plateau climbs to the voltage again after a large step down, be it by less than the tolerance."""
    segment = segments[index]
    before = segments[index - 1].level_A if index and segments[index - 1].kind == "flat" else segment.level_A
    after = segments[index + 1].level_A
    if max(before - segment.level_A, segment.level_A - after) <= LADDER_STEP * before:
        return False
    part = max(1, segment.size // 5)
    voltage = trace.voltage_V[segment.start : segment.stop]
    climb = float(np.mean(voltage[-part:]) - np.mean(voltage[:part]))
    return climb > max(STILL_SHARE * float(voltage[-1]), 4.0 * trace.noise_V * float(np.sqrt(2.0 / part)))


def _passed_later(trace: Trace, segments: list[Segment], stop: int) -> bool:
    """Whether the same run later reaches a clearly higher voltage: then this one was no limit of the charger."""
    if stop + 3 > segments[-1].stop:
        return False
    later = despiked(trace.voltage_V[stop : segments[-1].stop])
    held = float(np.median(trace.voltage_V[max(segments[0].start, stop - 5) : stop]))
    return float(np.max(later)) > held + 0.5 * VOLTAGE_SHARE * held + 4.0 * trace.noise_V


def _current_before(trace: Trace, segments: list[Segment], first: int, start: int) -> float:
    if start > segments[first].start:
        return float(trace.current_A[start])
    if first == 0:
        return segments[0].level_A
    before = segments[first - 1]
    return before.level_A if before.kind == "flat" else float(trace.current_A[before.stop - 1])


def _one_regulation(trace: Trace, group: list[Segment], start: int, before_A: float) -> bool:
    """A smooth fall, or so many and so small digital steps that nobody would call them stages.

    start : where the voltage begins to be held; the last samples of a slope before a step down are no smooth fall.
    """
    flats = [segment for segment in group if segment.kind == "flat"]
    smooth_s = sum(trace.duration(max(s.start, start), s.stop) for s in group if s.kind != "flat")
    flat_s = sum(trace.duration(s.start, s.stop) for s in flats)
    if not flats or smooth_s > flat_s:
        return True
    if len(flats) >= STIFF_LEVELS and _stands_still(trace, group):
        return True
    steps = [_end_level(trace, a) - b.level_A for a, b in itertools.pairwise(group)]
    if group[0].kind != "slope":
        steps.append(before_A - group[0].level_A)
    return len(flats) >= LADDER_LEVELS and max(steps) <= LADDER_STEP * before_A


def _end_level(trace: Trace, segment: Segment) -> float:
    return float(trace.current_A[segment.stop - 1]) if segment.kind == "slope" else segment.level_A


def _stands_still(trace: Trace, group: list[Segment]) -> bool:
    """No sawtooth at all: what steps is the pack (or what stands in for it), not the charger."""
    voltage = despiked(trace.voltage_V[group[0].start : group[-1].stop])
    width = width_for(trace.noise_V, 0.0001 * float(voltage[0]), max(1, voltage.size // 20))
    low, high = np.quantile(moving_mean(voltage, width), (0.02, 0.98))
    return float(high - low) <= max(STILL_SHARE * float(high), 4.0 * trace.noise_V / float(np.sqrt(width)))


def _folds_back(trace: Trace, start: int, stop: int, fall: float) -> bool:
    """A small fall during which the voltage falls too, by more than its noise: not regulated by voltage."""
    if fall >= 0.5 or stop - start < 5:
        return False
    current, voltage = trace.current_A[start:stop], trace.voltage_V[start:stop]
    deviation = current - float(np.mean(current))
    spread = float(deviation @ deviation)
    if spread == 0.0:
        return False
    slope = float(deviation @ (voltage - float(np.mean(voltage)))) / spread
    drop = slope * float(current[0] - current[-1])
    return drop > float(max(0.0005 * float(np.mean(voltage)), 3.0 * trace.noise_V / np.sqrt((stop - start) / 4.0)))


def _smooth_end(trace: Trace, start: int, stop: int) -> float:
    """Current at the end, with as many samples averaged as the noise asks for."""
    wanted = width_for(trace.noise_A, 0.01 * trace.scale_A, max(1, (stop - start) // 5))
    return float(np.mean(trace.current_A[stop - wanted : stop]))
