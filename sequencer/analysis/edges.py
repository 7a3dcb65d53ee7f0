"""Edges between two classes of behaviour: where to look next, what the answers say, and how sure that is.

A search is a value: an engine asks it for a setting, shows the charger that setting, and tells it the answer. What it
then knows is an interval, never a number: the last setting of one class and the first of the other.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Literal, Self

from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.analysis.wording import quantity

Scale = Literal["geometric", "arithmetic"]
UNDECIDED = "undecided"
TRIES = 2  # of one setting that gave no answer, or whose control failed, before the search gives up


def next_ohm(low_ohm: float, high_ohm: float, resolution: float) -> float | None:
    """The geometric middle; None when high/low is at most 1 + resolution. Raises ValueError unless 0 < low < high."""
    if not 0.0 < low_ohm < high_ohm < math.inf:
        raise ValueError(f"low_ohm, high_ohm: expected 0 < low < high, got {low_ohm!r} and {high_ohm!r}")
    return None if _steps(low_ohm, high_ohm, resolution, "geometric") == 0 else math.sqrt(low_ohm * high_ohm)


def next_value(low: float, high: float, resolution: float) -> float | None:
    """The middle; None when high - low is at most the resolution (°C, V). Raises ValueError unless low < high."""
    if not -math.inf < low < high < math.inf:
        raise ValueError(f"low, high: expected low < high, got {low!r} and {high!r}")
    return None if _steps(low, high, resolution, "arithmetic") == 0 else 0.5 * (low + high)


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

    def shifted(self, by: float) -> EdgeInterval:
        """The interval with a known error taken out, such as the middle of what a contact may add."""
        return EdgeInterval(self.low + by, self.high + by, self.low_class, self.high_class)

    def words(self, unit: str) -> str:
        low, high = (quantity(value, unit) for value in (self.low, self.high))
        return f"{self.low_class} at {low}, {self.high_class} at {high}"


@dataclass(frozen=True)
class EdgeSearch:
    """A search for one edge, as far as it has come.

    answers : (setting, class) in the order given, both ends of the bracket first.
    vouched : how many of them a good control stands behind.    further : brackets with edges of their own that this
    search came across and left aside.    trouble : why it ended without narrowing down; the interval still holds then.
    """

    answers: tuple[tuple[float, str], ...]
    resolution: float
    scale: Scale = "geometric"
    unit: str = "Ω"
    vouched: int = 2
    tries: int = 0
    further: tuple[EdgeInterval, ...] = ()
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
            raise ValueError(
                f"low_class, high_class: expected two classes that differ, got '{low_class}' and '{high_class}'"
            )
        return cls(((low, low_class), (high, high_class)), resolution, scale, unit)

    @property
    def low_class(self) -> str:
        return self.answers[0][1]

    @property
    def high_class(self) -> str:
        return self.answers[1][1]

    @property
    def interval(self) -> EdgeInterval:
        """What the answers say together: below it only low_class was seen, above it only high_class.

        Where answers contradict each other it spans them all, so that it still holds the edge, sharp or not.
        """
        first_other = min(value for value, seen in self.answers if seen != self.low_class)
        last_other = max(value for value, seen in self.answers if seen != self.high_class)
        low = max(value for value, _ in self.answers if value < first_other or value == self.answers[0][0])
        high = min(value for value, _ in self.answers if value > last_other or value == self.answers[1][0])
        return EdgeInterval(min(low, high), max(low, high), self.low_class, self.high_class)

    @property
    def steps_left(self) -> int:
        """Settings still to be asked for, if every answer is one of the two classes."""
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
        """The search after an answer. Raises ValueError when nothing was asked and no setting is named.

        seen : a class; "undecided" has the same setting asked once more, then ends the search.
        at : the setting that was really made, where it is not the one asked (a resistor has steps), or a setting seen
        besides. A third class splits the bracket: the edge next to the low end is pursued, the other goes to `further`.
        """
        value = self.ask() if at is None else at
        if value is None:
            raise ValueError("at: nothing was asked; name the setting that was seen")
        if seen == UNDECIDED:
            return self._again(f"{quantity(value, self.unit)} gave no clear answer {TRIES} times")
        before = self.interval
        if seen not in (self.low_class, self.high_class):
            return self._split(value, seen)
        after = replace(self, answers=(*self.answers, (value, seen)), tries=0)
        return after._judged(value, seen, before)

    def controlled(self, good: bool) -> Self:
        """The search after a control point: a good one vouches for the answers so far.

        A failed one voids the answers since the last good one, since a latched fault or a contact that no longer closes
        looks like "no charge"; the same setting is then asked once more, and a second failure ends the search.
        """
        if good:
            return replace(self, vouched=len(self.answers))
        kept = replace(self, answers=self.answers[: self.vouched])
        lost = len(self.answers) - self.vouched
        return kept._again(f"the control failed {TRIES} times, {lost} answers before it count for nothing")

    def _again(self, why: str) -> Self:
        tries = self.tries + 1
        return replace(self, tries=tries, trouble=why if tries >= TRIES else self.trouble)

    def _judged(self, value: float, seen: str, before: EdgeInterval) -> Self:
        """Trouble where an answer contradicts earlier ones, or a step of the resistor lets nothing new be set."""
        if (value <= before.low and seen != self.low_class) or (value >= before.high and seen != self.high_class):
            return replace(self, trouble=f"answers contradict each other: {self._contradiction(value, seen)}")
        if value in (before.low, before.high) and self.steps_left:
            shown = quantity(before.width, self.unit)
            return replace(self, trouble=f"no setting lies within the last {shown}; the resistor has no finer step")
        return self

    def _contradiction(self, value: float, seen: str) -> str:
        beyond = self.low_class if seen == self.high_class else self.high_class
        others = [other for other, answer in self.answers if answer == beyond]
        at = max(others) if seen == self.high_class else min(others)
        if at == value:
            return f"{quantity(value, self.unit)} showed {seen} and, another time, {beyond}"
        side = "above" if at > value else "below"
        return f"{seen} at {quantity(value, self.unit)}, {beyond} {side} it at {quantity(at, self.unit)}"

    def _split(self, value: float, seen: str) -> Self:
        found = self.interval
        if not found.low < value < found.high:
            words = f"{seen} at {quantity(value, self.unit)}, outside {found.words(self.unit)}"
            return replace(self, trouble=f"answers contradict each other: {words}")
        aside = EdgeInterval(value, found.high, seen, self.high_class)
        kept = [(setting, answer) for setting, answer in self.answers[2:] if answer == self.low_class]
        answers = (self.answers[0], (value, seen), *kept)
        return replace(
            self, answers=answers, vouched=min(self.vouched, len(answers)), tries=0, further=(*self.further, aside)
        )


def edge_budget(interval: EdgeInterval, contributions: Iterable[Contribution] = (), *, unit: str = "Ω") -> Budget:
    """The edge as one value with its uncertainty: the middle, the bracket as rectangular (width/√12), and the rest.

    contributions : what else makes the settings uncertain, in `unit`: resistor as measured, contact, repeatability.
    """
    return Budget(interval.middle, unit, (_bracket("bracket", interval), *contributions))


def end_budget(interval: EdgeInterval, contributions: Iterable[Contribution], *, unit: str = "Ω") -> Budget:
    """The same without the bracket: the uncertainty of the interval's ends, for a decision on the interval itself."""
    return Budget(interval.middle, unit, tuple(contributions))


