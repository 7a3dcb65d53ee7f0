"""Draws the charge figure by matplotlib: for a page as SVG that follows the page's colours, for a file as it is."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from reports.canvas import BAND, BAND_TOO, CURRENT, INK, MUTED, PAPER, TRIP, VOLTAGE, frame, save_figure, settings
from reports.profile import Level, Profile, Stage, Trace, charge_profile
from reports.wording import sentence

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Floats = NDArray[np.float64]
__all__ = ["charge_figure", "draw", "save_figure"]


class _Flagged(NamedTuple):
    """A trace of a foreign log, nan where it says nothing."""

    time_s: Floats
    value: Floats
    flag: NDArray[np.int64]


def charge_figure(
    time_s: Floats, voltage_V: Floats, current_A: Floats, classification: Mapping[str, Any], title: str
) -> Figure:
    """The figure of a logged charge: voltage above current, stages shaded and named, levels as lines.

    time_s, voltage_V, current_A : (n,), s, V, A; current positive into the pack; nan where nothing is known.
    classification : the object of `classify --json`. title : any text; drawn as it is, on one line.
    Save it by `save_figure`. ValueError for fewer than two samples.
    """
    flag = np.zeros(np.shape(time_s), dtype=np.int64)
    profile = charge_profile(_Flagged(time_s, voltage_V, flag), _Flagged(time_s, current_A, flag), classification)
    if profile is None:
        raise ValueError(f"a figure needs at least two samples, the log has {np.size(time_s)}")
    return draw(profile, title=sentence(title))


def draw(profile: Profile, *, title: str = "", width_in: float = 8.6, height_in: float = 4.7) -> Figure:
    """Voltage at the charger's contacts above, current into the pack below, one axis of time."""
    from matplotlib.figure import Figure

    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        left, right, top = 0.62 / width_in, 1 - 0.12 / width_in, 1 - (0.62 if title else 0.32) / height_in
        upper, lower = figure.subplots(
            2,
            1,
            sharex=True,
            height_ratios=(1.15, 1),
            gridspec_kw={"left": left, "right": right, "top": top, "bottom": 0.48 / height_in, "hspace": 0.1},
        )
        if title:
            # parse_math off: a dollar sign in outside text is a dollar sign.
            figure.text(left, 1 - 0.12 / height_in, title, va="top", fontsize=11, color=INK, parse_math=False)
        factor_s, unit = _clock(profile.window)
        frame(upper, "voltage / V")
        frame(lower, "current / A")
        _traces(profile, upper, lower, factor_s)
        for axes in (upper, lower):
            _bands(axes, profile.stages, factor_s)
        _names(upper, profile, factor_s, width_in * (right - left) * 72)
        for limit_V in profile.limits_V:
            upper.axhline(limit_V, color=MUTED, linewidth=0.9, linestyle=":", zorder=2)
        span = (profile.window[1] - profile.window[0]) / factor_s
        lower.set_xlim(profile.window[0] / factor_s, profile.window[1] / factor_s)
        _levels(upper, profile.voltage_levels, profile.voltage_V, factor_s, span, VOLTAGE, below=True)
        _levels(lower, profile.current_levels, profile.current_A, factor_s, span, CURRENT, below=False)
        _trips(upper, lower, profile, factor_s)
        lower.set_xlabel(f"time since the start / {unit}", color=INK)
        return figure


def _clock(window: tuple[float, float]) -> tuple[float, str]:
    """Seconds in the unit of the time axis, and the unit."""
    span_s = window[1] - window[0]
    if span_s > 6 * 3600:
        return 3600.0, "h"
    return (60.0, "min") if span_s > 300 else (1.0, "s")


def _traces(profile: Profile, upper: Axes, lower: Axes, factor_s: float) -> None:
    """Both traces, with ranges that the time after removal (0 V) does not spoil."""
    for axes, trace, colour, zero in (
        (upper, profile.voltage_V, VOLTAGE, False),
        (lower, profile.current_A, CURRENT, True),
    ):
        axes.plot(trace.time_s / factor_s, trace.level, color=colour, linewidth=1.3, zorder=3)
        seen = trace.level[(trace.time_s >= profile.body[0]) & (trace.time_s <= profile.body[1])]
        seen = seen[np.isfinite(seen)]
        if seen.size and not zero:
            seen = seen[seen > 0.5 * seen.max()]  # while the contacts are open they show nothing of the pack
        if seen.size:
            low, high = float(seen.min()), float(seen.max())
            low = min(low, 0.0) if zero else low
            margin = 0.09 * ((high - low) or abs(high) or 1.0)
            axes.set_ylim(low - (0.5 * margin if zero else margin), high + margin)


