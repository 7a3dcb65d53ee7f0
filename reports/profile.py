"""What the charge figure shows: two traces, the stages, the levels and the trips; no drawing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reports.decimate import decimate
from reports.source import Series
from reports.wording import clean, si, stage_words

Floats = NDArray[np.float64]
POINTS = 2000  # a trace; the record holds them all
_UNUSABLE = 1 | 2  # stale; overload or not a number


@dataclass(frozen=True)
class Trace:
    """One quantity over time, thinned for drawing. time_s : (n,), s. level : (n,), nan where nothing is known."""

    time_s: Floats
    level: Floats


@dataclass(frozen=True)
class Stage:
    """A stage of the charge, number from 1, in words; times in s since the run's start."""

    number: int
    kind: str
    words: str
    start_s: float
    end_s: float


@dataclass(frozen=True)
class Level:
    """A level that the analysis read off the traces, drawn as a line from start to end."""

    words: str
    value: float
    start_s: float
    end_s: float


@dataclass(frozen=True)
class Trip:
    """A moment at which the guard stopped the charge."""

    time_s: float
    words: str


@dataclass(frozen=True)
class Profile:
    """All that the charge figure shows. window : first and last time shown, s."""

    voltage_V: Trace
    current_A: Trace
    window: tuple[float, float]
    stages: tuple[Stage, ...] = ()
    voltage_levels: tuple[Level, ...] = ()
    limits_V: tuple[float, ...] = ()
    current_levels: tuple[Level, ...] = ()
    trips: tuple[Trip, ...] = ()
    left_out: int = 0
    body: tuple[float, float] = field(default=(0.0, 0.0))


def stages_of(classification: Mapping[str, Any]) -> tuple[Stage, ...]:
    """The stages of a classification whose times are known, numbered, in words."""
    return tuple(
        Stage(number, str(stage["kind"]), stage_words(stage["kind"]), float(stage["start_s"]), float(stage["end_s"]))
        for number, stage in enumerate(classification.get("stages") or (), 1)
        if stage.get("start_s") is not None and stage.get("end_s") is not None
    )


def charge_profile(
    voltage: Series,
    current: Series,
    classification: Mapping[str, Any],
    events: Sequence[Mapping[str, Any]] = (),
    *,
    limits_V: tuple[float, ...] = (),
) -> Profile | None:
    """The charge as a figure shows it; None for a record without two samples of each quantity.

    voltage, current : V and A at the charger's contacts, current positive into the pack.
    classification : as `classify --json` gives it. events : of the record; windows and trips are read.
    limits_V : levels of the pack that are drawn dotted, without a name.
    """
    if min(voltage.time_s.size, current.time_s.size) < 2:
        return None
    stages = stages_of(classification)
    body = _body(stages, events, voltage.time_s)
    window = _window(body, voltage.time_s, events)
    volts, dropped = _good(voltage, window)
    amps, dropped_too = _good(current, window)
    return Profile(
        voltage_V=Trace(*decimate(*volts, points=POINTS)),
        current_A=Trace(*decimate(*amps, points=POINTS)),
        window=window,
        stages=stages,
        limits_V=limits_V,
        voltage_levels=_voltage_levels(classification, stages, *volts),
        current_levels=_current_levels(classification, stages),
        trips=tuple(Trip(float(event["t"]), _trip_words(event)) for event in events if event.get("event") == "trip"),
        left_out=dropped + dropped_too,
        body=body,
    )


