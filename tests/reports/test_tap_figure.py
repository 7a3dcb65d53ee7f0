"""The tap currents as they are drawn: marks of different shapes, a band for the detection limit, the patterns."""

import pytest

from reports.canvas import TRIP
from reports.tap_figure import draw_tap_map
from reports.tap_map import TapMap, tap_map
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> TapMap:
    made = tap_map(breadth["findings"]["balancing"], declared)
    assert made is not None
    return made


def test_a_row_a_cell_and_the_patterns_beside_where_there_is_room(shown: TapMap) -> None:
    wide, narrow = draw_tap_map(shown), draw_tap_map(shown, width_in=4.3)
    assert [text.get_text() for text in wide.axes[0].get_yticklabels()] == [f"cell {number}" for number in range(1, 6)]
    assert [len(figure.axes) for figure in (wide, narrow)] == [2, 1]
    signs = [text.get_text() for text in wide.axes[1].texts if text.get_text() in "+−0"]
    assert len(signs) == 5 * len(shown.patterns)


def test_high_and_low_differ_by_shape_and_what_was_found_is_written(shown: TapMap) -> None:
    axes = draw_tap_map(shown).axes[0]
    assert {line.get_marker() for line in axes.lines} >= {"^", "v"}
    assert [(text.get_text(), text.get_color()) for text in axes.texts] == [("4.1 mA", TRIP)]


def test_the_detection_limit_is_a_band_about_zero(shown: TapMap) -> None:
    axes = draw_tap_map(shown).axes[0]
    assert axes.get_xscale() == "symlog"
    assert len(axes.collections) == 10  # one for each exchange


def test_a_declared_band_is_drawn_on_both_sides(shown: TapMap) -> None:
    both = TapMap(shown.rows, (), shown.limit_A, (0.0035, 0.0047), "")
    dashed = [line for line in draw_tap_map(both).axes[0].lines if line.get_linestyle() == "--"]
    assert sorted(round(float(line.get_xdata()[0]), 4) for line in dashed) == [-0.0047, -0.0035, 0.0035, 0.0047]
