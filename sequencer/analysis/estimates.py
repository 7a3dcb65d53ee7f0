"""Means of readings that need not be independent: value, scatter, and how many independent readings it is worth."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Estimate:
    """A mean with its scatter and the window it was read from.

    value, s, start_s, end_s: the unit of the readings, s of a single reading (n - 1), seconds.
    n, n_eff: readings, and the number of independent readings that would give the same u.
    The window is NaN where the readings carry no time.
    """

    value: float
    s: float
    n: int
    n_eff: float
    start_s: float = math.nan
    end_s: float = math.nan

    @property
    def u(self) -> float:
        """Type A standard uncertainty of the value (GUM 4.2.3 with n_eff in the place of n)."""
        return self.s / math.sqrt(self.n_eff)

    @property
    def dof(self) -> float:
        """Degrees of freedom of u: n_eff - 1."""
        return self.n_eff - 1.0


def mean_estimate(x: npt.ArrayLike, *, start_s: float = math.nan, end_s: float = math.nan) -> Estimate:
    """Mean of readings in time order, with n_eff from their own lag correlation.

    x : (n,), n >= 2, evenly spaced in time or nearly so; any unit.
    n_eff = n / (1 + 2 Σ (1 - k/n) r_k), the sum ending before the first r_k <= 0; never above n (readings that
    alternate earn no bonus) and never below 2 (one degree of freedom is what is left of a pure drift; k is then 14).
    Raises ValueError for fewer than two readings or one that is not finite.
    """
    readings = np.asarray(x, dtype=np.float64)
    if readings.ndim != 1 or readings.size < 2:
        raise ValueError(f"x: a mean with its scatter needs a row of at least 2 readings, got shape {readings.shape}")
    if not np.all(np.isfinite(readings)):
        bad = int(np.flatnonzero(~np.isfinite(readings))[0])
        raise ValueError(f"x: reading {bad} is {readings[bad]}, expected finite readings")
    value, deviations = _centred(readings)
    s = _root_mean(deviations, readings.size - 1)
    return Estimate(value, s, readings.size, effective_number(deviations), start_s, end_s)


def mean_between(time_s: Array, level: Array, start_s: float, end_s: float) -> Estimate:
    """Mean of the readings with start_s <= time <= end_s; the window of the estimate is that of the readings used.

    Raises ValueError when fewer than two readings lie in the window.
    """
    inside = (time_s >= start_s) & (time_s <= end_s)
    times = time_s[inside]
    if times.size < 2:
        raise ValueError(f"start_s, end_s: {times.size} readings between {start_s:g} s and {end_s:g} s, 2 are needed")
    return mean_estimate(level[inside], start_s=float(times[0]), end_s=float(times[-1]))


def _centred(readings: Array) -> tuple[float, Array]:
    """Mean and deviations in two passes: a large offset costs no digits of the scatter (NIST StRD NumAcc)."""
    first = float(np.mean(readings))
    correction = float(np.mean(readings - first))
    value = first + correction
    deviations = readings - value
    return value, deviations - float(np.mean(deviations))


def _root_mean(deviations: Array, dof: int) -> float:
    """Root of the sum of squares over dof, without leaving the range of the numbers."""
    scale = float(np.max(np.abs(deviations)))
    if scale == 0.0:
        return 0.0
    shares = deviations / scale
    return scale * math.sqrt(float(shares @ shares) / dof)


def effective_number(deviations: Array) -> float:
    """Independent readings that n correlated ones are worth, between 2 and n.

    deviations : (n,), from their mean.
    """
    n = deviations.size
    if n < 3 or not np.any(deviations):
        return float(n)
    r = lag_correlation(deviations)
    falls = np.flatnonzero(r[1:] <= 0.0)
    last = int(falls[0]) if falls.size else n - 1
    lags = np.arange(1, last + 1)
    inflation = 1.0 + 2.0 * float(np.sum((1.0 - lags / n) * r[1 : last + 1]))
    return float(min(n, max(2.0, n / inflation)))


def lag_correlation(deviations: Array) -> Array:
    """Autocorrelation at lags 0 ... n-1, (n,), normalised to 1 at lag 0 (biased form, as NIST StRD)."""
    n = deviations.size
    deviations = deviations / float(np.max(np.abs(deviations)))
    size = 1 << (2 * n - 1).bit_length()
    spectrum = np.fft.rfft(deviations, size)
    covariance = np.fft.irfft(spectrum * np.conj(spectrum), size)[:n]
    return np.asarray(covariance / covariance[0], dtype=np.float64)
