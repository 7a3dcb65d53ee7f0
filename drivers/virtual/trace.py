"""What the circuit did lately: stretches of exponentials, with exact values and means."""

from __future__ import annotations

import math
from collections import deque
from typing import NamedTuple

FADE_TAU_s = 0.1  # an output capacitor and its bleeder; common practice, no source
KEPT_s = 10.0  # longest aperture and delay of a meter, with room

NODE, CHARGER, SHUNT, SUPPLY_CURRENT, LOAD_CURRENT = range(5)


class Apart(NamedTuple):
    """The charger's contacts alone, V: `level_V`, or what is left there and fades away from `origin_s` on."""

    origin_s: float
    level_V: float
    fades: bool

    def value(self, t_s: float) -> float:
        return self.level_V * math.exp(-(t_s - self.origin_s) / FADE_TAU_s) if self.fades else self.level_V

    def integral(self, from_s: float, to_s: float) -> float:
        if not self.fades:
            return self.level_V * (to_s - from_s)
        return -self.value(from_s) * FADE_TAU_s * math.expm1(-(to_s - from_s) / FADE_TAU_s)

    def reach_s(self, level_V: float) -> float:
        """When the contacts have faded to a level below where they are; inf if never."""
        if not self.fades or not 0.0 < level_V < self.level_V:
            return math.inf
        return self.origin_s + FADE_TAU_s * math.log(self.level_V / level_V)


class Stretch(NamedTuple):
    """From `start_s` on, signal k is level[k] + swing[k] exp(-(t - origin_s) / tau_s); tau 0: no swing.

    `apart`: where the charger hangs on nothing, its contacts have a time of their own.
    """

    start_s: float
    origin_s: float
    tau_s: float
    level: tuple[float, ...]
    swing: tuple[float, ...]
    apart: Apart | None = None

    def value(self, k: int, t_s: float) -> float:
        if k == CHARGER and self.apart is not None:
            return self.apart.value(t_s)
        if not self.tau_s:
            return self.level[k]
        return self.level[k] + self.swing[k] * math.exp(-(t_s - self.origin_s) / self.tau_s)

    def integral(self, k: int, from_s: float, to_s: float) -> float:
        if k == CHARGER and self.apart is not None:
            return self.apart.integral(from_s, to_s)
        area = self.level[k] * (to_s - from_s)
        if self.tau_s and self.swing[k]:
            decay = math.exp(-(from_s - self.origin_s) / self.tau_s)
            area -= self.swing[k] * self.tau_s * decay * math.expm1(-(to_s - from_s) / self.tau_s)
        return area


class Trace:
    """The last seconds of the circuit; signals by number (NODE, CHARGER, ...)."""

    def __init__(self, first: Stretch) -> None:
        self._stretches: deque[Stretch] = deque([first])

    @property
    def last(self) -> Stretch:
        return self._stretches[-1]

    def append(self, stretch: Stretch) -> None:
        """Add what holds from `stretch.start_s` on; replaces a stretch that would have no length."""
        stretches = self._stretches
        if stretches[-1].start_s == stretch.start_s:
            stretches.pop()
        stretches.append(stretch)
        while len(stretches) > 2 and stretches[1].start_s < stretch.start_s - KEPT_s:
            stretches.popleft()

    def value(self, k: int, t_s: float) -> float:
        """Signal k at a moment, V or A; before what is kept, as at its beginning."""
        for stretch in reversed(self._stretches):
            if stretch.start_s <= t_s:
                return stretch.value(k, t_s)
        first = self._stretches[0]
        return first.value(k, first.start_s)

    def mean(self, k: int, from_s: float, to_s: float) -> float:
        """Mean of signal k over a span of time, exact; V or A."""
        if to_s <= from_s:
            return self.value(k, to_s)
        last = self._stretches[-1]
        if last.start_s <= from_s and not last.tau_s and last.apart is None:
            return last.level[k]
        return self._integral(k, from_s, to_s) / (to_s - from_s)

    def _integral(self, k: int, from_s: float, to_s: float) -> float:
        area, end_s = 0.0, to_s
        for stretch in reversed(self._stretches):
            begin_s = max(stretch.start_s, from_s)
            if begin_s < end_s:
                area += stretch.integral(k, begin_s, end_s)
                end_s = begin_s
            if end_s <= from_s:
                return area
        first = self._stretches[0]
        return area + first.value(k, first.start_s) * (end_s - from_s)
