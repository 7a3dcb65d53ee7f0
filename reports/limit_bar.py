"""Draws one finding against its limits as a small bar: limits, guard bands, value or bracket, its uncertainty."""

from __future__ import annotations

import math
from dataclasses import dataclass

WIDTH = 200.0
_HEIGHT = 30
_FURTHEST = 1.6  # spans of the limits by which the view is widened to reach a value; further out stands an arrow

_SMALLEST = 1e-12  # of any unit here: far below what is measured


@dataclass(frozen=True)
class Bar:
    """Geometry of one bar in a box of 200 x 30, left to right; None where there is no such thing.

    inside : from low to high limit (a side without a limit ends at the edge of the box).
    guards : strips of the guard bands inside the limits, outside : their mirror outside.
    value : the value, or the middle of a bracket.   left, right : value (or the bracket's ends) -/+ U.
    bracket : both ends of an interval, None for a value.   beyond : -1, 0 or 1, the side on which the value leaves.
    """

    inside: tuple[float, float]
    guards: tuple[tuple[float, float], ...]
    outside: tuple[tuple[float, float], ...]
    edges: tuple[float, ...]
    value: float
    left: float
    right: float
    beyond: int
    bracket: tuple[float, float] | None = None


def limit_bar(
    value: float | tuple[float, float], U: float, low: float | None, high: float | None, guard: float
) -> Bar | None:
    """The bar of a value, or of an interval (low end, high end) in which it lies; all in one unit.

    None where there is no limit, no finite value, or no room between them that arithmetic could show.
    """
    first, last = value if isinstance(value, tuple) else (value, value)
    middle = first + (last - first) / 2
    if (low is None and high is None) or not math.isfinite(middle):
        return None
    start, stop = _window(middle, U + (last - first) / 2, low, high, guard)
    if not stop - start > max(_SMALLEST, 1e-9 * max(abs(start), abs(stop))):
        return None
    scale = WIDTH / (stop - start)

    def place(level: float) -> float:
        return round(min(max((level - start) * scale, 0.0), WIDTH), 2)

    def strip(one: float, other: float) -> tuple[float, float]:
        return place(min(one, other)), place(max(one, other))

    # Where the guard bands of both limits overlap, the inside has no room for a pass: they end at the middle.
    room = guard if low is None or high is None else min(guard, (high - low) / 2)
    sides = [(low, 1)] * (low is not None) + [(high, -1)] * (high is not None)
    return Bar(
        inside=strip(start if low is None else low, stop if high is None else high),
        guards=tuple(strip(edge, edge + sign * room) for edge, sign in sides if edge is not None and guard > 0),
        outside=tuple(strip(edge, edge - sign * guard) for edge, sign in sides if edge is not None and guard > 0),
        edges=tuple(place(edge) for edge in (low, high) if edge is not None),
        value=place(middle),
        left=place(first - U),
        right=place(last + U),
        beyond=(middle > stop) - (middle < start),
        bracket=strip(first, last) if isinstance(value, tuple) else None,
    )


def _window(value: float, U: float, low: float | None, high: float | None, guard: float) -> tuple[float, float]:
    """The range of values that the box shows: the limits with margins, widened to reach a value not too far out."""
    if low is not None and high is not None:
        span = (high - low) or abs(high) or 1.0
        start, stop = low - 0.45 * span, high + 0.45 * span
    else:
        edge = low if low is not None else high
        assert edge is not None
        # Wide enough to see the guard band and where the value stands, but not beyond zero for the sake of a far value.
        away = abs(value - edge)
        span = min(max(3 * away, 5 * max(U, guard)), max(abs(edge), 1.5 * away)) or 1.0
        start, stop = (edge - span, edge + 0.6 * span) if low is None else (edge - 0.6 * span, edge + span)
    margin = 0.12 * span
    start = max(min(start, value - U - margin), start - _FURTHEST * span)
    stop = min(max(stop, value + U + margin), stop + _FURTHEST * span)
    return start, stop
