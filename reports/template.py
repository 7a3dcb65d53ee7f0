"""Our own page in place of pytest-html's, written from a view by Jinja with everything escaped."""

from __future__ import annotations

import re
from collections.abc import Callable
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


def _figures(view: View) -> list[tuple[str, Any]]:
    """The charge figure twice: for a page's width, and for a hand-held screen, where its letters would be too small."""
    from reports.figures import draw, svg_for_page

    if view.profile is None:
        return []
    label = "Charge profile: voltage at the charger's contacts and current over time"
    sizes = (("wide", 8.6, 4.7), ("narrow", 4.3, 4.9))
    return [
        (name, _ours(svg_for_page(draw(view.profile, width_in=width, height_in=height), salt=name, label=label)))
        for name, width, height in sizes
    ]


def _ours(markup: str) -> Any:
    """Markup that this program made, exempt from escaping. Outside text never comes here unescaped."""
    from markupsafe import Markup

    return Markup(markup)
