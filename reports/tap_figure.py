"""Draws the currents through the cell taps by matplotlib: a row for each cell, and the patterns beside it."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from reports.canvas import BAND_TOO, CURRENT, GRID, INK, MUTED, PAPER, TRIP, VOLTAGE, frame, settings
from reports.mark_styles import legend_line
from reports.tap_map import Exchanged, TapMap
from reports.wording import si

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ROW_in, TOP_in, BOTTOM_in = 0.5, 0.4, 0.5
MOST_PATTERNS = 10  # with figures between the cells; more have no room for them
# Told apart by shape and filling as well as by colour.
_MARKS: dict[str, dict[str, Any]] = {
    "high": {"marker": "^", "markersize": 6.5, "markerfacecolor": VOLTAGE, "markeredgecolor": INK},
    "low": {"marker": "v", "markersize": 6.5, "markerfacecolor": PAPER, "markeredgecolor": CURRENT},
}
_SIDE = {"high": -0.17, "low": 0.17}
_SIGNS = {1: "+", -1: "−", 0: "0"}


def draw_tap_map(shown: TapMap, *, width_in: float = 8.6) -> Figure:
    """Exchanges of each cell over current, the detection limit shaded; where there is room, the patterns beside it."""
    from matplotlib.figure import Figure

    main_in = ROW_in * len(shown.rows) + 0.1
    height_in = TOP_in + main_in + BOTTOM_in
    beside = width_in > 6 and bool(shown.patterns)
    aside_in = min(0.34 * len(shown.patterns), 3.2) if beside else 0.0
    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        left, gap = 0.55 / width_in, 0.35 if beside else 0.15
        wide = (width_in - 0.55 - gap - aside_in - 0.1) / width_in
        axes = figure.add_axes((left, BOTTOM_in / height_in, wide, main_in / height_in))
        _frame(axes, shown, narrow=width_in <= 6)
        _limits(axes, shown)
        for place, row in enumerate(shown.rows):
            for one in row.exchanged:
                _exchanged(axes, place, one)
        _legend(figure, shown, 0.1 / width_in if width_in <= 6 else left, 1 - 0.06 / height_in)
        if beside:
            spot = (left + wide + gap / width_in, BOTTOM_in / height_in, aside_in / width_in, main_in / height_in)
            _patterns(figure.add_axes(spot), shown)
        return figure


def _frame(axes: Axes, shown: TapMap, *, narrow: bool) -> None:
    frame(axes, "")
    axes.set_xscale("symlog", linthresh=shown.limit_A, linscale=0.6)
    axes.set_xlim(-shown.reach_A, shown.reach_A)
    axes.set_ylim(len(shown.rows) - 0.4, -0.6)
    axes.set_yticks(range(len(shown.rows)), [f"cell {row.cell}" for row in shown.rows])
    axes.grid(False, axis="y")
    axes.tick_params(axis="y", left=False)
    axes.set_xlabel("current out of the cell", color=INK)
    levels_A = _ticks(shown, 2 if narrow else 4)
    axes.set_xticks(levels_A, [si(level, "A", 2).replace("-", "−") if level else "0" for level in levels_A])
    axes.minorticks_off()
    axes.axvline(0.0, color=MUTED, linewidth=0.9, zorder=1)


def _ticks(shown: TapMap, most: int) -> list[float]:
    """Zero and decades beyond the detection limit, `most` on each side; the limit itself where there is none."""
    first, last = math.ceil(math.log10(shown.limit_A) + 0.2), math.floor(math.log10(shown.reach_A))
    decades = range(first, last + 1)
    step = math.ceil(len(decades) / most) if decades else 1
    side = [10.0**power for power in list(decades)[::-1][::step]] or [shown.limit_A]
    return sorted([-level for level in side] + [0.0] + side)


def _limits(axes: Axes, shown: TapMap) -> None:
    """Each cell's detection limit as a shaded band, and what is declared as dashed lines on both sides."""
    for place, row in enumerate(shown.rows):
        for one in row.exchanged:
            low, high = place + _SIDE[one.way] - 0.15, place + _SIDE[one.way] + 0.15
            axes.fill_between([-one.limit_A, one.limit_A], low, high, color=BAND_TOO, linewidth=0, zorder=0)
            for side in (-one.limit_A, one.limit_A):
                axes.plot([side] * 2, [low, high], color=MUTED, linewidth=0.8, zorder=2)
    for level in shown.declared_A:
        if level is not None:
            for side in (-level, level):
                axes.axvline(side, color=MUTED, linewidth=1.0, linestyle=(0, (4, 2)), zorder=1)


