"""Deep-discharge starts as they are drawn: a row a response, what is declared as boxes, weak cells beside."""

from __future__ import annotations

import pytest

from reports.canvas import TRIP
from reports.low_start_figure import draw_low_start_map
from reports.low_start_map import LowStartMap, low_start_map
from sequencer.model.specification import Specification

THRESHOLD = {"limit": "low_start.threshold", "verdict": "fail", "interval": [2.55, 2.57], "low": 2.95, "high": 3.05}


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> LowStartMap:
    made = low_start_map(breadth["findings"]["low_starts"], [THRESHOLD], declared)
    assert made is not None
    return made


def test_rows_are_responses_and_weak_cells_stand_beside(shown: LowStartMap) -> None:
    main, weak = draw_low_start_map(shown).axes
    assert [text.get_text() for text in main.get_yticklabels()] == list(shown.levels)
    assert main.yaxis_inverted()
    assert [text.get_text() for text in weak.get_xticklabels()] == ["1", "2", "3", "4", "5"]
    assert (len(main.patches), len(weak.patches)) == (3, 1)  # of two ranges three responses; of weak cells one


@pytest.mark.parametrize(("width_in", "words"), [(8.6, "3 A fail"), (4.3, "fail")])
def test_what_fails_says_so_in_a_word_too(shown: LowStartMap, width_in: float, words: str) -> None:
    main, weak = draw_low_start_map(shown, width_in=width_in).axes
    for axes in (main, weak):
        assert words in {text.get_text() for text in axes.texts if text.get_color() == TRIP}
    assert "fail: 2.56 V" in {text.get_text() for text in main.texts}


def test_starts_alone_are_drawn(breadth: dict) -> None:
    whole = [point for point in breadth["findings"]["low_starts"] if point["cell"] is None]
    bare = low_start_map(whole, [], None)
    assert bare is not None
    (axes,) = draw_low_start_map(bare).axes
    assert not list(axes.patches)
