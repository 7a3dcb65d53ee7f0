"""How a charge ended: the moment, and the trend of the current just before it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from sequencer.analysis.estimates import Estimate, effective_number
from sequencer.analysis.segments import ranges
from sequencer.analysis.smoothing import despiked, noise_of

Array = npt.NDArray[np.float64]

ENDED_SHARE = 0.05  # of the first plateau: below, and for good, the charge has ended
AT_ONCE = 0.5  # of the current before: a fall by more within two samples is an end, not a taper
LEAST_SHARE = 0.005  # of the first plateau: below, a current is not told from none
TREND_SAMPLES = 10
STAIR_RATIO = 1.3  # of the largest step in the taper: a drop that is no larger may be one of them
STAIR_S = 1.0  # in which the stand-in has made its step
NEAR_END = 6.0  # times the last current: steps of a taper are looked for below
FIT_SPAN = 1.35  # the trend is read from samples up to this many times the last current
FIT_LEAST, FIT_MOST = 8, 400
FIT_NO_CURRENT = 50  # samples where the current is lost in noise


@dataclass(frozen=True)
class Trend:
    """Current at one moment by the trend of the samples up to it.

    current_A : Estimate whose u is that of the fit at that moment (n_eff is s²/u²); window as fitted.
    fall_per_s : A/s, how fast the trend falls there, negative for a rise.
    unrest_A : peak to peak of what is left beside trend and noise (steps of a stand-in), 0 where nothing is.
    """

    current_A: Estimate
    fall_per_s: float
    unrest_A: float


def end_of_charge(time_s: Array, current_A: Array, plateau_A: float) -> int | None:
    """Index of the last sample before the charge ended by itself; None where it did not.

    The current falls to less than half of itself within two samples, by three times more than its trend and clearly
    more than any step before would have it, is then below 5 % of the first plateau and stays there up to the last
    sample given (single glitches aside).
    time_s, current_A : (n,).    plateau_A : > 0, first plateau.
    """
    if current_A.size < 4:
        return None
    smooth = despiked(current_A)
    highest_later = np.maximum.accumulate(smooth[::-1])[::-1]
    low = (highest_later[2:] < ENDED_SHARE * plateau_A) & (current_A[2:] < AT_ONCE * current_A[:-2])
    low &= current_A[:-2] > max(LEAST_SHARE * plateau_A, 6.0 * _background(current_A))
    drop = current_A[:-2] - current_A[2:]
    for first in np.flatnonzero(low & (drop > 3.0 * _usual_fall(smooth)[:-2])):
        if float(drop[first]) > STAIR_RATIO * _stair(time_s, smooth, int(first)):
            return _last_full(current_A, int(first), plateau_A)
    return None


def _stair(time_s: Array, smooth_A: Array, first: int) -> float:
    """Largest step of a taper that falls in steps: three or more of them among the last 400 samples, else 0.

    A stand-in that moves in steps makes a taper do so; the last one, to no current at all, is no end of the charger.
    """
    before, times = smooth_A[max(0, first - 400) : first + 1], time_s[max(0, first - 400) : first + 1]
    if before.size < 10:
        return 0.0
    index = np.arange(before.size)
    ahead = np.minimum(np.maximum(np.searchsorted(times, times + STAIR_S), index + 2), before.size - 1)
    falls = np.where(before > NEAR_END * before[-1], 0.0, before - before[ahead])
    steps = ranges(falls > max(0.25 * float(before[-1]), 6.0 * noise_of(before)))
    return max(float(np.max(falls[a:b])) for a, b in steps) if len(steps) >= 3 else 0.0


def _usual_fall(smooth_A: Array) -> Array:
    """Fall over two samples by the trend of the ten samples before each one, (n,); fewer at the start."""
    index = np.arange(smooth_A.size)
    back = np.maximum(0, index - TREND_SAMPLES)
    return 2.0 * np.maximum(0.0, smooth_A[back] - smooth_A) / np.maximum(1, index - back)


def _background(current_A: Array) -> float:
    """Noise of the last samples, where the charge would be over."""
    return noise_of(current_A[-50:])


def _last_full(current_A: Array, first: int, plateau_A: float) -> int:
    """The drop begins after sample first or first + 1; a sample that spans the drop is not counted."""
    before = float(current_A[first])
    usual = max(0.1 * before, 0.002 * plateau_A)
    return first + 1 if float(current_A[first + 1]) > before - usual else first


def trend_at(time_s: Array, current_A: Array, last: int, *, earliest: int = 0) -> Trend:
    """Trend of the current at sample `last`, from the samples before it.

    time_s, current_A : (n,).    earliest : first sample that may be used.
    A falling current is fitted as an exponential (a straight line through its logarithm: exact for a constant voltage
    behind a resistance and a capacity, over the 30 % that are used close to it for others), one that may be
    zero as a straight line. Raises ValueError for fewer than 3 samples.
    """
    first = _fit_start(current_A, last, earliest)
    times, currents = time_s[first : last + 1] - time_s[last], current_A[first : last + 1]
    if times.size < 3 or float(times[0]) == float(times[-1]):
        raise ValueError(f"last, earliest: {times.size} samples up to sample {last} show no trend, 3 are needed")
    window = (float(time_s[first]), float(time_s[last]))
    if float(np.min(currents)) > 0.1 * float(np.max(currents)):
        value, slope, s, u = _line(times, np.log(currents))
        level = math.exp(value)
        trend = level * np.exp(slope * times)
        estimate = _estimate(level, level * s, level * u, times.size, window)
        return Trend(estimate, -level * slope, _unrest(currents - trend))
    value, slope, s, u = _line(times, currents)
    return Trend(_estimate(value, s, u, times.size, window), -slope, _unrest(currents - value - slope * times))


def _unrest(residuals: Array) -> float:
    return max(0.0, float(np.ptp(residuals)) - 7.0 * noise_of(residuals))


def _fit_start(current_A: Array, last: int, earliest: int) -> int:
    """Where the current was within a factor of 1.35 of what it is in the end, but 8 to 400 samples back."""
    smooth = despiked(current_A[earliest : last + 1])
    end = float(np.median(smooth[-3:]))
    if end <= 4.0 * noise_of(smooth[-FIT_LEAST:]):
        return max(earliest, last + 1 - FIT_NO_CURRENT)
    outside = np.flatnonzero((smooth > FIT_SPAN * end) | (smooth < end / FIT_SPAN))
    start = earliest + (int(outside[-1]) + 1 if outside.size else 0)
    start = max(start, last + 1 - FIT_MOST)
    return max(earliest, min(start, last + 1 - FIT_LEAST))


def _line(x: Array, y: Array) -> tuple[float, float, float, float]:
    """Least squares: value at x = 0, slope, scatter s, u of the value; correlated residuals count for fewer."""
    centre = float(np.mean(x))
    offset = x - centre
    spread = float(offset @ offset)
    slope = float(offset @ y) / spread
    residuals = y - float(np.mean(y)) - slope * offset
    s = math.sqrt(float(residuals @ residuals) / (x.size - 2))
    worth = effective_number(residuals) / x.size
    u = s * math.sqrt((1.0 / x.size + centre * centre / spread) / worth)
    return float(np.mean(y)) - slope * centre, slope, s, u


def _estimate(value: float, s: float, u: float, n: int, window: tuple[float, float]) -> Estimate:
    # an end point of a line is worth a quarter of its samples (closed form); also when there is no scatter at all
    n_eff = (s / u) ** 2 if u > 0.0 else n / 4.0
    return Estimate(value, s, n, max(2.0, n_eff), *window)
