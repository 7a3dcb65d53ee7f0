"""How often to look: fast for a while after anything has moved, quiet when nothing has. Pure."""

from __future__ import annotations

from dataclasses import dataclass

FAST_s = 0.1
QUIET_s = 1.0
STEP_SHARE = 0.02  # of the largest current seen: a change between two scans that counts as a move
STEP_FLOOR_A = 0.02
SETTLED_RESPONSES = 5.0  # fast for so many response times after a move
SHORTEST_FAST_s = 5.0


@dataclass(frozen=True)
class Pace:
    """`fast_until_s` is the run time up to which to look fast."""

    fast_until_s: float
    response_s: float
    always_fast: bool = False
    current_A: float = 0.0
    largest_A: float = 0.0

    @property
    def stretch_s(self) -> float:
        return max(SHORTEST_FAST_s, SETTLED_RESPONSES * self.response_s)

    def moved(self, time_s: float) -> Pace:
        """After a setting, an insertion, an edge."""
        return Pace(time_s + self.stretch_s, self.response_s, self.always_fast, self.current_A, self.largest_A)

    def seen(self, time_s: float, current_A: float) -> Pace:
        """After a scan."""
        largest = max(self.largest_A, abs(current_A))
        moved = abs(current_A - self.current_A) > max(STEP_FLOOR_A, STEP_SHARE * largest)
        until = time_s + self.stretch_s if moved else self.fast_until_s
        return Pace(until, self.response_s, self.always_fast, current_A, largest)

    def period_s(self, time_s: float) -> float:
        return FAST_s if self.always_fast or time_s < self.fast_until_s else QUIET_s