def _bands(axes: Axes, stages: tuple[Stage, ...], factor_s: float) -> None:
    for stage in stages:
        colour = BAND_TOO if stage.number % 2 else BAND
        axes.axvspan(stage.start_s / factor_s, stage.end_s / factor_s, color=colour, linewidth=0, zorder=0)


def _names(axes: Axes, profile: Profile, factor_s: float, width_pt: float) -> None:
    """Each stage's number and name above its band; the number alone where the name has no room; else nothing."""
    span_s = profile.window[1] - profile.window[0]
    for stage in profile.stages:
        room_pt = (stage.end_s - stage.start_s) / span_s * width_pt
        full = f"{stage.number} {stage.words}"
        # 4.9 pt: mean advance of the 8.5 pt face; a name that does not fit would run into its neighbour's.
        text = full if room_pt > 4.9 * len(full) + 4 else str(stage.number) if room_pt > 9 else ""
        middle = (stage.start_s + stage.end_s) / 2 / factor_s
        axes.text(
            middle,
            1.03,
            text,
            transform=axes.get_xaxis_transform(),
            ha="center",
            fontsize=8.5,
            color=INK,
            parse_math=False,
        )


def _levels(
    axes: Axes, levels: tuple[Level, ...], trace: Trace, factor_s: float, span: float, colour: str, *, below: bool
) -> None:
    for number, level in enumerate(levels):
        start, stop = level.start_s / factor_s, level.end_s / factor_s
        # A little to the right, for at its start the trace itself climbs through the level; each further right than
        # the one before, for levels may lie close together.
        first = start + (0.05 + 0.22 * number) * span
        place = _free_place(axes, level, trace, factor_s, (first, start + 0.75 * span), below=below)
        axes.plot([start, stop], [level.value] * 2, color=colour, linewidth=0.8, linestyle=(0, (5, 3)), zorder=2)
        shift, anchor = ((0, -4), "top") if below else ((0, 3), "bottom")
        axes.annotate(
            level.words,
            (place, level.value),
            shift,
            textcoords="offset points",
            va=anchor,
            fontsize=8.5,
            color=colour,
            bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 0.6, "alpha": 0.8},
        )


def _free_place(
    axes: Axes, level: Level, trace: Trace, factor_s: float, between: tuple[float, float], *, below: bool
) -> float:
    """Where the words beside a level begin so that the trace does not run through them; the first where none is."""
    to_pt = 72 / axes.figure.dpi
    wide_pt, high_pt = axes.bbox.width * to_pt, axes.bbox.height * to_pt
    low, high = axes.get_ylim()
    first_x, last_x = axes.get_xlim()
    width = 4.9 * len(level.words) / wide_pt * (last_x - first_x)  # 4.9 pt: mean advance of the 8.5 pt face
    one_pt = (high - low) / high_pt
    bottom, top = (level.value + one_pt * edge for edge in ((-16, -2) if below else (1, 15)))
    inside = (trace.level > bottom) & (trace.level < top)
    times = trace.time_s[inside] / factor_s
    for place in np.linspace(between[0], max(between), 40):
        if place + width > last_x:
            break
        if not np.any((times > place - 0.1 * width) & (times < place + 1.1 * width)):
            return float(place)
    return between[0]


def _trips(upper: Axes, lower: Axes, profile: Profile, factor_s: float) -> None:
    for trip in profile.trips:
        early = trip.time_s < (profile.window[0] + profile.window[1]) / 2
        for axes in (upper, lower):
            axes.axvline(trip.time_s / factor_s, color=TRIP, linewidth=1.1, zorder=4)
        lower.annotate(
            trip.words,
            (trip.time_s / factor_s, 0.5),
            (4 if early else -4, 0),
            xycoords=lower.get_xaxis_transform(),
            textcoords="offset points",
            ha="left" if early else "right",
            va="center",
            fontsize=8.5,
            color=TRIP,
            parse_math=False,
        )
