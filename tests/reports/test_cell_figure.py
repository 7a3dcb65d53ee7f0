"""The cell taps as they are drawn: a row for each cell, what followed in words beside it."""

import pytest

from reports.canvas import TRIP
from reports.cell_figure import draw_cell_map
from reports.cell_map import CellMap, cell_map
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> CellMap:
    made = cell_map(breadth["findings"]["walks"], breadth["verdicts"]["verdicts"], declared)
    assert made is not None
    return made


def test_a_row_a_cell_from_the_top(shown: CellMap) -> None:
    (axes,) = draw_cell_map(shown).axes
    assert [text.get_text() for text in axes.get_yticklabels()] == [f"cell {number}" for number in range(1, 6)]
    assert axes.yaxis_inverted()


@pytest.mark.parametrize(("width_in", "between"), [(8.6, ", "), (4.3, "\n")])
def test_stop_and_release_stand_beside_each_row(shown: CellMap, width_in: float, between: str) -> None:
    (axes,) = draw_cell_map(shown, width_in=width_in).axes
    written = {text.get_text(): text.get_color() for text in axes.texts}
    assert f"stops in 1.05 s{between}goes on by itself" in written
    assert written["did not stop (fail)"] == TRIP
    assert written["fail"] == TRIP


def test_steps_alone_are_drawn(breadth: dict) -> None:
    bare = cell_map(breadth["findings"]["walks"], [], None)
    assert bare is not None
    (axes,) = draw_cell_map(bare).axes
    assert axes.patches == [] or not list(axes.patches)
