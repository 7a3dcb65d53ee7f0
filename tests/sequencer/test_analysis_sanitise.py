"""What is left out of a foreign log, and what is refused."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.sanitise import in_time_order, sanitise


def test_a_zero_time_in_the_middle_costs_its_own_row_only() -> None:
    log = sanitise([10.0, 11.0, 0.0, 12.0, 13.0], [4.0] * 5, [1.0, 2.0, 3.0, 4.0, 5.0])
    assert log.current_A.tolist() == [1.0, 2.0, 4.0, 5.0]
    assert (log.out_of_order, log.not_finite, log.rows) == (1, 0, 4)


def test_a_time_far_ahead_costs_its_own_row_only() -> None:
    log = sanitise([1.0, 1e9, 2.0, 3.0], [4.0] * 4, [1.0, 2.0, 3.0, 4.0])
    assert log.current_A.tolist() == [1.0, 3.0, 4.0]


def test_equal_times_are_a_logged_step_and_stay() -> None:
    assert sanitise([0.0, 1.0, 1.0, 2.0], [4.0] * 4, [1.0, 1.0, 0.0, 0.0]).rows == 4


@pytest.mark.parametrize("column", [0, 1, 2])
@pytest.mark.parametrize("nothing", [np.nan, np.inf, -np.inf])
def test_rows_without_a_number_are_left_out(column: int, nothing: float) -> None:
    columns = np.arange(12.0).reshape(3, 4)
    columns[column, 1] = nothing
    log = sanitise(*columns)
    assert (log.rows, log.not_finite) == (3, 1)


@pytest.mark.parametrize(
    ("columns", "named"),
    [
        (([0.0, 1.0], [4.0], [1.0, 1.0]), r"^voltage_V: expected 2 values as in time_s, got 1"),
        (([0.0, 1.0], [4.0, 4.0], [1.0]), r"^current_A: expected 2 values as in time_s, got 1"),
        (([[0.0]], [4.0], [1.0]), r"^time_s: expected one row of numbers, got shape \(1, 1\)"),
        (([0.0], ["x"], [1.0]), r"^voltage_V: expected numbers"),
    ],
)
def test_unusable_columns_are_refused_by_name(columns: tuple[list[float], ...], named: str) -> None:
    with pytest.raises(ValueError, match=named):
        sanitise(*columns)


@given(st.lists(st.floats(-1e6, 1e6), max_size=60))
def test_what_is_kept_is_in_order_and_as_long_as_can_be(times: list[float]) -> None:
    kept = in_time_order(np.array(times))
    chosen = np.array(times)[kept]
    assert np.all(np.diff(chosen) >= 0.0)
    best = [0] * len(times)  # the plain quadratic way
    for i, time in enumerate(times):
        best[i] = 1 + max((best[j] for j in range(i) if times[j] <= time), default=0)
    assert int(np.sum(kept)) == max(best, default=0)
