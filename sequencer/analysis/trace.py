"""One log with what is needed again and again: scale, noise, charge passed."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from sequencer.analysis.sanitise import Log
from sequencer.analysis.smoothing import despiked, display_step, noise_of

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Trace:
    """time_s, voltage_V, current_A, charge_Ah : (n,), charge passed up to each sample (trapezoid).

    scale_A : largest charging current, single glitches aside.    noise_A, noise_V : while current flows.
    charges_above_A : current from which on we say that it charges.
    u_A, u_V : standard uncertainty of the instruments (0 where not told) and of the log's last digit (step/√12).
    """

    time_s: Array
    voltage_V: Array
    current_A: Array
    charge_Ah: Array
    scale_A: float
    noise_A: float
    noise_V: float
    charges_above_A: float
    u_A: float
    u_V: float

    def charge_between(self, start: int, stop: int) -> float:
        """Charge from sample `start` to sample `stop - 1`, Ah."""
        return float(self.charge_Ah[stop - 1] - self.charge_Ah[start])

    def duration(self, start: int, stop: int) -> float:
        """Time from sample `start` to sample `stop - 1`, s."""
        return float(self.time_s[stop - 1] - self.time_s[start])


def trace_of(log: Log, *, current_u_A: float | None, voltage_u_V: float | None) -> Trace:
    """The trace of a log of at least 3 rows; scale_A is 0 where no current flows into the pack."""
    current, voltage = log.current_A, log.voltage_V
    u_A = current_u_A or 0.0
    scale = max(0.0, float(np.max(despiked(current))))
    flowing = despiked(current) > 0.02 * scale
    background = noise_of(current)
    noise = noise_of(current[flowing]) if scale > 0.0 and int(np.sum(flowing)) >= 5 else background
    least = max(5.0 * min(noise, background), 3.0 * u_A, 0.01 * float(np.max(np.abs(current))))
    if scale <= least:
        scale = 0.0
    return Trace(
        log.time_s,
        voltage,
        current,
        _charge(log.time_s, current),
        scale,
        noise,
        noise_of(voltage[flowing]) if int(np.sum(flowing)) >= 5 else noise_of(voltage),
        max(5.0 * noise, 3.0 * u_A, 0.005 * scale),
        math.hypot(u_A, display_step(current[flowing]) / math.sqrt(12.0)) if np.any(flowing) else u_A,
        math.hypot(voltage_u_V or 0.0, display_step(voltage, least_moves=0.0) / math.sqrt(12.0)),
    )


def _charge(time_s: Array, current_A: Array) -> Array:
    steps = 0.5 * (current_A[1:] + current_A[:-1]) * np.diff(time_s)
    return np.concatenate(([0.0], np.cumsum(steps))) / 3600.0
