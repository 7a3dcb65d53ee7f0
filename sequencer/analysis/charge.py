"""What the recording of a full charge shows, measured so that it can be judged."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from sequencer.analysis.classify import Classification
from sequencer.analysis.estimates import Estimate, mean_estimate
from sequencer.analysis.smoothing import noise_of
from sequencer.analysis.stages import Stage
from sequencer.analysis.taper import Trend, end_of_charge, trend_at

Array = npt.NDArray[np.float64]

THRESHOLD_MEAN_S = 0.5
THRESHOLD_SEARCH_S = 2.0
END_MEAN_S = 1.0
KNEE_SHARE = 0.95  # of the plateau: the regulated voltage is read once the current has fallen below
EDGE_SHARE = 0.02  # of a plateau at either end that does not count for its current


@dataclass(frozen=True)
class Plateau:
    """One constant-current stage.

    current_A : mean without the first and last 2 %.
    threshold_V : voltage at which it ended by a step down: largest mean over 0.5 s within the last 2 s; None where it
    passed into a held voltage or the record ended. At 1 s spacing each mean is a single sample.
    threshold_bracket_V : rise of the voltage over one sample spacing there: the threshold lies up to so much higher.
    """

    current_A: Estimate
    threshold_V: Estimate | None
    threshold_bracket_V: float | None


@dataclass(frozen=True)
class ChargeReading:
    """Everything is measured within start_s ... end_s; None where there is no such thing.

    regulation_V : mean of the last constant-voltage phase, from 95 % of the plateau current down.
    end_voltage_V, peak_V : largest mean over 1 s (at 1 s spacing: largest sample), and the largest sample. Being the
    largest of many, both lie above the true voltage by up to 4 s / √n of the estimate.
    ended, ended_s : the current fell at once to below 5 % of the first plateau and stayed there; last sample before.
    cutoff_A : trend of the current at ended_s.
    cutoff_bracket_A : fall of the trend over one sample spacing there, or the steps about the trend where these are
    larger: the charger's own cut-off lies up to so much lower.
    last_current_A : trend at the end of the window when it did not end.
    after_end_A, after_end_largest_A, after_end_duration_s : mean and largest magnitude from two samples after the end.
    """

    plateaus: tuple[Plateau, ...]
    regulation_V: Estimate | None
    end_voltage_V: Estimate
    peak_V: float
    ended: bool
    ended_s: float | None
    cutoff_A: Estimate | None
    cutoff_bracket_A: float | None
    last_current_A: Estimate | None
    after_end_A: Estimate | None
    after_end_largest_A: float | None
    after_end_duration_s: float | None


def measure_charge(
    time_s: npt.ArrayLike,
    charger_voltage_V: npt.ArrayLike,
    charger_current_A: npt.ArrayLike,
    classification: Classification,
    *,
    start_s: float,
    end_s: float,
) -> ChargeReading:
    """Reads plateaus, thresholds, regulation, end voltage, cut-off and what flows after the end.

    time_s, charger_voltage_V, charger_current_A : (n,), s, V at the charger's contacts, A into the pack; rows that
    hold no number are left out.    classification : of the same record; its stages within the window are measured.
    Raises ValueError when the columns differ in length or fewer than 4 rows lie in the window.
    """
    time, voltage, current = _window(time_s, charger_voltage_V, charger_current_A, start_s, end_s)
    stages = [stage for stage in classification.stages if stage.start_s < end_s and stage.end_s > start_s]
    levels = [stage for stage in stages if stage.kind == "cc" and _samples(time, stage.start_s, stage.end_s) >= 2]
    first_A = levels[0].current_A.value if levels else max(0.0, float(np.max(current)))
    last = end_of_charge(time, current, first_A) if first_A > 0.0 else None
    end_voltage = largest_mean(time, voltage, END_MEAN_S, float(time[0]), float(time[-1]))
    before, bracket = _cutoff(time, current, last)
    after = slice(last + 2, None) if last is not None else slice(0, 0)
    return ChargeReading(
        tuple(_plateau(time, voltage, current, stage, stages, last) for stage in levels),
        _regulation(time, voltage, current, stages, last),
        end_voltage,
        float(np.max(voltage)),
        last is not None,
        float(time[last]) if last is not None else None,
        before,
        bracket,
        trend_at(time, current, time.size - 1).current_A if last is None else None,
        _mean_over(time[after], current[after]),
        float(np.max(np.abs(current[after]))) if current[after].size else None,
        float(time[-1] - time[after][0]) if time[after].size else None,
    )


def current_agreement(
    time_s: npt.ArrayLike,
    shunt_A: npt.ArrayLike,
    load_A: npt.ArrayLike,
    supply_A: npt.ArrayLike,
    *,
    start_s: float,
    end_s: float,
) -> Estimate:
    """Mean of shunt - (load - supply), A: two independent readings of the charger's current (I_load = I_supply + I).

    All (n,), s and A; rows that hold no number are left out.
    Raises ValueError when the columns differ in length or fewer than 2 rows lie in the window.
    """
    time, shunt, load, supply = _finite_rows(time_s=time_s, shunt_A=shunt_A, load_A=load_A, supply_A=supply_A)
    inside = (time >= start_s) & (time <= end_s)
    estimate = _mean_over(time[inside], (shunt - (load - supply))[inside])
    if estimate is None:
        count = int(np.sum(inside))
        raise ValueError(f"start_s, end_s: {count} rows between {start_s:g} s and {end_s:g} s, 2 are needed")
    return estimate


def largest_mean(time_s: Array, level: Array, span_s: float, start_s: float, end_s: float) -> Estimate:
    """Largest mean over any span_s that ends with a sample in start_s ... end_s, s being the noise about the trend.

    The span reaches back from each sample and leaves out a sample exactly span_s before; with a spacing of span_s or
    more it holds one sample.
    """
    inside = np.flatnonzero((time_s >= start_s) & (time_s <= end_s))
    sums = np.concatenate(([0.0], np.cumsum(level - level[0])))
    stop = inside + 1
    first = np.searchsorted(time_s, time_s[inside] - span_s * (1.0 - 1e-9), side="right")
    first = np.minimum(np.maximum(first, inside[0]), inside)
    means = (sums[stop] - sums[first]) / (stop - first)
    best = int(np.argmax(means))
    a, b = int(first[best]), int(stop[best])
    noise = noise_of(level[max(0, b - 50) : b])
    return Estimate(float(level[0] + means[best]), noise, b - a, float(b - a), float(time_s[a]), float(time_s[b - 1]))


def _plateau(
    time: Array, voltage: Array, current: Array, stage: Stage, stages: list[Stage], last: int | None
) -> Plateau:
    inside = np.flatnonzero((time >= stage.start_s) & (time <= stage.end_s))
    edge = min(int(EDGE_SHARE * inside.size) + 1, (inside.size - 2) // 2) if inside.size > 4 else 0
    core = inside[edge : inside.size - edge]
    mean = mean_estimate(current[core], start_s=float(time[core[0]]), end_s=float(time[core[-1]]))
    top = int(inside[-1])
    if not _steps_down(time, stage, stages, last):
        return Plateau(mean, None, None)
    threshold = largest_mean(time, voltage, THRESHOLD_MEAN_S, float(time[top]) - THRESHOLD_SEARCH_S, float(time[top]))
    return Plateau(mean, threshold, _rise_per_sample(time, voltage, top))


def _steps_down(time: Array, stage: Stage, stages: list[Stage], last: int | None) -> bool:
    """Whether a plateau ends by a step: into a lower plateau, into a pause, or by the end of the charge."""
    following = [other for other in stages if other.start_s >= stage.end_s and other is not stage]
    if following and following[0].kind in ("cv", "taper", "constant-power"):
        return False
    if following and following[0].kind in ("cc", "rest", "float"):
        return following[0].current_A.value < stage.current_A.value
    return last is not None and stage.end_s >= float(time[max(0, last - 1)])


def _rise_per_sample(time: Array, voltage: Array, top: int) -> float:
    """Slope of the voltage over the last samples up to `top`, times the spacing there; never negative."""
    start = max(0, top - 9)
    times = time[start : top + 1] - time[top]
    spread = float(np.sum((times - np.mean(times)) ** 2))
    if spread == 0.0:
        return 0.0
    slope = float((times - np.mean(times)) @ voltage[start : top + 1]) / spread
    return max(0.0, slope * float(time[top] - time[top - 1]))


def _regulation(time: Array, voltage: Array, current: Array, stages: list[Stage], last: int | None) -> Estimate | None:
    held = [stage for stage in stages if stage.kind == "cv"]
    if not held:
        return None
    stop = time.size if last is None else last
    inside = np.flatnonzero((time[:stop] >= held[-1].start_s) & (time[:stop] <= held[-1].end_s))
    levels = [stage.current_A.value for stage in stages if stage.kind == "cc" and stage.end_s <= held[-1].start_s]
    knee_A = KNEE_SHARE * (levels[-1] if levels else float(np.max(current[inside], initial=0.0)))
    inside = inside[current[inside] < knee_A]
    return _mean_over(time[inside], voltage[inside])


def _cutoff(time: Array, current: Array, last: int | None) -> tuple[Estimate | None, float | None]:
    if last is None or last < 3:
        return None, None
    trend: Trend = trend_at(time, current, last)
    spacing_s = float(time[last + 1] - time[last])
    return trend.current_A, max(trend.unrest_A, trend.fall_per_s * spacing_s)


def _mean_over(time: Array, level: Array) -> Estimate | None:
    if level.size < 2:
        return None
    return mean_estimate(level, start_s=float(time[0]), end_s=float(time[-1]))


def _samples(time: Array, start_s: float, end_s: float) -> int:
    return int(np.sum((time >= start_s) & (time <= end_s)))


def _window(
    time_s: npt.ArrayLike, voltage_V: npt.ArrayLike, current_A: npt.ArrayLike, start_s: float, end_s: float
) -> tuple[Array, Array, Array]:
    time, voltage, current = _finite_rows(time_s=time_s, charger_voltage_V=voltage_V, charger_current_A=current_A)
    inside = (time >= start_s) & (time <= end_s)
    if int(np.sum(inside)) < 4:
        count = int(np.sum(inside))
        raise ValueError(f"start_s, end_s: {count} rows between {start_s:g} s and {end_s:g} s, 4 are needed")
    return time[inside], voltage[inside], current[inside]


def _finite_rows(**columns: npt.ArrayLike) -> list[Array]:
    arrays = {name: np.asarray(column, dtype=np.float64) for name, column in columns.items()}
    size = arrays["time_s"].shape
    for name, array in arrays.items():
        if array.ndim != 1 or array.shape != size:
            raise ValueError(f"{name}: expected one row of {size} values as time_s, got shape {array.shape}")
    finite = np.logical_and.reduce([np.isfinite(array) for array in arrays.values()])
    return [array[finite] for array in arrays.values()]
