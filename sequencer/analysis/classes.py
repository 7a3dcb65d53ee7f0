"""What one insertion showed: no charge, charges at so much, current that came and went, or nothing to rely on."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from sequencer.analysis.estimates import Estimate, mean_between, mean_estimate
from sequencer.analysis.wording import quantity

Array = npt.NDArray[np.float64]
PointClass = Literal["no charge", "charges", "pulses", "undecided"]
Bands = Sequence[tuple[float, float]]

FEWEST = 3  # readings on a plateau
STEADY_SHARE = 0.02  # of the level: the two halves of a settled plateau differ by no more, noise aside
GAP_SHARE = 0.5  # of the level: what falls below interrupts a plateau
STRAY_SHARE = 0.2  # beyond the end of the nearest declared band: no longer that band's current


@dataclass(frozen=True)
class Seen:
    """The class of one insertion.

    current : mean and scatter on the plateau (charges), over the whole window (no charge, pulses); None where there are
    too few readings.    band : which declared current it is, counted from 0, where it charges.
    flows : whether current certainly flowed into the pack; a point that must not charge has failed then, whatever
    the class.
    """

    kind: PointClass
    current: Estimate | None
    band: int | None
    words: str
    flows: bool

    @property
    def label(self) -> str:
        """The class as an edge search compares it: two plateaus are alike when they belong to the same band."""
        if self.kind != "charges":
            return self.kind
        return "charges at no declared current" if self.band is None else f"charges, band {self.band + 1}"


def class_of(
    time_s: npt.ArrayLike, current_A: npt.ArrayLike, *, declared_A: Bands, no_charge_A: float = 0.010,
    pulse_A: float = 0.050, plateau_s: float = 2.0, watched_s: float = 15.0,
) -> Seen:  # fmt: skip
    """The class of one insertion, from the contacts closed and settled to the end of watching.

    An inrush of the contacts' own in the window would count as a pulse of the charger: the caller leaves it out.
    time_s, current_A : (n,), rising in time, + into the pack.    declared_A : (low, high) of each declared current.
    *charges* : over the last `plateau_s` the current has settled, and its mean is above half of the lowest declared
    current; not after two or more interruptions.    *no charge* : |mean| below no_charge_A and no single reading beyond
    ± pulse_A, watched for at least watched_s (the caller gives the larger of three start delays and 15 s).
    *pulses* : the current rose above pulse_A and did not stay.    *undecided* : anything else, with the reason.
    Raises ValueError for arrays that do not fit, readings that are not finite, or a band that is not 0 < low <= high.
    """
    times, current = _checked(time_s, current_A, declared_A)
    if times.size < FEWEST:
        return Seen("undecided", None, None, f"{times.size} readings; {FEWEST} are needed", False)
    whole = mean_estimate(current, start_s=float(times[0]), end_s=float(times[-1]))
    lasted_s = float(times[-1] - times[0])
    if not np.any(np.abs(current) > pulse_A):
        quiet = _quiet(whole, lasted_s, no_charge_A, watched_s)
        if quiet is not None:
            return quiet
    tail = _tail(times, current, plateau_s)
    charges_above_A = 0.5 * min((low for low, _ in declared_A), default=2.0 * pulse_A)  # without any: above a pulse
    level_A = float(np.mean(current[tail]))
    if level_A > charges_above_A and _unbroken(current[tail], level_A):
        return _plateau(times, current, tail, declared_A, level_A)
    return _unsettled(times, current, whole, pulse_A, charges_above_A, level_A)


def nearest_band(current_A: float, declared_A: Bands) -> int | None:
    """The declared current that this one belongs to, counted from 0; None when it lies more than 20 % outside all.

    Bands that overlap are told apart by their middles; of bands with the same current the first is named, since the
    current cannot tell which one selected it.
    """
    best = min(range(len(declared_A)), key=lambda i: _distance(current_A, *declared_A[i]), default=None)
    return best if best is not None and _distance(current_A, *declared_A[best])[0] <= STRAY_SHARE else None


def _checked(time_s: npt.ArrayLike, current_A: npt.ArrayLike, declared_A: Bands) -> tuple[Array, Array]:
    times, current = np.asarray(time_s, dtype=np.float64), np.asarray(current_A, dtype=np.float64)
    if times.ndim != 1 or times.shape != current.shape:
        raise ValueError(f"time_s, current_A: expected two rows of one length, got {times.shape} and {current.shape}")
    if not (np.all(np.isfinite(times)) and np.all(np.isfinite(current))):
        raise ValueError("time_s, current_A: expected finite readings; leave out what is flagged")
    if np.any(np.diff(times) <= 0.0):
        raise ValueError("time_s: expected times that rise")
    for low, high in declared_A:
        if not 0.0 < low <= high < math.inf:
            raise ValueError(f"declared_A: expected 0 < low <= high, got ({low!r}, {high!r})")
    return times, current


def _quiet(whole: Estimate, lasted_s: float, no_charge_A: float, watched_s: float) -> Seen | None:
    """No charge, or why it cannot be said; None where a small current flows."""
    if abs(whole.value) >= no_charge_A:
        return None
    shown = quantity(whole.value, "A", step=1e-4)
    if lasted_s < watched_s * (1.0 - 1e-9):
        words = f"no current in {lasted_s:.1f} s; {watched_s:.1f} s must be watched before it is no charge"
        return Seen("undecided", whole, None, words, False)
    return Seen("no charge", whole, None, f"no charge: mean {shown} over {lasted_s:.1f} s, and no pulse", False)


def _tail(times: Array, current: Array, plateau_s: float) -> slice:
    """The last plateau_s, or the last FEWEST readings where they lie further apart."""
    first = int(np.searchsorted(times, float(times[-1]) - plateau_s * (1.0 + 1e-9)))
    return slice(min(first, times.size - FEWEST), times.size)


def _unbroken(tail_A: Array, level_A: float) -> bool:
    return bool(np.min(tail_A) > GAP_SHARE * level_A)


def _steady(tail_A: Array, level_A: float) -> bool:
    """Whether the two halves agree within 2 % of the level and three times the noise of their difference."""
    halves = np.array_split(tail_A, 2)
    noise = math.sqrt(sum(float(np.var(half)) / half.size for half in halves))
    return abs(float(np.mean(halves[1]) - np.mean(halves[0]))) <= STEADY_SHARE * level_A + 3.0 * noise


def _plateau(times: Array, current: Array, tail: slice, declared_A: Bands, level_A: float) -> Seen:
    estimate = mean_between(times, current, float(times[tail.start]), float(times[-1]))
    shown = quantity(level_A, "A", step=1e-3)
    if not _steady(current[tail], level_A):
        return Seen("undecided", estimate, None, f"the current has not settled: {shown} at the end, still moving", True)
    runs = _runs(current > GAP_SHARE * level_A)
    if len(runs) > 2:  # one run before the plateau may be a test pulse at the start
        words = f"pulses: {shown} at the end, after {len(runs) - 1} interruptions"
        return Seen("pulses", mean_estimate(current), None, words, True)
    band = nearest_band(level_A, declared_A)
    after = " after a pulse at the start" if len(runs) == 2 else ""
    return Seen("charges", estimate, band, f"charges: {shown}{after}{_which(level_A, band, declared_A)}", True)


def _which(level_A: float, band: int | None, declared_A: Bands) -> str:
    if band is None:
        return ", which is no declared current" if declared_A else ""
    low, high = declared_A[band]
    inside = "" if low <= level_A <= high else ", outside its limits"
    return f", current {band + 1} of {len(declared_A)}{inside}"


def _unsettled(
    times: Array, current: Array, whole: Estimate, pulse_A: float, charges_above_A: float, level_A: float
) -> Seen:
    runs = _runs(current > pulse_A)
    if not runs and whole.value <= 0.0:
        words = f"current flows out of the pack: mean {quantity(whole.value, 'A', step=1e-3)}"
        return Seen("undecided", whole, None, words, False)
    if len(runs) <= 1 and _unbroken(current[-FEWEST:], level_A) and level_A > 0.0:
        above = quantity(charges_above_A, "A", step=1e-3)
        words = f"{quantity(level_A, 'A', step=1e-3)} flows: too much for no charge, not above the {above} of charging"
        return Seen("undecided", whole, None, words, True)
    if not runs:
        words = f"a small current came and went: mean {quantity(whole.value, 'A', step=1e-4)}"
        return Seen("undecided", whole, None, words, True)
    highest = quantity(float(np.max(current)), "A", step=1e-3)
    on_s = sum(_length(times, *run) for run in runs)
    count = "one pulse" if len(runs) == 1 else f"{len(runs)} pulses"
    return Seen("pulses", whole, None, f"{count} up to {highest}, {on_s:.1f} s in all", True)


def _runs(on: npt.NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Ranges start <= i < stop in which `on` holds."""
    edges = np.diff(np.concatenate(([False], on, [False])).astype(np.int8))
    return list(zip(np.flatnonzero(edges == 1).tolist(), np.flatnonzero(edges == -1).tolist(), strict=True))


def _length(times: Array, start: int, stop: int) -> float:
    """Time from the first reading to the first one after the run."""
    return float(times[min(stop, times.size - 1)] - times[start])


def _distance(current_A: float, low: float, high: float) -> tuple[float, float]:
    """How far outside a band, as a share of its end; and from its middle, to tell bands that overlap apart."""
    outside = max(0.0, low - current_A, current_A - high) / (low if current_A < low else high)
    return outside, abs(math.log(max(current_A, 1e-12) / math.sqrt(low * high)))
