"""How insertions and edges are drawn: each kind by a shape and a colour of its own, so that either alone tells."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from reports.canvas import CURRENT, INK, MUTED, PAPER, TRIP, VOLTAGE
from reports.insertions import Bracket, Mark

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# A box with its diagonals, for a plain box could pass for a kind of answer. ((x, y), ...) drawn in one stroke.
_STRUCK_OUT = ((-1, -1), (1, -1), (1, 1), (-1, 1), (-1, -1), (1, 1), (1, -1), (-1, 1))

_MARKS: dict[str, dict[str, Any]] = {
    "charges": {"marker": "o", "markersize": 5.5, "markerfacecolor": VOLTAGE, "markeredgecolor": PAPER},
    "precharges": {"marker": "s", "markersize": 5.5, "markerfacecolor": PAPER, "markeredgecolor": VOLTAGE},
    "no charge": {"marker": "x", "markersize": 5.5, "markeredgecolor": INK, "markeredgewidth": 1.4},
    "pulses": {"marker": "^", "markersize": 6.5, "markerfacecolor": CURRENT, "markeredgecolor": PAPER},
    "undecided": {"marker": "D", "markersize": 5, "markerfacecolor": PAPER, "markeredgecolor": CURRENT},
    "void": {"marker": _STRUCK_OUT, "markersize": 6.5, "markerfacecolor": PAPER, "markeredgecolor": MUTED},
}
_WORDS = {"void": "void, counts for nothing"}


def plot_marks(axes: Axes, shown: Iterable[tuple[float, float, str]]) -> None:
    """Marks at (x, y), each in the style of its kind; those that charge on top of what does not."""
    spots = list(shown)
    for order, style in enumerate(("void", "no charge", "undecided", "pulses", "precharges", "charges")):
        here = [(x, y) for x, y, kind in spots if kind == style]
        if here:
            xs, ys = zip(*here, strict=True)
            axes.plot(xs, ys, color=INK, linestyle="none", clip_on=False, zorder=5 + order, **_MARKS[style])


def legend(figure: Figure, shown: Sequence[Mark], left: float, top: float, width_in: float) -> None:
    """The kinds that occur, in one line above the axes (two where it is narrow)."""
    from matplotlib.lines import Line2D

    kinds = [kind for kind in _MARKS if any(mark.style == kind for mark in shown)]
    handles = [
        Line2D([], [], color=INK, linestyle="none", label=_WORDS.get(kind, kind), **_MARKS[kind]) for kind in kinds
    ]
    legend_line(figure, handles, left, top, len(kinds) if width_in > 6 else 2, gap=0.2)


def legend_line(figure: Figure, handles: Sequence[Any], left: float, top: float, ncols: int, gap: float = 0.4) -> None:
    """A legend without a frame, its upper left corner at (left, top); gap: between mark and word, in letters."""
    figure.legend(
        handles=handles,
        loc="upper left",
        bbox_to_anchor=(left, top),
        ncols=ncols,
        frameon=False,
        borderpad=0,
        borderaxespad=0,
        handletextpad=gap,
        columnspacing=1.2,
        fontsize=8.5,
        labelcolor=INK,
    )


def plot_bracket(axes: Axes, edge: Bracket, y: float, half: float, least: float) -> None:
    """An edge between its ends as a bar with ends that stand up; at least so wide (in axes) that it can be seen.

    y, half : middle and half height, in data.   least : fraction of the axes' width.
    """
    colour = TRIP if edge.failed else INK
    to_axes = axes.transData + axes.transAxes.inverted()
    low, high = (float(to_axes.transform((end, 0.0))[0]) for end in (edge.low, edge.high))
    if high - low < least:
        low, high = (low + high - least) / 2, (low + high + least) / 2
    for spot in (low, high):
        axes.plot([spot] * 2, [y - half, y + half], color=colour, linewidth=1.4, zorder=8, **_across(axes))
    axes.plot([low, high], [y, y], color=colour, linewidth=2.2, zorder=8, **_across(axes))


def _across(axes: Axes) -> dict[str, Any]:
    """x in fractions of the axes, y in data; what lies outside is not drawn."""
    return {"transform": axes.get_yaxis_transform(), "clip_on": True, "solid_capstyle": "butt"}


def name_bracket(
    axes: Axes, edge: Bracket, text: str, y: float, shift_pt: tuple[float, float], ha: str, va: str = "center"
) -> None:
    """What was found, beside its bracket; a failed limit says so in a word, for colour alone tells not everyone."""
    colour = TRIP if edge.failed else INK
    words = f"{edge.word}: {text}" if edge.failed else text
    # A geometric middle lies inside as well as the other one, and a logarithmic axis needs no case of its own.
    x = edge.low if ha == "right" else edge.high if ha == "left" else (edge.low + edge.high) / 2
    axes.annotate(
        words, (x, y), shift_pt, textcoords="offset points", ha=ha, va=va, fontsize=8, color=colour, parse_math=False
    )
