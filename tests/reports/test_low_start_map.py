"""What figure and rows of deep-discharge starts will show."""

from __future__ import annotations

import pytest

from reports.low_start_map import LowStartMap, low_start_map
from sequencer.model.specification import Specification

THRESHOLD = {"limit": "low_start.threshold", "verdict": "fail", "interval": [2.55, 2.57], "low": 2.95, "high": 3.05}


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> LowStartMap:
    made = low_start_map(breadth["findings"]["low_starts"], [THRESHOLD], declared)
    assert made is not None
    return made


def test_starts_rise_and_weak_cells_stand_apart(shown: LowStartMap) -> None:
    assert [start.cell_V for start in shown.starts] == [0.8, 1.2, 1.6, 2.0, 2.5, 2.9]
    assert [start.cell for start in shown.weak] == [1, 2, 3, 4, 5]


def test_what_is_held_against_what_is_declared(shown: LowStartMap) -> None:
    """Void and undecided starts are held against nothing; several responses may be allowed."""
    assert [start.allowed for start in shown.starts] == [True, None, None, True, True, False]
    assert [start.allowed for start in shown.weak] == [True, True, False, True, True]
    assert "Not as declared: 2 of 11 starts." in shown.caption


def test_currents_in_words(shown: LowStartMap) -> None:
    """Of a probe its largest reading; nothing where none flowed."""
    assert [start.current for start in shown.starts] == ["", "", "250 mA", "200 mA", "250 mA", "3 A"]


def test_the_worst_is_on_top_and_what_is_undecided_has_a_row_of_its_own(
    shown: LowStartMap, breadth: dict, declared: Specification
) -> None:
    assert shown.levels == ("full current", "precharges", "probes and refuses", "refuses", "undecided")
    sure = [point for point in breadth["findings"]["low_starts"] if point["kind"] != "undecided"]
    made = low_start_map(sure, [], declared)
    assert made is not None
    assert made.levels[-1] == "refuses"


def test_the_axis_holds_starts_ranges_and_threshold(shown: LowStartMap) -> None:
    low, high = shown.span_V
    assert low < 0.7
    assert high > 3.05


def test_a_row_a_start(shown: LowStartMap) -> None:
    rows = {row.start: row for row in shown.rows}
    assert len(rows) == 11
    assert rows["pack at 1.20 V per cell"].response == "refuses, void"
    assert rows["pack at 2.50 V per cell"].declared == "precharges or probes and refuses"
    assert (rows["cell 3 alone at 2.00 V"].current, rows["cell 1 alone at 2.00 V"].current) == ("3 A", "–")


def test_without_a_specification_the_starts_still_stand(breadth: dict) -> None:
    made = low_start_map(breadth["findings"]["low_starts"], [], None)
    assert made is not None
    assert {start.allowed for start in (*made.starts, *made.weak)} == {None}
    assert "No response is declared." in made.caption
    assert low_start_map([], [], None) is None