def _exchanged(axes: Axes, place: int, one: Exchanged) -> None:
    height = place + _SIDE[one.way]
    ends = [one.out_A - one.U_A, one.out_A + one.U_A]
    axes.plot(ends, [height] * 2, color=INK, linewidth=1.2, solid_capstyle="butt", zorder=4)
    for end in ends:
        axes.plot([end] * 2, [height - 0.07, height + 0.07], color=INK, linewidth=1.0, zorder=4)
    axes.plot([one.out_A], [height], linestyle="none", zorder=5, **_MARKS[one.way])
    if one.found:
        right = one.out_A < 0
        axes.annotate(
            si(one.out_A, "A", 3),
            (one.out_A, height),
            (9 if right else -9, 0),
            textcoords="offset points",
            ha="left" if right else "right",
            va="center",
            fontsize=8,
            color=TRIP,
            parse_math=False,
            bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 0.5},
        )


def _legend(figure: Figure, shown: TapMap, left: float, top: float) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    ways = [way for way in _MARKS if any(one.way == way for row in shown.rows for one in row.exchanged)]
    handles: list[Any] = [
        Line2D([], [], color=INK, linestyle="none", label=f"standing {way}", **_MARKS[way]) for way in ways
    ]
    handles.append(Patch(facecolor=BAND_TOO, edgecolor=MUTED, linewidth=0.8, label="not to be detected"))
    legend_line(figure, handles, left, top, len(handles))


def _patterns(axes: Axes, shown: TapMap) -> None:
    """A column for each pattern: how each cell stood, and what flowed out of the tap between two of them."""
    count, cells = len(shown.patterns), len(shown.rows)
    axes.set_facecolor(PAPER)
    axes.set_xlim(-0.5, count - 0.5)
    axes.set_ylim(cells - 0.4, -0.6)
    axes.spines[:].set_visible(False)
    axes.set_xticks([])
    axes.set_yticks([])
    largest_A = max(abs(level) for one in shown.patterns for level in one.taps_A)
    factor, unit = (1e3, "mA") if largest_A >= 1e-4 else (1e6, "µA")
    axes.set_xlabel(f"patterns, taps / {unit}" if count <= MOST_PATTERNS else "patterns", color=INK)
    for column, pattern in enumerate(shown.patterns):
        for row, sign in enumerate(pattern.signs):
            _sign(axes, column, row, sign)
        if count <= MOST_PATTERNS:
            for row, level_A in enumerate(pattern.taps_A):
                told = f"{level_A * factor:.2g}".replace("-", "−") if abs(level_A) > shown.limit_A else "·"
                axes.text(column, row + 0.5, told, ha="center", va="center", fontsize=7, color=INK, parse_math=False)


def _sign(axes: Axes, column: int, row: int, sign: int) -> None:
    face, edge = {1: (VOLTAGE, INK), -1: (PAPER, CURRENT), 0: (PAPER, GRID)}[sign]
    axes.plot([column], [row], marker="s", markersize=10, markerfacecolor=face, markeredgecolor=edge, linestyle="none")
    colour = PAPER if sign > 0 else INK
    axes.text(column, row, _SIGNS[sign], ha="center", va="center", fontsize=8, color=colour, parse_math=False)
