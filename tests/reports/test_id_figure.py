"""The ID map as it is drawn: every mark on it, names where they have room."""

import pytest

from reports.canvas import TRIP
from reports.id_figure import draw_id_map
from reports.id_map import IdMap, id_map
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> IdMap:
    made = id_map(breadth["findings"]["points"], breadth["verdicts"]["verdicts"], declared)
    assert made is not None
    return made


def texts(figure: object) -> dict[str, str]:
    """Text to colour of everything written into a figure's axes."""
    return {text.get_text(): text.get_color() for axes in figure.axes for text in axes.texts}  # type: ignore[attr-defined]


def test_every_insertion_is_a_mark(shown: IdMap) -> None:
    short, main, opened = draw_id_map(shown).axes[:3]
    marks = {"none": 0}
    for axes in (main, short, opened):
        marks[str(len(marks))] = sum(line.get_xdata().size for line in axes.lines)
    assert sum(marks.values()) == len(shown.marks) + len(shown.short) + len(shown.open)
    assert main.get_xscale() == "log"


def test_bands_are_named_by_their_current_where_there_is_room(shown: IdMap) -> None:
    assert "1: 1.5 A ± 5 %" in texts(draw_id_map(shown, width_in=8.6))
    narrow = texts(draw_id_map(shown, width_in=4.3))
    assert "1" in narrow
    assert "1: 1.5 A ± 5 %" not in narrow


def test_an_edge_that_failed_says_so_in_a_word_and_a_colour(shown: IdMap) -> None:
    written = texts(draw_id_map(shown))
    assert written["fail: 9.2 kΩ"] == TRIP
    assert written["11.7 kΩ"] != TRIP


def test_a_map_without_bands_is_drawn(breadth: dict) -> None:
    bare = id_map(breadth["findings"]["points"], [], None)
    assert bare is not None
    assert len(draw_id_map(bare).axes) == 3
