"""Charging in pulses: many runs of current of about the same height with pauses between them."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from sequencer.analysis.trace import Trace

LEAST_PULSES = 4
ALIKE = 0.25  # spread of the pulses' currents about their median
LEAST_HEIGHT = 0.3  # of the largest current: lower ones are a float that comes and goes
LEAST_DUTY = 0.1  # below, the runs after a full charge are top-ups


@dataclass(frozen=True)
class PulseTrain:
    """Runs first ... last of the log make the train; on_s, off_s are medians."""

    first: int
    last: int
    level_A: float
    on_s: float
    off_s: float
    shortest: int  # samples of the shortest usual pulse or pause

    @property
    def duty(self) -> float:
        """Share of the period in which current flows."""
        return self.on_s / (self.on_s + self.off_s) if self.on_s + self.off_s > 0.0 else 1.0


def pulse_train(trace: Trace, runs: list[tuple[int, int]]) -> PulseTrain | None:
    """The pulse train in the runs of a log, or None.

    A train has at least 4 runs whose median currents agree within 25 % and reach 30 % of the largest current; runs that
    differ (a pre-charge, a start pulse) may come before or after. A long plateau of the same height before it belongs
    to the train: the duty of a pulse charger falls near the end.
    """
    if len(runs) < LEAST_PULSES:
        return None
    levels = np.array([float(np.median(trace.current_A[a:b])) for a, b in runs])
    middle = float(np.median(levels))
    alike = np.flatnonzero(np.abs(levels - middle) <= ALIKE * middle)
    if alike.size < LEAST_PULSES or alike.size < 0.7 * (int(alike[-1]) - int(alike[0]) + 1):
        return None
    train = _measure(trace, runs, int(alike[0]), int(alike[-1]), middle)
    return train if train.duty >= LEAST_DUTY and middle >= LEAST_HEIGHT * trace.scale_A else None


def _measure(trace: Trace, runs: list[tuple[int, int]], first: int, last: int, level_A: float) -> PulseTrain:
    inside = runs[first : last + 1]
    on = [_length(trace, a, b) for a, b in inside]
    off = [_length(trace, a[1], b[0]) for a, b in itertools.pairwise(inside)]
    sizes = [b - a for a, b in inside]
    pauses = [b[0] - a[1] for a, b in itertools.pairwise(inside)]
    shortest = int(min(np.median(sizes), np.median(pauses)))
    return PulseTrain(first, last, level_A, float(np.median(on)), float(np.median(off)), shortest)


def _length(trace: Trace, start: int, stop: int) -> float:
    """Time from the first sample to the first one after the range."""
    end = min(stop, trace.time_s.size - 1)
    return float(trace.time_s[end] - trace.time_s[start])
