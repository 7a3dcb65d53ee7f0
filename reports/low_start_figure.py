"""Draws deep-discharge starts by matplotlib: the charger's response over voltage per cell, and for each weak cell."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from reports.canvas import BAND_TOO, INK, MUTED, PAPER, TRIP, frame, settings
from reports.low_start_map import LowStartMap, Start
from reports.mark_styles import name_bracket, plot_bracket, plot_marks

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ROW_in, TOP_in, BOTTOM_in, LEFT_in, CELL_in = 0.52, 0.3, 0.5, 1.42, 0.42
NARROW_CELL_in = 0.19
_STYLES = {"full current": "charges", "probes and refuses": "pulses", "refuses": "no charge"}


def draw_low_start_map(shown: LowStartMap, *, width_in: float = 8.6) -> Figure:
    """Rows are responses, worst on top; starts over their voltage per cell, weak cells by number beside them."""
    from matplotlib.figure import Figure

    high_in = ROW_in * len(shown.levels)
    height_in = TOP_in + high_in + BOTTOM_in
    wide = width_in > 6
    weak_in = max(0.7, (CELL_in if wide else NARROW_CELL_in) * len(shown.weak)) if shown.weak else 0.0
    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        main_in = width_in - LEFT_in - weak_in - (0.3 if shown.weak else 0.15)
        place = (LEFT_in / width_in, BOTTOM_in / height_in, main_in / width_in, high_in / height_in)
        main = figure.add_axes(place)
        _rows(main, shown)
        _main(main, shown, main_in, wide)
        if shown.weak:
            left_in = LEFT_in + main_in + 0.15
            beside = (left_in / width_in, place[1], weak_in / width_in, place[3])
            _weak(figure.add_axes(beside), shown, wide)
        return figure


def _rows(axes: Axes, shown: LowStartMap) -> None:
    frame(axes, "")
    axes.set_ylim(len(shown.levels) - 0.5, -0.5)
    axes.set_yticks(range(len(shown.levels)), shown.levels)
    axes.tick_params(axis="y", left=False)


def _main(axes: Axes, shown: LowStartMap, width_in: float, wide: bool) -> None:
    from matplotlib.ticker import MaxNLocator

    axes.set_xlim(*shown.span_V)
    axes.xaxis.set_major_locator(MaxNLocator(nbins=max(3, int(width_in * 1.6))))
    axes.set_xlabel(f"{'open-circuit ' * wide}voltage per cell{' at the start' * wide} / V", color=INK)
    for owed in shown.owed:
        _shade(axes, shown, owed.low_V, owed.high_V, owed.responses)
    _threshold(axes, shown, width_in)
    _marks(axes, shown, [(start.cell_V, start) for start in shown.starts])
    _labels(axes, shown, [(start.cell_V, start) for start in shown.starts], wide)


def _shade(axes: Axes, shown: LowStartMap, low: float, high: float, responses: Sequence[str]) -> None:
    """What is declared, as boxes in the rows of the responses that are allowed."""
    from matplotlib.patches import Rectangle

    for response in responses:
        row = shown.levels.index(response)
        box = Rectangle((low, row - 0.42), high - low, 0.84, facecolor=BAND_TOO, edgecolor=MUTED, zorder=1)
        box.set_linewidth(0.8)
        axes.add_patch(box)


def _threshold(axes: Axes, shown: LowStartMap, width_in: float) -> None:
    """Between the rows of precharge and full current, for that is where it lies."""
    edge = shown.threshold
    if edge is None:
        return
    for limit in (edge.limit_low, edge.limit_high):
        if limit is not None:
            axes.plot([limit] * 2, [-0.4, 1.4], color=MUTED, linewidth=0.9, linestyle=(0, (3, 2)), zorder=2)
    plot_bracket(axes, edge, 0.5, 0.16, 0.05 / width_in)
    name_bracket(axes, edge, f"{(edge.low + edge.high) / 2:.2f} V", 0.5, (-6, 0), "right")


def _marks(axes: Axes, shown: LowStartMap, spots: Sequence[tuple[float, Start]]) -> None:
    plot_marks(axes, [(x, float(shown.levels.index(start.level)), _style(start)) for x, start in spots])


def _style(start: Start) -> str:
    return "void" if start.void else _STYLES.get(start.level, start.level)


def _labels(axes: Axes, shown: LowStartMap, spots: Sequence[tuple[float, Start]], wide: bool) -> None:
    """Currents, by turns above and below their marks to leave room, and what failed in a word; where it is narrow that
    word alone, for the rows below the figure hold the currents."""
    for level in shown.levels:
        here = [(x, start) for x, start in spots if start.level == level]
        for turn, (x, start) in enumerate(here):
            failed = start.allowed is False
            words = " ".join(part for part in (start.current if wide else "", "fail" if failed else "") if part)
            axes.annotate(
                words,
                (x, shown.levels.index(level)),
                (0, 6 if turn % 2 == 0 else -6),
                textcoords="offset points",
                ha="center",
                va="bottom" if turn % 2 == 0 else "top",
                fontsize=7.5,
                color=TRIP if failed else INK,
                parse_math=False,
                zorder=9,
            )


def _weak(axes: Axes, shown: LowStartMap, wide: bool) -> None:
    _rows(axes, shown)
    axes.tick_params(labelleft=False)
    count = len(shown.weak)
    axes.set_xlim(-0.6, count - 0.4)
    axes.set_xticks(range(count), [str(start.cell) for start in shown.weak])
    axes.set_xlabel("weak cell", color=INK)
    axes.set_title(f"one cell at {shown.weak[0].cell_V:g} V", fontsize=8.5, color=INK, parse_math=False)
    _shade(axes, shown, -0.5, count - 0.5, shown.weak_owed)
    spots = [(float(place), start) for place, start in enumerate(shown.weak)]
    _marks(axes, shown, spots)
    _labels(axes, shown, [(x, start) for x, start in spots if start.allowed is False], wide)
