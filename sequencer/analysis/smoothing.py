"""Noise of a trace from the trace itself, and traces with less of it."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

_MAD_TO_SIGMA = 1.4826  # of a normal distribution
_SECOND_DIFFERENCE_GAIN = math.sqrt(6.0)  # 1, -2, 1


def noise_of(level: Array) -> float:
    """Standard deviation of the noise from second differences: slopes and single steps do not count, in any unit.

    level : (n,). A trace of whole display steps that mostly stands still has at least the noise of its step, step/√12.
    """
    if level.size < 3:
        return 0.0
    second = np.abs(level[2:] - 2.0 * level[1:-1] + level[:-2])
    sigma = _MAD_TO_SIGMA * float(np.median(second)) / _SECOND_DIFFERENCE_GAIN
    return max(sigma, display_step(level) / math.sqrt(12.0))


def display_step(level: Array, *, least_moves: float = 0.05) -> float:
    """Smallest step between unequal neighbours when at least a third of the neighbours are equal, else 0.

    least_moves : share of neighbours that differ; fewer moves of a current are steps of the charger, not of a display.
    """
    steps = np.abs(np.diff(level))
    floor = 1e-9 * float(np.max(np.abs(level)))
    moved = steps[steps > floor]
    if moved.size == 0 or not least_moves * steps.size <= moved.size <= 2 * (steps.size - moved.size):
        return 0.0
    # a low quantile, since a rare tiny difference may be rounding in a converted file
    return float(np.quantile(moved, 0.05))


def despiked(level: Array) -> Array:
    """Median of each value and its neighbours, (n,): single glitches vanish, steps stay where they are."""
    if level.size < 3:
        return level.copy()
    padded = np.concatenate((level[:1], level, level[-1:]))
    low = np.minimum(padded[:-2], padded[2:])
    high = np.maximum(padded[:-2], padded[2:])
    return np.maximum(low, np.minimum(high, padded[1:-1]))


def moving_mean(level: Array, width: int) -> Array:
    """Centred mean over `width` values, (n,), fewer at both ends."""
    half = width // 2
    if half < 1:
        return level
    sums = np.concatenate(([0.0], np.cumsum(level - level[0])))
    index = np.arange(level.size)
    reach = np.minimum(half, np.minimum(index, level.size - 1 - index))
    start, stop = index - reach, index + reach + 1
    return np.asarray(level[0] + (sums[stop] - sums[start]) / (stop - start), dtype=np.float64)


def width_for(noise: float, wanted: float, longest: int) -> int:
    """How many readings to average so that the noise comes down to `wanted`; 1 ... longest."""
    if noise <= wanted or wanted <= 0.0:
        return 1
    return max(1, min(longest, math.ceil((noise / wanted) ** 2)))
