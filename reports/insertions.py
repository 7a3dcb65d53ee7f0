"""What sweeps and walks showed, as figures need it: each insertion a mark, each edge a bracket; no drawing."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

Json = Mapping[str, Any]
KINDS = ("charges", "no charge", "pulses", "undecided")


@dataclass(frozen=True)
class Mark:
    """One insertion of a sweep. ohm, celsius : None where it was open or short. current_A : mean, + into the pack.

    style : "charges", "no charge", "pulses", "undecided", or "void" where it counts for nothing.
    """

    role: str
    ohm: float | None
    celsius: float | None
    current_A: float
    style: str


@dataclass(frozen=True)
class Bracket:
    """Where an edge was found to lie, in the limit's unit, and what was demanded of it.

    low, high : of the interval.   limit_low, limit_high : None where there is none.   word : the verdict.
    """

    low: float
    high: float
    limit_low: float | None
    limit_high: float | None
    word: str

    @property
    def failed(self) -> bool:
        return self.word in ("fail", "conditional fail")


def marks(points: Iterable[Json], finding: str) -> tuple[Mark, ...]:
    """Every insertion of a sweep, "id" or "temperature", in the order in which it was made."""
    return tuple(_mark(point) for point in points if point.get("finding") == finding)


def _mark(point: Json) -> Mark:
    kind = point.get("kind") if point.get("kind") in KINDS else "undecided"
    return Mark(
        role=str(point.get("role")),
        ohm=number(point.get("ohm")),
        celsius=number(point.get("celsius")),
        current_A=number(point.get("current_A")) or 0.0,
        style="void" if point.get("void") else str(kind),
    )


def brackets(verdicts: Iterable[Json]) -> dict[str, Bracket]:
    """The bracket of every verdict that has one, by the limit's name."""
    found = {}
    for verdict in verdicts:
        ends = bracket_of(verdict)
        if ends is not None:
            low, high = number(verdict.get("low")), number(verdict.get("high"))
            found[str(verdict["limit"])] = Bracket(*ends, low, high, str(verdict["verdict"]))
    return found


def bracket_of(verdict: Json) -> tuple[float, float] | None:
    """The interval of a verdict; None where it has none, or one of its ends is not known."""
    ends = verdict.get("interval")
    if not isinstance(ends, Sequence) or len(ends) != 2:
        return None
    low, high = (number(end) for end in ends)
    return None if low is None or high is None else (min(low, high), max(low, high))


def number(value: object) -> float | None:
    """A finite number as it is; None for anything else, such as "open" for a resistance."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    return float(value) if math.isfinite(value) else None


_COUNTED = {
    "charges": "with a charge",
    "no charge": "without",
    "pulses": "with pulses",
    "undecided": "undecided",
    "void": "void: the control after it failed twice, and it counts for nothing",
}


def counted(shown: Sequence[Mark]) -> str:
    """How many insertions there were of each kind, in words."""
    styles = [mark.style for mark in shown]
    parts = [f"{styles.count(style)} {words}" for style, words in _COUNTED.items() if style in styles]
    return f"{len(shown)} insertion{'s' * (len(shown) != 1)}: {', '.join(parts)}."


def at_contact(shown: Sequence[Mark], name: str) -> str:
    """What open and short did, in words; empty where neither was shown."""
    told = [f"{role}: {mark.style}" for role in ("open", "short") for mark in shown if mark.role == role]
    return f"{name} {'; '.join(told)}." if told else ""
