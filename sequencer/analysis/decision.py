"""Findings against limits: ILAC-G8:09/2019 zones, JCGM 106 probability of conformity, and what a run comes to.

Sides of the boundaries, the same for both limits (shown for an upper limit TL with guard band w, w = U = k u):
pass y <= TL - w; conditional pass TL - w < y <= TL; conditional fail TL < y <= TL + w; fail TL + w < y
(ILAC-G8:09/2019 4.2.3). With w = 0 (simple acceptance, 4.2.1) only pass y <= TL and fail are left. A value that differs
from a boundary by rounding of the arithmetic alone lies on it, hence on the side of the milder word.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

from sequencer.analysis.wording import quantity, resolution_of

Verdict = Literal["pass", "conditional pass", "conditional fail", "fail", "inconclusive", "not run", "not applicable"]
Rule = Literal["simple", "guarded"]

#: From worst to best; what is not applicable counts as nothing.
WORST_FIRST: tuple[Verdict, ...] = ("fail", "conditional fail", "inconclusive", "not run", "conditional pass", "pass")


@dataclass(frozen=True)
class Decision:
    """A verdict and why. guard_band is in the unit of the limit; None where the kind of limit has none."""

    verdict: Verdict
    guard_band: float | None
    p_conform: float | None
    why: str


@dataclass(frozen=True)
class _Side:
    """One limit seen from the value: distance > 0 inside the limit."""

    name: str
    limit: float
    distance: float
    outward: float


def decide(
    value: float, u: float, k: float, low: float | None, high: float | None, rule: Rule, *, unit: str = ""
) -> Decision:
    """Verdict of a value against one limit or two; each side is judged by itself and the worse one holds.

    value, u, low, high : in `unit`; u standard uncertainty >= 0, k its coverage factor > 0.
    rule : "simple" (w = 0) or "guarded" (w = k u).
    p_conform : for a normal distribution (JCGM 106:2012 7.4).
    Raises ValueError naming the argument.
    """
    _check(value, u, k, low, high, rule)
    guard_band = k * u if rule == "guarded" else 0.0
    sides = _sides(value, low, high)
    verdicts = [_zone(side, guard_band, value) for side in sides]
    worst = min(range(len(sides)), key=lambda i: (WORST_FIRST.index(verdicts[i]), sides[i].distance))
    why = _reason(value, verdicts[worst], sides[worst], guard_band, resolution_of(k * u), unit)
    if low is not None and high is not None and 2.0 * guard_band > high - low:
        why += "; the guard bands of both limits meet, so that no value could pass"
    return Decision(verdicts[worst], guard_band, probability_of_conformity(value, u, low, high), why)


def probability_of_conformity(value: float, u: float, low: float | None, high: float | None) -> float:
    """Φ((high - y)/u) - Φ((low - y)/u), a missing limit being infinite (JCGM 106:2012 7.4); with u = 0 it is 0 or 1."""
    above = -math.inf if high is None else value - high
    below = -math.inf if low is None else low - value
    if u == 0.0:
        return 1.0 if above <= 0.0 and below <= 0.0 else 0.0
    if above > 0.0:  # both tails seen from outside, so that a small difference keeps its digits
        return _tail(above / u) - _tail(-below / u)
    if below > 0.0:
        return _tail(below / u) - _tail(-above / u)
    return 1.0 - _tail(-above / u) - _tail(-below / u)


def decide_state(seen: str | bool | None, expected: str | bool, *, what: str = "") -> Decision:
    """A state seen against the one declared; None (not observed) is inconclusive.

    what : a few words naming the state, opening the sentence, e.g. "charge with a nominal pack".
    """
    opening = f"{what}: " if what else ""
    if seen is None:
        return Decision("inconclusive", None, None, f"{opening}not observed; declared is {_word(expected)}")
    if seen == expected:
        return Decision("pass", None, None, f"{opening}{_word(seen)}, as declared")
    return Decision("fail", None, None, f"{opening}{_word(seen)}; declared is {_word(expected)}")


def decide_class(seen: str, probability: float, expected: str, *, needed: float = 0.9) -> Decision:
    """A class seen with a probability against the one declared; a probability below `needed` is inconclusive.

    The classifier's probability is set by rule and not calibrated, so people read it as "confidence".
    p_conform is the probability that the declared class is the true one: exact for a match, an upper bound else.
    Raises ValueError for a probability outside 0 ... 1.
    """
    for name, number in (("probability", probability), ("needed", needed)):
        if not 0.0 <= number <= 1.0:
            raise ValueError(f"{name}: expected a probability from 0 to 1, got {number!r}")
    if seen == "inconclusive":
        return Decision("inconclusive", None, None, f"the record does not show which class; declared is {expected}")
    p_conform = probability if seen == expected else 1.0 - probability
    if probability < needed:
        why = f"seen as {seen}, with confidence {probability:.2f} where {needed:.2f} is needed; declared is {expected}"
        return Decision("inconclusive", None, p_conform, why)
    if seen == expected:
        return Decision("pass", None, p_conform, f"{seen}, as declared (confidence {probability:.2f})")
    return Decision("fail", None, p_conform, f"{seen} (confidence {probability:.2f}); declared is {expected}")


def decide_screening(
    found: tuple[float, float, float] | None, detectable: float, most: float | None, least: float, rule: Rule, unit: str
) -> Decision:
    """A screening for something that shall not be, or (most None) shall be there.

    found : (value, u, k) of the largest amount, None where nothing was found.    detectable : Currie's detection limit.
    most : the largest amount declared.    least : with `most` None, the smallest that must be found.
    A screening that could not have seen what is declared is inconclusive, whatever it saw not.
    """
    needed = least if most is None else most
    none = f"none found above {quantity(detectable, unit, step=resolution_of(detectable))}"
    if found is None:
        if detectable > needed:
            return Decision("inconclusive", None, None, f"{none}; {quantity(needed, unit)} would not have been seen")
        if most is None:
            return Decision("fail", None, None, f"{none}; declared is that it is there")
        return Decision("pass", None, None, f"{none}; declared is none above {quantity(most, unit)}")
    value, u, k = found
    if most is None:
        return Decision("pass", None, None, "found, as declared")
    return decide(value, u, k, None, most, rule, unit=unit)


def overall(verdicts: Iterable[str]) -> Verdict:
    """The worst of the verdicts; "not run" where nothing was judged. Raises ValueError for an unknown word."""
    return min(_known(verdicts), key=WORST_FIRST.index, default="not run")


def exit_status(verdicts: Iterable[str], *, left_out: int = 0) -> int:
    """The verdicts' part of the exit status: 1, 4, 5 or 0, the first that applies.

    left_out : how many of the "not run" were left out on purpose; these alone do not make a 4, but a run in which
    nothing else was judged had nothing to judge.
    Raises ValueError for an unknown word or more left out than not run.
    """
    words = _known(verdicts)
    if not 0 <= left_out <= words.count("not run"):
        raise ValueError(f"left_out: expected 0 to {words.count('not run')} (verdicts not run), got {left_out}")
    if "fail" in words or "conditional fail" in words:
        return 1
    judged = [word for word in words if word != "not run"]
    if "inconclusive" in words or words.count("not run") > left_out or not judged:
        return 4
    return 5 if "conditional pass" in words else 0


def _known(verdicts: Iterable[str]) -> list[Verdict]:
    words: list[Verdict] = []
    for word in verdicts:
        if word != "not applicable":
            if word not in WORST_FIRST:
                raise ValueError(f"verdicts: {word!r} is no verdict, expected one of {', '.join(WORST_FIRST)}")
            words.append(WORST_FIRST[WORST_FIRST.index(word)])
    return words


def _check(value: float, u: float, k: float, low: float | None, high: float | None, rule: str) -> None:
    for name, number in (("value", value), ("u", u), ("k", k), ("low", low), ("high", high)):
        if number is not None and not math.isfinite(number):
            raise ValueError(f"{name}: expected a finite number, got {number!r}")
    if u < 0.0:
        raise ValueError(f"u: expected a standard uncertainty of zero or above, got {u!r}")
    if k <= 0.0:
        raise ValueError(f"k: expected a coverage factor above zero, got {k!r}")
    if low is None and high is None:
        raise ValueError("low, high: expected at least one limit, got none")
    if low is not None and high is not None and low > high:
        raise ValueError(f"low: expected a limit not above high ({high!r}), got {low!r}")
    if rule not in ("simple", "guarded"):
        raise ValueError(f"rule: expected 'simple' or 'guarded', got {rule!r}")


def _sides(value: float, low: float | None, high: float | None) -> list[_Side]:
    sides = []
    if high is not None:
        sides.append(_Side("upper", high, high - value, 1.0))
    if low is not None:
        sides.append(_Side("lower", low, value - low, -1.0))
    return sides


def _zone(side: _Side, guard_band: float, value: float) -> Verdict:
    at_limit = 4.0 * sys.float_info.epsilon * max(abs(value), abs(side.limit))
    at_guard = at_limit + 4.0 * sys.float_info.epsilon * guard_band
    if side.distance >= guard_band - at_guard:
        return "pass"
    if side.distance >= -at_limit:
        return "conditional pass"
    return "conditional fail" if side.distance >= -guard_band - at_guard and guard_band > 0.0 else "fail"


def _reason(value: float, verdict: Verdict, side: _Side, guard_band: float, step: float, unit: str) -> str:
    shift = {"fail": -guard_band, "conditional fail": 0.0}.get(verdict, guard_band)
    boundary = side.limit - side.outward * shift
    distance = abs(value - boundary)
    direction = "above" if value > boundary else "below"
    place = _place(verdict, side, boundary, guard_band, step, unit)
    if distance == 0.0:
        return f"{quantity(value, unit, step=step)} is on the {place}"
    return f"{quantity(value, unit, step=step)} is {quantity(distance, unit, step=step)} {direction} the {place}"


def _place(verdict: Verdict, side: _Side, boundary: float, guard_band: float, step: float, unit: str) -> str:
    limit = quantity(side.limit, unit, step=step)
    if guard_band == 0.0 or verdict == "conditional fail":
        return f"{side.name} limit {limit}"
    name = "rejection" if verdict == "fail" else "acceptance"
    less = (verdict != "fail") == (side.outward > 0.0)
    sign = "less" if less else "plus"
    shown = quantity(boundary, unit, step=step)
    return f"{name} limit {shown} ({side.name} limit {limit} {sign} guard band {quantity(guard_band, unit, step=step)})"


def _tail(z: float) -> float:
    """1 - Φ(z), with all its digits far out."""
    return 0.5 * math.erfc(z / math.sqrt(2.0))


def _word(state: str | bool) -> str:
    if isinstance(state, bool):
        return "yes" if state else "no"
    return state
