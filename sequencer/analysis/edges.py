"""Edges between two classes of behaviour: where to look next, what the answers say, and how sure that is.

A search is a value: an engine asks it for a setting, shows the charger that setting, and tells it the answer. What it
then knows is an interval, never a number: the last setting of one class and the first of the other.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from typing import Literal, Self

from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.analysis.wording import quantity

Scale = Literal["geometric", "arithmetic"]
UNDECIDED = "undecided"
TRIES = 2  # of one setting without an answer, or failed controls in a row, before a search gives up


def expected_steps(low: float, high: float, resolution: float, scale: Scale = "geometric") -> int:
    """How many settings a search needs: ceil(log2(span/resolution)), spans and resolution as logarithms for geometric.

    resolution : relative for geometric (0.005: high/low <= 1.005), else in the unit of low and high; > 0.
    """
    _check_bracket(low, high, resolution, scale)
    return _steps(low, high, resolution, scale)


@dataclass(frozen=True)
class EdgeInterval:
    """The edge lies between `low`, where low_class was seen, and `high`, where high_class was."""

    low: float
    high: float
    low_class: str
    high_class: str

    def __post_init__(self) -> None:
        if not (math.isfinite(self.low) and math.isfinite(self.high) and self.low <= self.high):
            raise ValueError(f"low, high: expected finite low <= high, got {self.low!r} and {self.high!r}")

    @property
    def width(self) -> float:
        return self.high - self.low

    @property
    def middle(self) -> float:
        return self.low + 0.5 * (self.high - self.low)

    def converted(self, law: Callable[[float], float]) -> EdgeInterval:
        """The interval in another quantity, by a monotone law: °C to Ω by a curve, asked Ω to measured Ω by a table."""
        low, high = law(self.low), law(self.high)
        if low <= high:
            return EdgeInterval(low, high, self.low_class, self.high_class)
        return EdgeInterval(high, low, self.high_class, self.low_class)


@dataclass(frozen=True)
class EdgeSearch:
    """A search for the edge next to the low end of a bracket, as far as it has come.

    answers : (setting, class) in the order given, both ends of the bracket first.
    vouched : how many of them a good control stands behind.    unclear, failed : tries of the present setting that gave
    no answer, and failed controls in a row.    trouble : why the search ended before the interval was as narrow as
    wanted; what the interval says holds nevertheless.
    """

    answers: tuple[tuple[float, str], ...]
    resolution: float
    scale: Scale = "geometric"
    unit: str = "Ω"
    vouched: int = 2
    unclear: int = 0
    failed: int = 0
    trouble: str | None = None

    @classmethod
    def between(
        cls, low: float, high: float, low_class: str, high_class: str, *, resolution: float,
        scale: Scale = "geometric", unit: str = "Ω",
    ) -> Self:  # fmt: skip
        """A search between two settings that were seen to differ.

        resolution : as in `expected_steps`. Raises ValueError for a bracket that is none, or two classes alike.
        """
        _check_bracket(low, high, resolution, scale)
        if low_class == high_class or UNDECIDED in (low_class, high_class):
            raise ValueError(f"high_class: expected two classes that differ, got '{low_class}' and '{high_class}'")
        return cls(((low, low_class), (high, high_class)), resolution, scale, unit)

    @property
    def low_class(self) -> str:
        return self.answers[0][1]

    @property
    def interval(self) -> EdgeInterval:
        """What the answers say together: below it only low_class was seen, above it never again.

        Where answers contradict each other it spans them all, so that it still holds the edge, sharp or not.
        """
        first_other = min(value for value, seen in self.answers if seen != self.low_class)
        last_same = max(value for value, seen in self.answers if seen == self.low_class)
        low = max((value for value, _ in self.answers if value < first_other), default=first_other)
        high = min((value for value, _ in self.answers if value > last_same), default=last_same)
        high_class = next((seen for value, seen in self.answers if value == high and seen != self.low_class), "")
        return EdgeInterval(low, high, self.low_class, high_class or self.answers[1][1])

    @property
    def steps_left(self) -> int:
        """Settings still to be asked for, if all goes well."""
        found = self.interval
        return 0 if self.trouble else _steps(found.low, found.high, self.resolution, self.scale)

    def ask(self) -> float | None:
        """The next setting; None when the interval is as narrow as wanted, or there is trouble."""
        if self.steps_left == 0:
            return None
        found = self.interval
        middle = math.sqrt(found.low * found.high) if self.scale == "geometric" else found.middle
        return middle if found.low < middle < found.high else None

    def told(self, seen: str, *, at: float | None = None) -> Self:
        """The search after the answer to what was asked. Raises ValueError when nothing was asked.

        seen : a class; "undecided" has the same setting asked once more, then ends the search.
        at : the setting that was really made, where it is not the one asked: a resistor has steps.
        """
        asked = self.ask()
        if asked is None:
            raise ValueError("seen: nothing was asked; what was seen besides goes to `besides`")
        value = asked if at is None else at
        if seen == UNDECIDED:
            unclear = self.unclear + 1
            why = f"{quantity(value, self.unit)} gave no clear answer in {TRIES} tries" if unclear >= TRIES else None
            return replace(self, unclear=unclear, trouble=why)
        after = self.besides(value, seen)
        return replace(after, trouble=after.trouble or after._too_coarse(value, self.interval))

    def besides(self, value: float, seen: str) -> Self:
        """The search after one more answer, at a setting that was not asked for: an end once more, a grid point."""
        if seen == UNDECIDED:
            return self
        after = replace(self, answers=(*self.answers, (value, seen)), unclear=0)
        return replace(after, trouble=after._contradiction() or self.trouble)

    def controlled(self, good: bool) -> Self:
        """The search after a control point: a good one vouches for the answers so far.

        A failed one voids the answers since the last good one, since a latched fault or a contact that no longer closes
        looks like "no charge"; the same setting is then asked once more, and a second failure ends the search.
        """
        if good:
            return replace(self, vouched=len(self.answers), failed=0)
        failed = self.failed + 1
        void = [quantity(value, self.unit) for value, _ in self.answers[self.vouched :]]
        told = f"the control failed {TRIES} times in a row"
        why = f"{told}; what was seen at {', '.join(void)} counts for nothing" if void else told
        kept = replace(self, answers=self.answers[: self.vouched], failed=failed, unclear=0)
        return replace(kept, trouble=why if failed >= TRIES else kept._contradiction())

    def _contradiction(self) -> str | None:
        """Words for a low_class answer at or above another class; the edge is not sharp, or something drifted."""
        first, other = min((value, seen) for value, seen in self.answers if seen != self.low_class)
        last = max(value for value, seen in self.answers if seen == self.low_class)
        if last < first:
            return None
        if last == first:
            return f"answers contradict each other: {quantity(first, self.unit)} showed {self.low_class} and {other}"
        low, high = quantity(first, self.unit), quantity(last, self.unit)
        return f"answers contradict each other: {other} at {low}, {self.low_class} above it at {high}"

    def _too_coarse(self, value: float, before: EdgeInterval) -> str | None:
        """Words where a setting fell on an end of the bracket: the resistor has no step between."""
        if value not in (before.low, before.high) or not self.steps_left:
            return None
        return f"no setting lies within the last {quantity(before.width, self.unit)}; there is no finer step"


def end_budget(interval: EdgeInterval, contributions: Iterable[Contribution], *, unit: str = "Ω") -> Budget:
    """The uncertainty of the interval's ends, for a decision on the interval itself: the bracket is none of it.

    contributions : what makes the settings uncertain, in `unit`: resistor as measured, contact, repeatability.
    """
    return Budget(interval.middle, unit, tuple(contributions))


def _steps(low: float, high: float, resolution: float, scale: Scale) -> int:
    if scale == "geometric":
        ratio = (math.log(high / low) if high > low else 0.0) / math.log1p(resolution)
    else:
        ratio = (high - low) / resolution
    # A bracket that is as wide as wanted but for rounding needs no further step.
    return max(0, math.ceil(math.log2(ratio) - 1e-9)) if ratio > 0.0 else 0


def _check_bracket(low: float, high: float, resolution: float, scale: Scale) -> None:
    least = 0.0 if scale == "geometric" else -math.inf
    if not (least < low < high < math.inf):
        raise ValueError(f"low, high: expected {least:g} < low < high, got {low!r} and {high!r}")
    if not 0.0 < resolution < math.inf:
        raise ValueError(f"resolution: expected a number above zero, got {resolution!r}")
