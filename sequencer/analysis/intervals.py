"""Findings that are intervals against limits: edges, windows, trips.

The true value lies anywhere in [low, high], and both ends are uncertain by U = k u. With the middle m, the half width h
and the guard band w (U, or 0 for simple acceptance) the zones of ILAC-G8:09/2019 4.2.3 read, for an upper limit TL:
pass m <= TL - (w + h), that is high <= TL - w; conditional pass m <= TL; conditional fail m <= TL + (w + h), that is
low <= TL + w; fail beyond. So the whole interval passes, or the whole of it fails, or the word is conditional, on the
side of its middle. For h = 0 this is `decision.decide`. Simple acceptance has no conditional words for a value; for
an interval across a limit they stay, because neither of the two other words would be true.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from sequencer.analysis.decision import Decision, Rule, Verdict, decide, probability_of_conformity
from sequencer.analysis.wording import quantity, resolution_of

NARROW = 1e-4  # of u: below, the interval is a point as far as probability goes


@dataclass(frozen=True)
class Sizes:
    """How far beyond a limit a true edge must lie for what is found to tell it.

    passes_up_to : up to this distance it may still be found to pass; fails_from : from this distance on it always
    fails; both at the coverage probability of U. Between them the word may be conditional.
    """

    passes_up_to: float
    fails_from: float

    def words(self, unit: str) -> str:
        certain = quantity(self.fails_from, unit, step=_step_of(self.fails_from))
        if self.passes_up_to == 0.0:
            return f"an edge beyond its limit never passes; it fails for certain from {certain} beyond it"
        hidden = quantity(self.passes_up_to, unit, step=_step_of(self.passes_up_to))
        return f"an edge up to {hidden} beyond its limit may pass; it fails for certain from {certain} beyond it"


@dataclass(frozen=True)
class Trip:
    """A limit that a charger acts on: the last setting at which it still charged, the first at which it did not."""

    last_charging: float
    first_stopped: float
    unit: str

    @property
    def low(self) -> float:
        return min(self.last_charging, self.first_stopped)

    @property
    def high(self) -> float:
        return max(self.last_charging, self.first_stopped)

    def decide(self, u: float, k: float, limit_low: float | None, limit_high: float | None, rule: Rule) -> Decision:
        """As decide_interval, u being that of the settings, without the step between them."""
        return decide_interval(self.low, self.high, u, k, limit_low, limit_high, rule, self.unit)

    def sizes(self, u: float, k: float, rule: Rule) -> Sizes:
        """Which sizes of a shift this trip could tell."""
        return telling_sizes(self.high - self.low, u, k, rule)

    @property
    def words(self) -> str:
        step = _step_of(self.high - self.low)
        last, first = (quantity(value, self.unit, step=step) for value in (self.last_charging, self.first_stopped))
        return f"still charging at {last}, stopped at {first}"


def decide_interval(
    low: float, high: float, u: float, k: float, limit_low: float | None, limit_high: float | None, rule: Rule,
    unit: str = "",
) -> Decision:  # fmt: skip
    """Verdict of an interval against one limit or two; each limit is judged by itself and the worse word holds.

    low, high : ends of the interval, low <= high, in `unit`.    u, k : standard uncertainty of the ends (without the
    bracket) and its coverage factor.    rule : "guarded" (w = k u) or "simple" (w = 0).
    The decision's guard_band is w; p_conform takes the true value as evenly spread over the interval and the ends'
    error as normal. Raises ValueError naming the argument.
    """
    _check(low, high, limit_low, limit_high)
    middle, half = low + 0.5 * (high - low), 0.5 * (high - low)
    point = decide(middle, u, k, limit_low, limit_high, rule, unit=unit)  # also checks u, k, rule
    p_conform = probability_over(low, high, u, limit_low, limit_high)
    if half == 0.0:
        return Decision(point.verdict, point.guard_band, p_conform, point.why)
    guard_band = k * u if rule == "guarded" else 0.0
    verdict = decide(middle, guard_band + half, 1.0, limit_low, limit_high, "guarded").verdict
    why = _reason(low, high, guard_band, limit_low, limit_high, verdict, unit)
    return Decision(verdict, guard_band, p_conform, why)


def probability_over(low: float, high: float, u: float, limit_low: float | None, limit_high: float | None) -> float:
    """Probability that a value evenly spread over [low, high], with a normal error u, lies within the limits.

    The mean of JCGM 106:2012 7.4 over the interval, in closed form: the integral of Φ is z Φ(z) + φ(z).
    """
    if high - low <= NARROW * u or high == low:
        return probability_of_conformity(low + 0.5 * (high - low), u, limit_low, limit_high)
    above = 0.0 if limit_high is None else _mean_beyond(low - limit_high, high - limit_high, u)
    below = 0.0 if limit_low is None else _mean_beyond(limit_low - high, limit_low - low, u)
    return min(1.0, max(0.0, 1.0 - above - below))


def telling_sizes(width: float, u: float, k: float, rule: Rule) -> Sizes:
    """What an interval of this width, with ends uncertain by k u, can tell about an edge beyond its limit.

    An edge d beyond an upper limit lies in its interval, whose ends are found up to U wrong: high >= TL + d - U passes
    for high <= TL - w, hence only where d <= U - w; low >= TL + d - width - U fails for certain once above TL + w.
    """
    for name, number in (("width", width), ("u", u), ("k", k)):
        if not (math.isfinite(number) and number >= 0.0):
            raise ValueError(f"{name}: expected a finite number, zero or above, got {number!r}")
    guard_band = k * u if rule == "guarded" else 0.0
    return Sizes(k * u - guard_band, width + k * u + guard_band)


def _check(low: float, high: float, limit_low: float | None, limit_high: float | None) -> None:
    for name, number in (("low", low), ("high", high), ("limit_low", limit_low), ("limit_high", limit_high)):
        if number is not None and not math.isfinite(number):
            raise ValueError(f"{name}: expected a finite number, got {number!r}")
    if low > high:
        raise ValueError(f"low: expected an end not above high ({high!r}), got {low!r}")
    if limit_low is None and limit_high is None:
        raise ValueError("limit_low, limit_high: expected at least one limit, got none")
    if limit_low is not None and limit_high is not None and limit_low > limit_high:
        raise ValueError(f"limit_low: expected a limit not above limit_high ({limit_high!r}), got {limit_low!r}")


def _mean_beyond(near: float, far: float, u: float) -> float:
    """Mean of Φ(x/u) for x from near to far: the share that lies beyond a limit at zero."""
    if u == 0.0:
        return (max(far, 0.0) - max(near, 0.0)) / (far - near)
    return u * (_integral(far / u) - _integral(near / u)) / (far - near)


def _integral(z: float) -> float:
    """z Φ(z) + φ(z)."""
    return z * 0.5 * math.erfc(-z / math.sqrt(2.0)) + math.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi)


def _reason(
    low: float, high: float, guard_band: float, limit_low: float | None, limit_high: float | None, verdict: Verdict,
    unit: str,
) -> str:  # fmt: skip
    step = _step_of(guard_band or high - low)
    shown = f"{quantity(low, unit, step=step)} to {quantity(high, unit, step=step)}"
    inside, outside = _places(limit_low, limit_high, unit, step)
    margin = f" by the guard band of {quantity(guard_band, unit, step=step)} and more" if guard_band else ""
    match verdict:
        case "pass":
            return f"the whole interval {shown} lies {inside}{margin}"
        case "fail":
            return f"the whole interval {shown} lies {outside}{margin.replace('and more', 'or more')}"
    place = inside if verdict == "conditional pass" else outside
    across = " or within a guard band of it" if guard_band else ""
    return f"the interval {shown} lies across a limit{across}; its middle lies {place}"


def _places(limit_low: float | None, limit_high: float | None, unit: str, step: float) -> tuple[str, str]:
    """Where a value lies that keeps the limits, and one that does not."""
    if limit_low is None:
        limit = f"the upper limit {quantity(limit_high or 0.0, unit, step=step)}"
        return f"below {limit}", f"above {limit}"
    if limit_high is None:
        limit = f"the lower limit {quantity(limit_low, unit, step=step)}"
        return f"above {limit}", f"below {limit}"
    limits = f"the limits {quantity(limit_low, unit, step=step)} to {quantity(limit_high, unit, step=step)}"
    return f"inside {limits}", f"outside {limits}"


def _step_of(width: float) -> float:
    """Step that shows two digits of a width which may have lost a hair in a subtraction: 4.24 - 4.23 is 0.01."""
    return resolution_of(width * (1.0 + 1e-9))
