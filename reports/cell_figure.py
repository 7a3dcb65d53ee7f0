"""Draws the trips of the cell taps by matplotlib: a row for each cell over its voltage."""

from __future__ import annotations

from typing import TYPE_CHECKING

from reports.canvas import BAND_TOO, INK, MUTED, PAPER, TRIP, VOLTAGE, frame, settings
from reports.cell_map import CellMap, Row
from reports.mark_styles import plot_bracket, plot_marks

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

ROW_in, TOP_in, BOTTOM_in = 0.36, 0.15, 0.5


def draw_cell_map(shown: CellMap, *, width_in: float = 8.6) -> Figure:
    """One row a cell: steps, trip and declared window over the cell's voltage; stop and release in words beside it."""
    from matplotlib.figure import Figure

    main_in = ROW_in * len(shown.rows) + 0.1
    height_in = TOP_in + main_in + BOTTOM_in
    words_in = 2.3 if width_in > 6 else 1.2
    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        left, wide = 0.55 / width_in, (width_in - 0.55 - words_in) / width_in
        axes = figure.add_axes((left, BOTTOM_in / height_in, wide, main_in / height_in))
        _frame(axes, shown)
        _declared(axes, shown.declared_V)
        for number, row in enumerate(shown.rows):
            _row(axes, number, row, 0.035 / (wide * width_in), ", " if width_in > 6 else "\n")
        return figure


def _frame(axes: Axes, shown: CellMap) -> None:
    from matplotlib.ticker import MaxNLocator

    frame(axes, "")
    axes.set_xlim(*shown.span_V)
    axes.set_ylim(len(shown.rows) - 0.4, -0.6)
    axes.set_yticks(range(len(shown.rows)), [f"cell {row.cell}" for row in shown.rows])
    axes.grid(False, axis="y")
    axes.tick_params(axis="y", left=False)
    axes.set_xlabel("voltage of the raised cell / V", color=INK)
    axes.xaxis.set_major_locator(MaxNLocator(nbins=6))


def _declared(axes: Axes, limits_V: tuple[float | None, float | None]) -> None:
    low, high = limits_V
    if low is None and high is None:
        return
    start, stop = axes.get_xlim()
    axes.axvspan(start if low is None else low, stop if high is None else high, color=BAND_TOO, linewidth=0, zorder=0)
    for limit in (low, high):
        if limit is not None:
            axes.axvline(limit, color=MUTED, linewidth=0.9, linestyle=(0, (3, 2)), zorder=1)


def _row(axes: Axes, number: int, row: Row, least: float, between: str) -> None:
    axes.plot(
        row.charging_V,
        [number] * len(row.charging_V),
        linestyle="none",
        marker="o",
        markersize=3.4,
        color=VOLTAGE,
        zorder=5,
    )
    if row.stopped_V is not None:
        plot_marks(axes, [(row.stopped_V, float(number), "no charge")])
    if row.found is not None:
        plot_bracket(axes, row.found, number + 0.28, 0.11, least)
    if row.found is not None and row.failed:
        spot = (row.found.high, number + 0.28)
        axes.annotate("fail", spot, (4, 0), textcoords="offset points", va="center", fontsize=8, color=TRIP)
    axes.annotate(
        between.join(row.words) + (" (fail)" if row.failed and row.found is None else ""),
        (1.0, number),
        (6, 0),
        xycoords=axes.get_yaxis_transform(),
        textcoords="offset points",
        va="center",
        fontsize=8.5,
        color=TRIP if row.failed and row.found is None else INK,
        parse_math=False,
    )
