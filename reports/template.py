"""Our own page in place of pytest-html's, written from a view by Jinja with everything escaped."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from functools import partial
from typing import Any

from reports.view import View


class PageTemplate:
    """What pytest-html takes for its own template: it calls `render`, we answer with the whole page.

    view : called once, when the page is written. Its arguments (date, durations, rows with raw markup) are not used:
    the page is made of the record alone, so that the same record gives the same bytes.
    """

    def __init__(self, view: Callable[[], View]) -> None:
        self._view = view

    def render(self, **_: Any) -> str:
        """The page as one HTML document."""
        return page(self._view())


def page(view: View) -> str:
    """A self-contained HTML document: no script, no request to anywhere."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("reports"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["css_text"] = css_text
    style = environment.get_template("report.css.jinja").render(view=view)
    return environment.get_template("report.html.jinja").render(view=view, style=_ours(style), figures=_figures(view))


def css_text(text: str) -> str:
    """Any text as the inside of a CSS string: all but plain letters and digits as escapes (CSS Syntax 3, 4.3.7)."""
    return re.sub(r"[^A-Za-z0-9 .]", lambda found: f"\\{ord(found[0]):06x}", text)


def _figures(view: View) -> dict[str, list[tuple[str, Any]]]:
    """Each figure twice: for a page's width, and for a hand-held screen, where its letters would be too small."""
    from reports.canvas import svg_for_page

    return {
        name: [
            (size, _ours(svg_for_page(drawn, salt=f"{name}-{size}", label=label)))
            for size, drawn in (("wide", draw(8.6)), ("narrow", draw(4.3)))
        ]
        for name, label, draw in _drawings(view)
    }


def _drawings(view: View) -> Iterator[tuple[str, str, Callable[[float], Any]]]:
    """Name, label and drawing by width (inches) of each figure that has something to show."""
    if view.profile is not None and view.has_charge:
        from reports.figures import draw

        profile = view.profile
        label = "Charge profile: voltage at the charger's contacts and current over time"
        yield "charge", label, lambda wide: draw(profile, width_in=wide, height_in=4.7 if wide > 6 else 4.9)
    if view.id_map is not None:
        from reports.id_figure import draw_id_map

        yield "id", "ID map: charger current over ID resistance", partial(_sized, draw_id_map, view.id_map)
    if view.temperature_map is not None:
        from reports.temperature_figure import draw_temperature_map

        label = "Temperature window: where a charge starts and goes on"
        yield "temperature", label, partial(_sized, draw_temperature_map, view.temperature_map)
    if view.cell_map is not None:
        from reports.cell_figure import draw_cell_map

        label = "Cell taps: the voltage of each cell at which the charge stops"
        yield "cells", label, partial(_sized, draw_cell_map, view.cell_map)
    if view.low_start_map is not None:
        from reports.low_start_figure import draw_low_start_map

        label = "Deep-discharge starts: what the charger did over the voltage per cell, and with each weak cell"
        yield "low", label, partial(_sized, draw_low_start_map, view.low_start_map)
    if view.tap_map is not None:
        from reports.tap_figure import draw_tap_map

        label = "Tap currents by screening: what each cell exchanges, and the detection limit"
        yield "taps", label, partial(_sized, draw_tap_map, view.tap_map)


def _sized(draw: Callable[..., Any], shown: object, width_in: float) -> Any:
    return draw(shown, width_in=width_in)


def _ours(markup: str) -> Any:
    """Markup that this program made, exempt from escaping. Outside text never comes here unescaped."""
    from markupsafe import Markup

    return Markup(markup)
