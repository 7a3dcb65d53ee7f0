"""What every figure keeps: plain SVG, the page's colours, ids of its own, the same bytes each time."""

import io
import re
import xml.etree.ElementTree as ET
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from reports import canvas, figures
from reports.cell_figure import draw_cell_map
from reports.cell_map import cell_map
from reports.id_figure import draw_id_map
from reports.id_map import id_map
from reports.low_start_figure import draw_low_start_map
from reports.low_start_map import low_start_map
from reports.tap_figure import draw_tap_map
from reports.tap_map import tap_map
from reports.temperature_figure import draw_temperature_map
from reports.temperature_map import temperature_map
from sequencer.model.curves import Curve
from sequencer.model.specification import Specification

SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture(params=["charge", "id", "temperature", "cells", "taps", "low"])
def drawn(request: pytest.FixtureRequest, breadth: dict, declared: Specification, sensor: Curve) -> Callable[[], Any]:
    """Each figure, drawn anew at each call."""
    findings, verdicts = breadth["findings"], breadth["verdicts"]["verdicts"]
    time_s = np.arange(300.0)
    return {
        "charge": lambda: figures.charge_figure(time_s, time_s, time_s, findings["classification"], title=""),
        "id": lambda: draw_id_map(id_map(findings["points"], verdicts, declared)),
        "temperature": lambda: draw_temperature_map(temperature_map(findings, verdicts, declared, sensor)),
        "cells": lambda: draw_cell_map(cell_map(findings["walks"], verdicts, declared)),
        "taps": lambda: draw_tap_map(tap_map(findings["balancing"], declared)),
        "low": lambda: draw_low_start_map(low_start_map(findings["low_starts"], verdicts, declared)),
    }[request.param]


def test_a_figure_for_a_page_is_plain_svg_in_the_page_s_colours(drawn: Callable[[], Any]) -> None:
    figure = drawn()
    one, other = (canvas.svg_for_page(figure, salt=salt, label="a figure") for salt in ("one", "other"))
    root = ET.parse(io.StringIO(one)).getroot()
    plain = {"svg", "g", "path", "defs", "use", "text", "clipPath", "rect", "tspan"}
    assert {element.tag.removeprefix(SVG) for element in root.iter()} <= plain
    assert not re.search(r"https?://(?!www\.w3\.org/(2000/svg|1999/xlink)\")", one)
    assert not re.search(r"#[0-9a-f]{6}\b", one), "a fixed colour would not follow the page into the dark"
    ids = [set(re.findall(r' id="([^"]+)"', text)) for text in (one, other)]
    assert ids[0]
    assert not ids[0] & ids[1], "two figures on one page must not share an id"
    assert set(re.findall(r"url\(#([^)]+)\)", one)) <= ids[0]


def test_a_figure_is_the_same_twice(drawn: Callable[[], Any]) -> None:
    one, other = (canvas.svg_for_page(drawn(), salt="s", label="a figure") for _ in range(2))
    assert one == other


def test_no_colour_has_two_meanings() -> None:
    colours = [value for name, value in vars(canvas).items() if name.isupper() and not name.startswith("_")
               and isinstance(value, str)]  # fmt: skip
    assert len(set(colours)) == len(colours) == 9
