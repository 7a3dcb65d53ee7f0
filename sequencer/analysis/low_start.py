"""What a charger did with a discharged pack: refused it, probed and refused it, precharged it, or gave full current."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from sequencer.analysis.estimates import Estimate, mean_between
from sequencer.analysis.wording import quantity

Array = npt.NDArray[np.float64]
ResponseKind = Literal["refuses", "probes and refuses", "precharges", "full current", "undecided"]

NOTHING_A = 0.010  # a mean below it is no charge, as in `classes`
PULSE_A = 0.050  # a reading above it is a current
FULL_s = 1.0  # of full current: no probe takes so long (probe pulses last 10 ms to 1 s, common practice, no source)
LONGEST_PROBE_s = 1.5
STEADY_SHARE = 0.05  # of a precharge: its two halves differ by no more, noise aside
TAIL_s = 2.0
FEWEST = 5  # readings in the tail
GAP_SHARE = 0.5


@dataclass(frozen=True)
class Pulse:
    """A short current. It lasted at least `least_s` and less than `most_s`; peak_A is its largest reading."""

    start_s: float
    least_s: float
    most_s: float
    peak_A: float
    readings: int
    whole: bool = True  # False: watching ended in it


@dataclass(frozen=True)
class Response:
    """What was seen. current : mean over the tail of a precharge or of full current, else None."""

    kind: ResponseKind
    current: Estimate | None
    pulses: tuple[Pulse, ...]
    words: str


def response_of(
    time_s: npt.ArrayLike, current_A: npt.ArrayLike, *, full_A: float, watched_s: float, tail_s: float = TAIL_s
) -> Response:
    """The class of one low start, from the contacts closed to the end of watching.

    time_s, current_A : (n,), rising in time, + into the pack.    full_A : above it flows full current (half of the
    declared one).    watched_s : for so long it must be watched before nothing is called a refusal; full current may
    end the watching sooner.
    Raises ValueError for arrays that do not fit, or a full_A that is not above 50 mA.
    """
    times, current = np.asarray(time_s, dtype=np.float64), np.asarray(current_A, dtype=np.float64)
    if times.ndim != 1 or times.shape != current.shape or not np.all(np.isfinite(times + current)):
        raise ValueError(f"time_s, current_A: expected two finite rows of one length, got {times.shape}")
    if not full_A > PULSE_A:
        raise ValueError(f"full_A: expected more than {PULSE_A} A, got {full_A!r}")
    tail = current[times >= times[-1] - tail_s * (1 + 1e-9)] if times.size else current
    if tail.size < FEWEST:
        return Response("undecided", None, (), f"{tail.size} readings at the end; {FEWEST} are needed")
    full = max((pulse.least_s for pulse in pulses_in(times, current, full_A)), default=0.0)
    pulses = pulses_in(times, current, PULSE_A)
    if full >= FULL_s:
        return _full(times, current, tail, pulses, full_A, full, tail_s)
    if abs(float(np.mean(tail))) < NOTHING_A and not np.any(np.abs(tail) > PULSE_A):
        return _nothing(times, pulses, watched_s)
    return _precharge(times, current, tail, pulses, tail_s)


def pulses_in(time_s: Array, current_A: Array, above_A: float) -> tuple[Pulse, ...]:
    """Runs of readings above a level, each with the bounds that the readings beside it set to its duration."""
    on = current_A > above_A
    edges = np.diff(np.concatenate(([False], on, [False])).astype(np.int8))
    runs = zip(np.flatnonzero(edges == 1).tolist(), np.flatnonzero(edges == -1).tolist(), strict=True)
    return tuple(_pulse(time_s, current_A, first, stop) for first, stop in runs)


def _pulse(time_s: Array, current_A: Array, first: int, stop: int) -> Pulse:
    before_s = float(time_s[first - 1]) if first else float(time_s[0])
    after_s = float(time_s[stop]) if stop < time_s.size else math.inf
    start_s, last_s = float(time_s[first]), float(time_s[stop - 1])
    peak_A = float(np.max(current_A[first:stop]))
    return Pulse(start_s, last_s - start_s, after_s - before_s, peak_A, stop - first, stop < time_s.size)


def _full(
    times: Array, current: Array, tail: Array, pulses: tuple[Pulse, ...], full_A: float, longest_s: float, tail_s: float
) -> Response:
    stays = bool(np.min(tail) > full_A)
    largest = quantity(float(np.max(current)), "A", step=1e-3)
    if not stays:
        words = f"full current, up to {largest}, for {longest_s:.1f} s, then less"
        return Response("full current", None, pulses, words)
    estimate = mean_between(times, current, float(times[-1]) - tail_s, float(times[-1]))
    shown = quantity(estimate.value, "A", step=1e-3)
    first = next(pulse for pulse in pulses_in(times, current, full_A) if not pulse.whole)
    small = [pulse for pulse in pulses if pulse.start_s < first.start_s - 0.5]
    before = f", after {_several(small)}" if small else " at once"
    return Response("full current", estimate, tuple(pulse for pulse in pulses if pulse.whole), f"{shown}{before}")


def _nothing(times: Array, pulses: tuple[Pulse, ...], watched_s: float) -> Response:
    lasted_s = float(times[-1] - times[0])
    if lasted_s < watched_s * (1.0 - 1e-9):
        words = f"no current at the end of {lasted_s:.1f} s; {watched_s:.1f} s must be watched to call it a refusal"
        return Response("undecided", None, pulses, words)
    spacing_s = float(np.max(np.diff(times)))
    unseen = f"what is shorter than the {spacing_s:.2f} s between readings may go unseen"
    if not pulses:
        return Response("refuses", None, (), f"no current in {lasted_s:.1f} s; {unseen}")
    if max(pulse.least_s for pulse in pulses) > LONGEST_PROBE_s:
        words = f"a current of {max(pulse.peak_A for pulse in pulses):.3f} A flowed for a while and ended"
        return Response("undecided", None, pulses, words)
    return Response("probes and refuses", None, pulses, f"{_several(pulses)}, then nothing; {unseen}")


def _several(pulses: tuple[Pulse, ...] | list[Pulse]) -> str:
    longest = max(pulses, key=lambda pulse: pulse.least_s)
    highest = quantity(max(pulse.peak_A for pulse in pulses), "A", step=1e-3)
    count = f"{len(pulses)} pulse{'s' * (len(pulses) > 1)}"
    return f"{count} up to {highest}, {longest.least_s:.1f} s to {longest.most_s:.1f} s long"


def _precharge(times: Array, current: Array, tail: Array, pulses: tuple[Pulse, ...], tail_s: float) -> Response:
    level_A = float(np.mean(tail))
    first, second = np.array_split(tail, 2)
    noise_A = math.sqrt(sum(float(np.var(half)) / half.size for half in (first, second)))
    moved_A = abs(float(np.mean(second) - np.mean(first)))
    steady = moved_A <= STEADY_SHARE * level_A + 3.0 * noise_A and float(np.min(tail)) > GAP_SHARE * level_A
    if level_A < NOTHING_A or not steady:
        shown = quantity(level_A, "A", step=1e-3)
        return Response("undecided", None, pulses, f"the current still changes at the end: {shown} on the whole")
    estimate = mean_between(times, current, float(times[-1]) - tail_s, float(times[-1]))
    small = tuple(pulse for pulse in pulses if pulse.whole)
    after = f", after {_several(small)}" if small else ""
    return Response("precharges", estimate, small, f"{quantity(estimate.value, 'A', step=1e-3)} flows steadily{after}")