def _body(stages: Sequence[Stage], events: Sequence[Mapping[str, Any]], time_s: Floats) -> tuple[float, float]:
    """The time in which the charge was watched: from the insertion before it to its end or trip; else all."""
    windows = [event for event in events if event.get("event") == "finding-window" and _spans(event)]
    charge = next((event for event in windows if event.get("finding") == "charge"), None)
    before = [
        event
        for event in windows
        if event.get("finding") == "charges" and (charge is None or event["end_s"] <= charge["end_s"])
    ]
    used = [*before[-1:], *([charge] if charge is not None else [])]
    starts = [float(event["start_s"] if event.get("mains_s") is None else event["mains_s"]) for event in used]
    ends = [float(event["end_s"]) for event in used]
    trips = [float(event["t"]) for event in events if event.get("event") == "trip"]
    starts += [stages[0].start_s] if stages else []
    ends += [stages[-1].end_s] if stages else []
    if not starts:
        return float(time_s[0]), float(time_s[-1])
    return min(starts), max(ends + [trip_s for trip_s in trips if charge is None])


def _spans(event: Mapping[str, Any]) -> bool:
    return event.get("start_s") is not None and event.get("end_s") is not None


def _window(body: tuple[float, float], time_s: Floats, events: Sequence[Mapping[str, Any]]) -> tuple[float, float]:
    """The body with a margin, within the record, without the margin where another insertion would reach into it."""
    margin = 0.02 * (body[1] - body[0])
    start, stop = max(body[0] - margin, float(time_s[0])), min(body[1] + margin, float(time_s[-1]))
    others = [event for event in events if event.get("event") in ("point", "control", "walk") and _spans(event)]
    if any(start < event["end_s"] <= body[0] for event in others):
        start = max(body[0], float(time_s[0]))
    if any(body[1] <= event["start_s"] < stop for event in others):
        stop = min(body[1], float(time_s[-1]))
    return (start, stop) if stop > start else (float(time_s[0]), float(time_s[-1]))


def _good(series: Series, window: tuple[float, float]) -> tuple[tuple[Floats, Floats], int]:
    """The samples in the window, nan where they say nothing, and how many those are."""
    inside = (series.time_s >= window[0]) & (series.time_s <= window[1])
    time_s, level = series.time_s[inside], series.value[inside].astype(np.float64)
    bad = (series.flag[inside] & _UNUSABLE != 0) | ~np.isfinite(level)
    return (time_s, np.where(bad, np.nan, level)), int(np.count_nonzero(bad))


def _voltage_levels(
    classification: Mapping[str, Any], stages: Sequence[Stage], time_s: Floats, level_V: Floats
) -> tuple[Level, ...]:
    """The regulation voltage over its stages, and the voltage at which each step in current came."""
    levels = []
    limit_V = _known(classification.get("voltage_limit_V"))
    held = [stage for stage in stages if stage.kind in ("cv", "taper", "float")]
    if limit_V is not None and held:
        levels.append(Level(f"voltage limit {si(limit_V, 'V', 5)}", limit_V, stages[0].start_s, held[-1].end_s))
    for stage, after in pairwise(stages):
        during = level_V[(time_s >= stage.start_s) & (time_s <= stage.end_s)]
        if stage.kind == after.kind == "cc" and np.isfinite(during).any():
            top_V = float(np.nanmax(during))
            levels.append(Level(f"step at {si(top_V, 'V')}", top_V, stages[0].start_s, stage.end_s))
    return tuple(levels)


def _known(estimate: Mapping[str, Any] | None) -> float | None:
    """The value of an estimate, None where there is none."""
    return None if not estimate or estimate.get("value") is None else float(estimate["value"])


def _current_levels(classification: Mapping[str, Any], stages: Sequence[Stage]) -> tuple[Level, ...]:
    """About where the charge was ended; with its uncertainty it stands in the row of its limit."""
    cutoff_A = _known(classification.get("cutoff_current_A"))
    if cutoff_A is None or not stages:
        return ()
    return (Level(f"ended near {si(cutoff_A, 'A', 2)}", cutoff_A, stages[0].start_s, stages[-1].end_s),)


def _trip_words(event: Mapping[str, Any]) -> str:
    """Whose trip it was: "trip (charger)"."""
    return f"trip ({clean(event.get('cause', 'unknown'))})"
