"""What the figure of the tap currents will show."""

from typing import Any

import pytest

from reports.tap_map import TapMap, tap_map
from sequencer.model.specification import Specification


@pytest.fixture
def balancing(breadth: dict) -> dict[str, Any]:
    found: dict[str, Any] = breadth["findings"]["balancing"]
    return found


@pytest.fixture
def shown(balancing: dict, declared: Specification) -> TapMap:
    made = tap_map(balancing, declared)
    assert made is not None
    return made


def test_a_row_a_cell_with_what_it_exchanges_high_and_low(shown: TapMap) -> None:
    assert [row.cell for row in shown.rows] == [1, 2, 3, 4, 5]
    assert all([one.way for one in row.exchanged] == ["high", "low"] for row in shown.rows)
    found = [(row.cell, one.way) for row in shown.rows for one in row.exchanged if one.found]
    assert found == [(3, "high")]


def test_the_declared_limit_and_every_current_have_room(shown: TapMap) -> None:
    assert shown.declared_A == (None, 0.001)
    assert shown.reach_A > 0.001
    assert all(abs(one.out_A) + one.U_A < shown.reach_A for row in shown.rows for one in row.exchanged)


def test_it_is_called_a_screening_with_its_limit_offset_and_period(shown: TapMap) -> None:
    for words in ("A screening", "±50 mV", "up to 8 s", "detection limit", "alpha = beta = 5 %", "1.5 µA"):
        assert words in shown.caption


def test_without_a_specification_nothing_is_declared(balancing: dict) -> None:
    made = tap_map(balancing, None)
    assert made is not None
    assert made.declared_A == (None, None)
    assert "declared" not in made.caption


@pytest.mark.parametrize(
    "broken",
    [None, [], {}, {"detectable_A": 0.0}, {"detectable_A": "much"}, {"exchanges": []}, {"exchanges": [{"cell": "x"}]}],
)
def test_what_cannot_be_drawn_is_no_figure(balancing: dict, broken: Any) -> None:
    assert tap_map({**balancing, **broken} if isinstance(broken, dict) and broken else broken, None) is None


def test_a_pattern_of_other_cells_is_left_out(balancing: dict) -> None:
    made = tap_map({**balancing, "patterns": [{"signs": [1, -1], "taps_A": [0.0]}]}, None)
    assert made is not None
    assert made.patterns == ()
