"""What a quantity was lately that only changes in steps, and its mean over an aperture, exact.

A pin that is excited in pulses shows its level only while the pulse lasts: that is a function of time, evaluated
when somebody asks, and no event of the circuit.
"""

from __future__ import annotations

import math
from collections import deque
from typing import NamedTuple

from drivers.virtual.trace import KEPT_s


class Pulses(NamedTuple):
    """On for `on_s` from each whole multiple of `every_s`; 0: always on."""

    every_s: float = 0.0
    on_s: float = 0.0

    def on_time_s(self, t_s: float) -> float:
        """How long the pulses have been on from time 0 to `t_s`."""
        if not self.every_s:
            return t_s
        whole = math.floor(t_s / self.every_s)
        return whole * self.on_s + min(t_s - whole * self.every_s, self.on_s)

    def is_on(self, t_s: float) -> bool:
        return not self.every_s or t_s - math.floor(t_s / self.every_s) * self.every_s < self.on_s


ALWAYS = Pulses()


class Steps:
    """A value that changes in steps, over the last seconds."""

    def __init__(self, value: float = 0.0) -> None:
        self._steps: deque[tuple[float, float]] = deque([(0.0, value)])  # (from when on, value)

    @property
    def last(self) -> float:
        return self._steps[-1][1]

    def set(self, t_s: float, value: float) -> None:
        """From `t_s` on, which must not lie before the last step, the value is `value`."""
        steps = self._steps
        if value == steps[-1][1]:
            return
        if steps[-1][0] == t_s and len(steps) > 1:
            steps.pop()
        steps.append((t_s, value))
        while len(steps) > 2 and steps[1][0] < t_s - KEPT_s:
            steps.popleft()

    def value(self, t_s: float, pulses: Pulses = ALWAYS) -> float:
        if not pulses.is_on(t_s):
            return 0.0
        return next((value for start_s, value in reversed(self._steps) if start_s <= t_s), self._steps[0][1])

    def mean(self, from_s: float, to_s: float, pulses: Pulses = ALWAYS) -> float:
        """The mean over a span of time; before what is kept, as at its beginning."""
        if to_s <= from_s:
            return self.value(to_s, pulses)
        area, end_s = 0.0, to_s
        for start_s, value in reversed(self._steps):
            begin_s = max(start_s, from_s)
            if begin_s < end_s:
                area += value * (pulses.on_time_s(end_s) - pulses.on_time_s(begin_s))
                end_s = begin_s
            if end_s <= from_s:
                return area / (to_s - from_s)
        area += self._steps[0][1] * (pulses.on_time_s(end_s) - pulses.on_time_s(from_s))
        return area / (to_s - from_s)