def hysteresis(
    one: EdgeInterval, other: EdgeInterval, contributions: Iterable[Contribution] = (), *, unit: str = "Ω"
) -> Budget:
    """`one` minus `other`, such as trip minus release, with both brackets.

    contributions : those that do not cancel between two settings of the same resistor (repeatability, resolution).
    """
    brackets = (_bracket("bracket of the first edge", one), _bracket("bracket of the second edge", other))
    return Budget(one.middle - other.middle, unit, (*brackets, *contributions))


def repeatability(intervals: Sequence[EdgeInterval]) -> Contribution:
    """Scatter of an edge found several times, of the mean of the middles (GUM 4.2.3). Raises ValueError below two."""
    if len(intervals) < 2:
        raise ValueError(f"intervals: a scatter needs 2 searches at least, got {len(intervals)}")
    middles = [interval.middle for interval in intervals]
    mean = math.fsum(middles) / len(middles)
    s = math.sqrt(math.fsum((middle - mean) ** 2 for middle in middles) / (len(middles) - 1))
    return Contribution.from_readings("repeatability", s, len(middles), source=f"{len(middles)} searches")


def _bracket(name: str, interval: EdgeInterval) -> Contribution:
    return Contribution.from_resolution(name, interval.width, source="last setting of one class, first of the other")


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
