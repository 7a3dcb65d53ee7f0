"""Draws the temperature window by matplotlib: a row for starting, one for going on, over °C and the sensor's ohms."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from reports.canvas import BAND_TOO, CURRENT, INK, MUTED, PAPER, VOLTAGE, frame, settings
from reports.insertions import Bracket, Mark
from reports.mark_styles import legend, name_bracket, plot_bracket, plot_marks
from reports.temperature_map import Side, TemperatureMap

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

START, RUN = 0.0, 1.0
HALF = 0.2  # of a row's bar
MAIN_in, SIDE_in, BOTTOM_in = 1.9, 0.65, 0.5
RELEASE_in = 1.15  # what "goes on at ..." takes, with its arrow's head


def draw_temperature_map(shown: TemperatureMap, *, width_in: float = 8.6) -> Figure:
    """Two rows over one axis in °C; the same axis in Ω above; an open and a shorted contact beside the start row."""
    from matplotlib.figure import Figure

    top_in = (0.3 if width_in > 6 else 0.48) + (0.48 if shown.scale else 0.05)
    height_in = top_in + MAIN_in + BOTTOM_in
    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        left_in, right_in = 0.55, width_in - 0.1
        main_in = right_in - left_in - 2 * SIDE_in

        def place(x_in: float, wide_in: float) -> Axes:
            return figure.add_axes((x_in / width_in, BOTTOM_in / height_in, wide_in / width_in, MAIN_in / height_in))

        cold, main = place(left_in, SIDE_in), place(left_in + SIDE_in, main_in)
        hot = place(right_in - SIDE_in, SIDE_in)
        _frame(main, shown, main_in)
        for row, sides in ((START, shown.start), (RUN, shown.run)):
            _window(main, row, sides)
        plot_marks(main, [(mark.celsius or 0.0, START, mark.style) for mark in shown.marks])
        for side, lower_pt in zip(shown.run, (0, _lower_pt(shown, main_in)), strict=True):
            _walk(main, side, lower_pt)
        contacts = [("open", shown.open), ("short", shown.short)]
        for axes, (name, marks) in zip((cold, hot), contacts if shown.open_is_cold else contacts[::-1], strict=True):
            _beside(axes, name, marks)
        cold.set_yticks([START, RUN], ["start", "run"])
        marks = (*shown.marks, *shown.open, *shown.short)
        legend(figure, marks, left_in / width_in, 1 - 0.08 / height_in, width_in)
        return figure


def _frame(axes: Axes, shown: TemperatureMap, width_in: float) -> None:
    frame(axes, "")
    axes.set_xlim(*shown.span_C)
    axes.set_ylim(RUN + 0.6, START - 0.45)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.set_xlabel("temperature of the pack / °C", color=INK)
    if not shown.scale:
        return
    above = axes.secondary_xaxis("top")
    above.patch.set_visible(False)
    every = 2 if len(shown.scale) > 2.2 * width_in else 1
    ticks = shown.scale[::every]
    above.set_xticks([celsius for celsius, _ in ticks], [text for _, text in ticks])
    above.tick_params(colors=MUTED, labelcolor=INK, length=3)
    above.spines["top"].set_color(MUTED)
    above.set_xlabel("resistance of its thermistor", color=INK)


def _window(axes: Axes, row: float, sides: tuple[Side, Side]) -> None:
    """The declared window as a bar, the tolerance of its ends outlined, and what was found below it."""
    cold, hot = (side.declared for side in sides)
    low = cold.owed_C if cold else axes.get_xlim()[0]
    high = hot.owed_C if hot else axes.get_xlim()[1]
    if (cold or hot) and high > low:
        axes.barh(row, high - low, 2 * HALF, low, color=BAND_TOO, linewidth=0, zorder=1)
    for limit in (cold, hot):
        if limit is not None:
            ends = sorted((limit.owed_C, limit.forbidden_C))
            bar = axes.barh(row, ends[1] - ends[0], 2 * HALF, ends[0], facecolor="none", zorder=1.5)
            bar.patches[0].set(edgecolor=MUTED, linewidth=0.9, linestyle=(0, (3, 2)))
    for side in sides:
        if side.found is not None:
            plot_bracket(axes, side.found, row + HALF + 0.1, 0.07, 0.004)
            name_bracket(axes, side.found, _value(side.found), row + HALF + 0.16, (0, -2), "center", "top")


def _value(found: Bracket) -> str:
    return f"{found.low:.1f} to {found.high:.1f} °C"


def _lower_pt(shown: TemperatureMap, width_in: float) -> int:
    """How far the hot end's release is written below its arrow: both point inward, and two words need room."""
    cold_C, hot_C = (side.released_C for side in shown.run)
    if cold_C is None or hot_C is None:
        return 0
    between_in = (hot_C - cold_C) / (shown.span_C[1] - shown.span_C[0]) * width_in
    return 0 if between_in > 2 * RELEASE_in else 11


def _walk(axes: Axes, side: Side, lower_pt: int) -> None:
    """Steps of a walk as small dots where the charge went on, a cross where it stopped, an arrow where it resumed."""
    going = [step.celsius for step in side.steps if step.out and step.charged]
    axes.plot(going, [RUN] * len(going), linestyle="none", marker="o", markersize=2.6, color=VOLTAGE, zorder=5)
    stopped = next((step.celsius for step in side.steps if step.out and not step.charged), None)
    if stopped is None:
        return
    plot_marks(axes, [(stopped, RUN, "no charge")])
    if side.released_C is not None:
        towards = "<" if side.released_C < stopped else ">"
        axes.plot([stopped, side.released_C], [RUN - HALF - 0.09] * 2, color=CURRENT, linewidth=1, zorder=5)
        axes.plot(
            [side.released_C],
            [RUN - HALF - 0.09],
            marker=towards,
            markersize=6,
            color=CURRENT,
            linestyle="none",
            zorder=6,
        )
        _release(axes, side.released_C, towards, lower_pt)


def _release(axes: Axes, celsius: float, towards: str, lower_pt: int) -> None:
    away, ha = ((-6, -lower_pt), "right") if towards == "<" else ((6, -lower_pt), "left")
    spot, words = (celsius, RUN - HALF - 0.09), f"goes on at {celsius:.1f} °C"
    axes.annotate(words, spot, away, textcoords="offset points", ha=ha, va="center", fontsize=8, color=CURRENT)


def _beside(axes: Axes, name: str, marks: Sequence[Mark]) -> None:
    """A contact that is open or shorted has no temperature: it stands beside the axis, in the row for starting."""
    frame(axes, "")
    axes.set_xlim(-1, 1)
    axes.set_ylim(RUN + 0.6, START - 0.45)
    axes.set_xticks([0], [name])
    axes.set_yticks([])
    axes.grid(False)
    axes.patch.set_visible(False)  # a name at the end of the axis beside it may reach in here
    axes.spines["left"].set_visible(False)
    axes.tick_params(left=False)
    plot_marks(axes, [(0.0, START, mark.style) for mark in marks])
