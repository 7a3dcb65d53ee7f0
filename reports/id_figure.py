"""Draws the ID map by matplotlib: current over resistance above, declared bands and found edges below."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import combinations
from typing import TYPE_CHECKING

from drivers.text.si import si
from reports.canvas import BAND, BAND_TOO, GRID, INK, MUTED, PAPER, frame, settings
from reports.id_map import Band, IdMap
from reports.insertions import Bracket, Mark
from reports.mark_styles import legend, name_bracket, plot_bracket, plot_marks

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MAIN_in, ROW_in, GAP_in, SIDE_in, BOTTOM_in = 2.6, 0.3, 0.3, 0.6, 0.5
MARGIN = 0.06  # of the axis, at either side


def draw_id_map(shown: IdMap, *, width_in: float = 8.6) -> Figure:
    """The map on a logarithmic axis of resistance; short and open stand at its sides."""
    from matplotlib.figure import Figure

    rows_in = ROW_in * len(shown.bands) + (GAP_in if shown.bands else 0.0)
    top_in = 0.55 if width_in > 6 else 0.75
    height_in = top_in + MAIN_in + rows_in + BOTTOM_in
    with settings({"font.size": 9}):
        figure = Figure(figsize=(width_in, height_in), facecolor=PAPER)
        left_in, right_in = 0.55, width_in - 0.1

        def place(x_in: float, y_in: float, wide_in: float, high_in: float) -> Axes:
            return figure.add_axes((x_in / width_in, y_in / height_in, wide_in / width_in, high_in / height_in))

        main_in = right_in - left_in - 2 * SIDE_in
        y_in = BOTTOM_in + rows_in
        short = place(left_in, y_in, SIDE_in, MAIN_in)
        main = place(left_in + SIDE_in, y_in, main_in, MAIN_in)
        opened = place(right_in - SIDE_in, y_in, SIDE_in, MAIN_in)
        _main(main, shown, main_in)
        frame(short, "current / A")
        _side(short, shown.short, "short", shown)
        _side(opened, shown.open, "open", shown)
        lower = place(left_in + SIDE_in, BOTTOM_in, main_in, rows_in - GAP_in) if shown.bands else main
        if shown.bands:
            _edges(figure, lower, shown, main_in)
            main.tick_params(labelbottom=False, which="both")
        _resistances(lower, main_in)
        marks = (*shown.marks, *shown.open, *shown.short)
        legend(figure, marks, left_in / width_in, 1 - 0.08 / height_in, width_in)
        return figure


def _main(axes: Axes, shown: IdMap, width_in: float) -> None:
    frame(axes, "")
    axes.set_xscale("log")
    axes.set_xlim(*shown.span_ohm(MARGIN))
    axes.set_ylim(-0.06 * shown.top_A, 1.12 * shown.top_A)
    axes.tick_params(labelleft=False, left=False)
    axes.spines["left"].set_color(GRID)
    for band in shown.bands:
        _band(axes, band, shown)
    _names(axes, shown, width_in * 72)
    plot_marks(axes, [(mark.ohm or 1.0, mark.current_A, mark.style) for mark in shown.marks])


def _band(axes: Axes, band: Band, shown: IdMap) -> None:
    from matplotlib.patches import Rectangle

    width = band.high_ohm - band.low_ohm
    axes.axvspan(band.low_ohm, band.high_ohm, color=BAND, linewidth=0, zorder=0)
    low_A = 0.0 if band.low_A is None else band.low_A
    high_A = 1.12 * shown.top_A if band.high_A is None else band.high_A
    box = Rectangle((band.low_ohm, low_A), width, high_A - low_A, facecolor=BAND_TOO, edgecolor=MUTED, zorder=1)
    box.set_linewidth(0.8)
    axes.add_patch(box)


def _names(axes: Axes, shown: IdMap, width_pt: float) -> None:
    """Each band's number and declared current above it; the numbers alone where one had no room."""
    low, high = (math.log(end) for end in axes.get_xlim())
    middles = [math.log(band.low_ohm * band.high_ohm) / 2 for band in shown.bands]
    full = [f"{band.number}: {band.current}" for band in shown.bands]
    apart = min((abs(one - other) for one, other in combinations(middles, 2)), default=high - low)
    # 4.9 pt: mean advance of the 8.5 pt face.
    fits = apart / (high - low) * width_pt > 4.9 * max(map(len, full), default=0) + 8
    for middle, band, text in zip(middles, shown.bands, full, strict=True):
        spot, words = math.exp(middle), text if fits else str(band.number)
        place = axes.get_xaxis_transform()
        axes.text(spot, 1.02, words, transform=place, ha="center", fontsize=8.5, color=INK, parse_math=False)


def _side(axes: Axes, marks: Sequence[Mark], name: str, shown: IdMap) -> None:
    """A contact that is open or shorted has no place on the axis of resistance: it stands beside it."""
    if name == "open":
        frame(axes, "")
        axes.tick_params(labelleft=False, left=False)
        axes.spines["left"].set_color(GRID)
    axes.set_xlim(-1, 1)
    axes.set_ylim(-0.06 * shown.top_A, 1.12 * shown.top_A)
    axes.set_xticks([0], [name])
    axes.grid(False, axis="x")
    plot_marks(axes, [(0.0, mark.current_A, mark.style) for mark in marks])


def _edges(figure: Figure, axes: Axes, shown: IdMap, width_in: float) -> None:
    """A row for each band: the declared resistances as a bar, the edges as brackets with their values."""
    from matplotlib.transforms import blended_transform_factory

    frame(axes, "")
    axes.set_xscale("log")
    axes.set_xlim(*shown.span_ohm(MARGIN))
    count = len(shown.bands)
    axes.set_ylim(count - 0.45, -0.55)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.grid(False, axis="y")
    # At the figure's left, to leave the room beside the axes to the names of edges.
    place = blended_transform_factory(figure.transFigure, axes.transData)
    for row, band in enumerate(shown.bands):
        axes.text(0.01, row, f"band {band.number}", transform=place, va="center", color=INK)
        axes.barh(row, band.high_ohm - band.low_ohm, 0.5, band.low_ohm, color=BAND_TOO, edgecolor=MUTED, linewidth=0.8)
        for edge, ha in ((band.lower, "right"), (band.upper, "left")):
            if edge is not None:
                plot_bracket(axes, edge, row, 0.34, 0.035 / width_in)
                name_bracket(axes, edge, _value(edge), row, (-5 if ha == "right" else 5, 0), ha)


def _value(edge: Bracket) -> str:
    return si((edge.low + edge.high) / 2, "Ω", 3)


def _resistances(axes: Axes, width_in: float) -> None:
    """Ticks at 1, 2, 5 times each power of ten as people write resistances."""
    from matplotlib.ticker import FixedLocator, FuncFormatter, NullFormatter

    low, high = axes.get_xlim()
    ticks = [step * 10.0**power for power in range(-1, 8) for step in (1, 2, 5)]
    ticks = [tick for tick in ticks if low <= tick <= high]
    if len(ticks) > 2.2 * width_in:
        ticks = [tick for tick in ticks if f"{tick:e}".startswith("1")] or ticks
    axes.xaxis.set_major_locator(FixedLocator(ticks))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda ohm, _: si(ohm, "Ω", 3)))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlabel("ID resistance", color=INK)
