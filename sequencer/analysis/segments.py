"""A current trace cut into runs, steps, plateaus and slopes. Index ranges in, index ranges out.

Thresholds are shares of the largest current of the log, with the noise of the trace beside them. Where they
come from: field practice for charge profiles (step 1.5 % of the largest current or 5 σ within two samples).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from sequencer.analysis.smoothing import despiked, moving_mean, width_for

Array = npt.NDArray[np.float64]
Kind = Literal["flat", "slope", "short"]

STEP_SHARE = 0.015  # of the largest current: what counts as a step
STEP_SIGMAS = 6.0
FLAT_SHARE = 0.01  # of the plateau: how far its current may sag before it has left the plateau
KNEE_RATIO = 3.0  # a plateau lasts this many times longer than the slope after it takes for the next two sags
SHORTEST = 3  # samples of a segment


@dataclass(frozen=True)
class Segment:
    """Samples start ... stop-1 of one kind; level_A is the plateau of a flat one, the first current of a slope."""

    kind: Kind
    start: int
    stop: int
    level_A: float

    @property
    def size(self) -> int:
        """Number of samples."""
        return self.stop - self.start


def active_runs(current_A: Array, threshold_A: float, *, noise_A: float) -> list[tuple[int, int]]:
    """Ranges in which current flows: above the threshold at least once, ending below half of it (or 4.5 σ of noise)."""
    smooth = despiked(current_A)
    runs = ranges(smooth > max(0.5 * threshold_A, 4.5 * noise_A))
    return [(a, b) for a, b in runs if b - a >= 2 and bool(np.any(smooth[a:b] > threshold_A))]


def ranges(mask: npt.NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Start and stop of each unbroken row of True."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], mask, [False])).astype(np.int8)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]


def cut(time_s: Array, current_A: Array, start: int, stop: int, *, scale_A: float, noise_A: float) -> list[Segment]:
    """Segments of one run, in order, without gaps of more than transitions (steps and soft starts leave samples out).

    scale_A : largest current of the log.    noise_A : standard deviation of its noise.
    """
    needed = min(50, math.ceil(2.0 * (STEP_SIGMAS * noise_A / (STEP_SHARE * scale_A)) ** 2))
    found: list[Segment] = []
    for rough in _between_steps(current_A, start, stop, scale_A, noise_A, 1):
        width = max(1, min(needed, rough.size // 20))
        if rough.kind == "slope":
            found.append(rough)
        elif width == 1:
            found += _pieces(time_s, current_A, rough.start, rough.stop, noise_A)
        else:  # steps that the noise hides from single samples
            for fine in _between_steps(current_A, rough.start, rough.stop, scale_A, noise_A, width):
                is_slope = fine.kind == "slope"
                found += [fine] if is_slope else _pieces(time_s, current_A, fine.start, fine.stop, noise_A)
    return found


def _between_steps(
    current_A: Array, start: int, stop: int, scale_A: float, noise_A: float, width: int
) -> list[Segment]:
    """The range cut at its steps: stretches without one ("flat", for now), and stretches that are nothing but steps."""
    found: list[Segment] = []
    position = start
    limit = max(STEP_SHARE * scale_A, STEP_SIGMAS * noise_A * math.sqrt(2.0 / width))
    for a, b, is_slope in _transitions(despiked(current_A[start:stop]), limit, width):
        if start + a > position:
            found.append(Segment("flat", position, start + a, float(current_A[position])))
        if is_slope:
            found.append(Segment("slope", start + a, start + b, float(current_A[start + a])))
        position = start + b
    if stop > position:
        found.append(Segment("flat", position, stop, float(current_A[position])))
    return found


def _transitions(current_A: Array, limit_A: float, width: int) -> list[tuple[int, int, bool]]:
    """(first, stop, is_slope) of every stretch of steps in one direction; a step has no sample or few between."""
    change = _change(current_A, width)
    found = []
    for sign in (-1.0, 1.0):
        for a, b in ranges(sign * change > limit_A):
            if b - a <= 2 * width and width > 1:
                peak = a + int(np.argmax(sign * change[a:b]))
                found.append((peak, peak, False))
            else:  # change[k] lies between sample k-1 and k
                found.append((a, b - 1, sign < 0.0 and b - 1 - a >= 2))
    return sorted(found)


def _change(current_A: Array, width: int) -> Array:
    """Mean of the next `width` samples less that of the `width` before, at each sample, (n,); 0 at the ends."""
    change = np.zeros(current_A.size)
    if current_A.size < 2 * width:
        return change
    sums = np.concatenate(([0.0], np.cumsum(current_A)))
    means = (sums[width:] - sums[:-width]) / width
    change[width : current_A.size - width + 1] = means[width:] - means[:-width]
    return change


def _pieces(time_s: Array, current_A: Array, start: int, stop: int, noise_A: float) -> list[Segment]:
    """A stretch without steps: a plateau, a plateau and the slope after it, or a slope."""
    if stop - start < SHORTEST:
        return [Segment("short", start, stop, float(current_A[start]))] if stop > start else []
    time, current = time_s[start:stop], current_A[start:stop]
    top = float(np.max(despiked(current)))
    smooth = moving_mean(despiked(current), width_for(noise_A, 0.002 * top, (stop - start) // 10))
    level = plateau_level(time, smooth)
    first, knee = _plateau_bounds(time, smooth, level, noise_A)
    if first is None:
        return [Segment("slope", start, stop, float(smooth[0]))]
    above = _above_plateau(smooth[first:knee], level)
    if above >= max(SHORTEST, knee // 50):  # a slope down to the plateau, or a higher one that was held for less long
        leading = _pieces(time_s, current_A, start, start + first + above, noise_A)
        return leading + _pieces(time_s, current_A, start + first + above, stop, noise_A)
    flat = Segment("flat", start + first, start + knee, float(np.median(current[first:knee])))
    if stop - start - knee < SHORTEST:
        return [flat]
    return [flat, Segment("slope", start + knee, stop, float(smooth[knee]))]


def _above_plateau(smooth_A: Array, level_A: float) -> int:
    """Number of samples before the current first comes within 2 % of the plateau from above."""
    return int(np.argmax(smooth_A <= level_A * (1.0 + 2.0 * FLAT_SHARE)))


def plateau_level(time_s: Array, current_A: Array) -> float:
    """Highest current that is held: the highest bin of 1 % that holds 0.3 times the time of the fullest one above half.

    time_s, current_A : (n,), n >= 3, smooth.
    """
    top = float(np.max(current_A))
    dwell = np.append(np.diff(time_s), 0.0)
    if not np.any(dwell > 0.0):
        dwell = np.ones_like(dwell)
    bins = 100
    index = np.clip((current_A / top - 0.5) * 2.0 * bins, -1, bins - 1).astype(np.int64)
    upper = index >= 0
    time_in = np.bincount(index[upper], weights=dwell[upper], minlength=bins)
    pair = time_in[:-1] + time_in[1:]
    held = np.flatnonzero(pair >= 0.3 * np.max(pair))
    low = top * (0.5 + float(held[-1]) / (2.0 * bins))
    inside = (current_A >= low) & (current_A <= low + top / bins)
    return float(np.median(current_A[inside])) if np.any(inside) else top


def _plateau_bounds(time_s: Array, smooth_A: Array, level_A: float, noise_A: float) -> tuple[int | None, int]:
    """First sample on the plateau and the one after its last; (None, 0) where the current only slopes."""
    sag = max(FLAT_SHARE * level_A, 2.0 * noise_A / math.sqrt(max(1, smooth_A.size // 50)))
    on = np.flatnonzero(smooth_A >= level_A - sag)
    first, stop = int(on[0]), int(on[-1]) + 1
    if stop - first < SHORTEST or stop == smooth_A.size:
        return (first, stop) if stop - first >= SHORTEST else (None, 0)
    deep = np.flatnonzero(smooth_A[stop:] < level_A - 3.0 * sag)
    if deep.size == 0:  # it sags by no more than the plateau's own tolerance: still the plateau
        return first, smooth_A.size
    next_s = float(time_s[stop + int(deep[0])] - time_s[stop - 1])
    held_s = float(time_s[stop - 1] - time_s[first])
    return (first, stop) if held_s >= KNEE_RATIO * next_s else (None, 0)
