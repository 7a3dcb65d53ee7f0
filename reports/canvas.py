"""What every figure has in common: colours with one meaning each, settings, frames, and SVG for a page."""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# One colour, one meaning; each hex value occurs once, so that a page can put its own (light or dark) in its place.
INK, MUTED, GRID, BAND, BAND_TOO = "#1b2126", "#5c6770", "#dfe3e6", "#f1f3f5", "#e4e9ed"
VOLTAGE, CURRENT, TRIP, PAPER = "#1d4f91", "#9a4a00", "#b3122e", "#fffffe"
_PAGE = {INK: "ink", MUTED: "muted", GRID: "grid", BAND: "band", BAND_TOO: "band-too"}
_PAGE |= {VOLTAGE: "voltage", CURRENT: "current", TRIP: "trip", PAPER: "paper"}


@contextmanager
def settings(given: Mapping[str, Any]) -> Iterator[None]:
    """matplotlib's defaults and ours: a person's own matplotlibrc shall not reach a report.

    A letter that the face lacks is drawn as a box, or by the page's faces; no one needs a warning of it.
    """
    import matplotlib

    with warnings.catch_warnings(), matplotlib.rc_context():
        warnings.filterwarnings("ignore", message="Glyph", category=UserWarning)
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(given)
        yield


def frame(axes: Axes, label: str) -> None:
    """Left and lower spine, a grid, a label of the vertical axis."""
    axes.set_facecolor(PAPER)
    axes.set_ylabel(label, color=INK)
    axes.grid(True, color=GRID, linewidth=0.6)
    axes.set_axisbelow(False)
    axes.tick_params(which="both", colors=MUTED, labelcolor=INK)
    axes.tick_params(length=3)
    axes.spines[["top", "right"]].set_visible(False)
    axes.spines[["left", "bottom"]].set_color(MUTED)


def save_figure(figure: Figure, path: str, kind: str) -> None:
    """Write a figure as "png", "svg" or "pdf", the same bytes each time."""
    nothing = {"svg": {"Date": None, "Creator": None}, "pdf": {"CreationDate": None}, "png": {"Software": None}}
    with settings({"svg.hashsalt": "packmime", "svg.fonttype": "none"}):
        figure.savefig(path, format=kind, dpi=160, metadata=nothing[kind])


def svg_for_page(figure: Figure, *, salt: str, label: str) -> str:
    """A figure as an `<svg>` element for a page: the page's colours and fonts, no ids but its own, no scripts.

    salt : tells the ids of two figures on one page apart. label : what the figure shows, for those who do not see it;
    fixed text of ours, without markup.
    """
    text = io.StringIO()
    with settings({"svg.hashsalt": salt, "svg.fonttype": "none"}):
        figure.savefig(text, format="svg", metadata={"Date": None, "Creator": None})
    svg = text.getvalue()
    svg = svg[svg.index("<svg") :]
    svg = re.sub(r"<metadata>.*?</metadata>", "", svg, flags=re.DOTALL)
    svg = re.sub(r"<defs>\s*<style.*?</style>\s*</defs>", "", svg, flags=re.DOTALL)
    svg = re.sub(r' id="[a-zA-Z0-9.]+_\d+"', "", svg)
    svg = re.sub(r'font: ([\d.]+px) [^;"]*', r"font-size: \1", svg)
    svg = re.sub(r"<!--.*?-->", "", svg, flags=re.DOTALL)
    svg = svg.replace(" xlink:href=", " href=")  # SVG 2; needs no namespace inside HTML
    for colour, name in _PAGE.items():
        svg = svg.replace(colour, f"var(--{name})")
    head = re.match(r'<svg [^>]*viewBox="([^"]*)"[^>]*>', svg)
    assert head is not None
    opening = f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="{head[1]}" role="img" aria-label="{label}">'
    return re.sub(r"\s*\n\s*", "\n", opening + svg[head.end() :])
