"""A charger at the end of its power: the current is what the power leaves at the voltage of the moment, P / V.

A charger with a current setting and a power limit delivers the smaller of the two, so a plateau goes over into the
limit without a step, where the voltage has risen to P / I. Field practice: constant power is V I within 1 to 2 %.
"""

from __future__ import annotations

import math

import numpy as np

from sequencer.analysis.smoothing import despiked, moving_mean, width_for
from sequencer.analysis.trace import Array, Trace

POWER_SHARE = 0.015
LEAST_FALL = 2.0 * POWER_SHARE  # of the current: from here on a power within its share is no chance
SPREAD_PER_FALL = 0.2  # for less: a current that fell with a voltage of its own would spread the power by half of it
BELOW_SHARE = 0.002  # of P / V: a current further below it is limited by something else
SIGMAS = 5.0  # of thousands of samples, no two neighbours are further out by chance
FLAT_SHARE = 0.01  # of a plateau
COARSE, FINE = 0.003, 0.0005  # noise that is left after averaging, of the largest current


def holds_power(trace: Trace, start: int, stop: int) -> bool:
    """Whether V I stays within ±1.5 % while the current falls by more than that allows by chance."""
    current = trace.current_A[start:stop]
    smooth, width = _smooth(trace, trace.voltage_V[start:stop] * current, COARSE)
    middle = float(np.median(smooth))
    if middle <= 0.0:
        return False
    wanted = width_for(trace.noise_A, 0.01 * trace.scale_A, max(1, (stop - start) // 5))
    fall = 1.0 - float(np.mean(current[-wanted:])) / float(np.mean(current[:width]))
    spread = float(np.quantile(np.abs(smooth - middle), 0.95)) / middle
    told = 6.0 * trace.noise_A / (float(current[0]) * math.sqrt(width))  # what noise alone makes of a fall
    return spread <= POWER_SHARE and (fall > LEAST_FALL or (fall > told and spread <= SPREAD_PER_FALL * fall))


def power_of(trace: Trace, start: int, stop: int) -> float:
    """V I in the later half of a phase, W: before, it may have been limited by current."""
    later = start + (stop - start) // 2
    return float(np.median(trace.voltage_V[later:stop] * trace.current_A[later:stop]))


def onset_of_limit(trace: Trace, start: int, stop: int, watts: float) -> int | None:
    """Sample from which on the current is P / V up to `stop`; None where it is not so.

    What lies before it must be a plateau below P / V, or nothing.
    """
    share = despiked(1.0 - trace.voltage_V[start:stop] * trace.current_A[start:stop] / watts)
    below, width = _smooth(trace, share, FINE)
    current_A, voltage_V = float(np.median(trace.current_A[start:stop])), float(np.median(trace.voltage_V[start:stop]))
    noise = math.hypot(trace.noise_A / current_A, trace.noise_V / voltage_V)
    allowed = max(BELOW_SHARE, SIGMAS * noise / math.sqrt(width))
    whole = below.size - width // 2  # at the ends fewer are averaged
    outside = np.flatnonzero(np.abs(below[:whole]) > allowed)
    onset = start + (int(outside[-1]) + 1 if outside.size else 0)
    if stop - onset < 3 or not holds_power(trace, onset, stop):
        return None
    if onset == start:
        return start
    plateau, _ = _smooth(trace, trace.current_A[start:onset], COARSE)
    flat = float(np.ptp(plateau)) <= 2.0 * FLAT_SHARE * float(np.median(plateau))
    return onset if flat and float(np.median(below[: onset - start])) > 0.0 else None


def _smooth(trace: Trace, level: Array, wanted: float) -> tuple[Array, int]:
    """With as many samples averaged as bring the current's noise to the wanted share, and how many that are."""
    width = width_for(trace.noise_A, wanted * trace.scale_A, max(1, level.size // 10))
    return moving_mean(level, width), width
