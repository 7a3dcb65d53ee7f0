"""What the figure of the cell taps will show."""

import pytest

from reports.cell_map import CellMap, cell_map
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> CellMap:
    made = cell_map(breadth["findings"]["walks"], breadth["verdicts"]["verdicts"], declared)
    assert made is not None
    return made


def test_a_row_a_cell_with_the_declared_window(shown: CellMap) -> None:
    assert [row.cell for row in shown.rows] == [1, 2, 3, 4, 5]
    assert shown.declared_V == (4.2, 4.28)


def test_the_last_step_that_charged_and_the_trip_are_the_ends_of_the_bracket(shown: CellMap) -> None:
    row = shown.rows[0]
    assert row.found is not None
    assert (row.charging_V[-1], row.stopped_V) == (row.found.low, row.found.high)


def test_stop_and_release_in_words(shown: CellMap) -> None:
    assert shown.rows[0].words == ("stops in 1.05 s", "goes on by itself")
    assert shown.rows[4].words == ("stops in 1.17 s", "stays off")


def raised(way: str, cell_V: float, stop_s: float | None = None) -> dict:
    return {"finding": "tap_trip", "cell": 1, "way": way, "cell_V": cell_V, "stop_s": stop_s, "goes_on": stop_s is None}


def test_a_stop_on_the_quick_way_is_the_stop() -> None:
    made = cell_map([raised("approach", 4.0), raised("approach", 4.05, 9.0), raised("back", 3.7)], [], None)
    assert made is not None
    assert (made.rows[0].charging_V, made.rows[0].stopped_V, made.rows[0].words) == ((), 4.05, ("stops",))


def test_the_timed_stop_is_no_step_of_the_search() -> None:
    search = [raised("approach", 4.1), raised("out", 4.2), raised("out", 4.21, 9.0), raised("back", 3.7)]
    timed = [raised("again", 4.15), raised("over", 4.26, 19.0)]
    assert cell_map([*search, *timed], [], None) == cell_map(search, [], None)
    # Also where only the timed stop came: the search itself let the cell pass.
    made = cell_map([raised("out", 4.2), *timed], [], None)
    assert made is not None
    assert made.rows[0].words == ("did not stop",)


def test_a_cell_that_stops_nothing_is_told(shown: CellMap) -> None:
    assert shown.rows[3].words == ("did not stop",)
    assert shown.rows[3].failed
    assert "Where the charge did not stop: cell 4." in shown.caption


@pytest.mark.parametrize("verdict", ["inconclusive", "not run"])
def test_a_cell_that_was_given_up_has_not_been_seen_to_go_on(verdict: str) -> None:
    judged = [{"limit": "tap_trip.cell1.voltage", "verdict": verdict, "value": None}]
    made = cell_map([raised("out", 4.2), raised("out", 4.21)], judged, None)
    assert made is not None
    assert made.rows[0].words == ("given up while it charged",)
    assert "did not stop" not in made.caption
    assert "Left before anything was known: cell 1." in made.caption


def test_the_axis_holds_every_step(shown: CellMap) -> None:
    low, high = shown.span_V
    assert all(low < level < high for row in shown.rows for level in row.charging_V)


def test_walks_of_temperatures_are_no_cells(breadth: dict, declared: Specification) -> None:
    walks = [walk for walk in breadth["findings"]["walks"] if walk["finding"] != "tap_trip"]
    assert cell_map(walks, [], declared) is None


def test_without_verdicts_and_specification_the_steps_still_stand(breadth: dict) -> None:
    made = cell_map(breadth["findings"]["walks"], [], None)
    assert made is not None
    assert made.declared_V == (None, None)
    assert made.rows[0].words == ("stops",)
