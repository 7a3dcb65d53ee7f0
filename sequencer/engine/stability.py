"""How fast the stand-in may follow the current without swinging.

The host plays a resistance Rv by moving the node, v <- v + a (E + I Rv - v), while a real resistance Rp lies
between node and charger. A charger that holds its voltage answers every move of the node with the opposite
move of the current, so the update is a sampled loop. With d scan periods between a reading and the node that
has settled on it, its characteristic polynomial is z^(d+1) - (1-a) z^d + a Rv/Rp, and all roots must lie
inside the unit circle (Jury / Schur-Cohn; the marginal case below by substituting z = e^(jw)).
"""

from __future__ import annotations

import math
from collections.abc import Iterable

SAFETY = 0.5  # of the largest stable gain


def largest_gain(ratio: float, delay_scans: int) -> float:
    """Largest stable gain a (exclusive) for ratio = Rv/Rp >= 0 and a whole number of scans of delay.

    d = 0: a < 2/(1 + ratio), exactly. d >= 1: the largest a before a root reaches the unit circle, found by
    bisection; (2/ratio) sin(pi/(2(2d+1))) is a bound on the safe side of it for ratio >= 1, and its limit for
    large ratios. For ratio < 1 no gain up to 1 is unstable whatever the delay, by the triangle inequality.
    """
    if ratio < 0 or delay_scans < 0:
        raise ValueError(f"ratio {ratio} and delay {delay_scans} must not be negative")
    if delay_scans == 0:
        return 2.0 / (1.0 + ratio)
    low, high = 0.0, 2.0
    if _stable(high * (1 - 1e-9), ratio, delay_scans):
        return high
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if _stable(middle, ratio, delay_scans) else (low, middle)
    return low


def _stable(gain: float, ratio: float, delay_scans: int) -> bool:
    """Whether all roots of z^(d+1) - (1-a) z^d + a ratio lie inside the unit circle (Schur-Cohn recursion)."""
    row = [1.0, -(1.0 - gain)] + [0.0] * (delay_scans - 1) + [gain * ratio]
    while len(row) > 1:
        if abs(row[-1]) >= abs(row[0]):
            return False
        factor = row[-1] / row[0]
        row = [a - factor * b for a, b in zip(row[:-1], row[:0:-1], strict=True)]
    return True


def gain(ratio: float, delay_scans: int) -> float:
    """The gain to use: half of the largest stable one, and never above 1."""
    return min(1.0, SAFETY * largest_gain(max(ratio, 0.0), delay_scans))


def delay_scans(settling_s: float, period_s: float) -> int:
    """Whole scans between a reading and the node settled on it: 0 if it has settled by the next scan."""
    return max(0, math.ceil(settling_s / period_s - 1e-9) - 1)


def turning_points(times_s: Iterable[float], levels: Iterable[float], least: float) -> list[float]:
    """When a series turned round, s: the extremes between swings of more than `least`; the first swing has none.

    times_s, levels : (n,), in time order. A loop that has lost its stability turns again and again.
    """
    found: list[float] = []
    low = high = math.nan
    low_s = high_s = 0.0
    rising: bool | None = None
    for time_s, level in zip(times_s, levels, strict=True):
        if not level <= high:  # also the very first, as high is not a number yet
            high, high_s = level, time_s
        if not level >= low:
            low, low_s = level, time_s
        if rising is not False and high - level > least:  # has come down far enough from its highest
            found += [high_s] if rising else []
            rising, low, low_s, high, high_s = False, level, time_s, level, time_s
        elif rising is not True and level - low > least:
            found += [low_s] if rising is False else []
            rising, low, low_s, high, high_s = True, level, time_s, level, time_s
    return found
