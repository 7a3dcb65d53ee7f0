"""How often to look: a pure function of what was seen last."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from sequencer.engine.pace import FAST_s, Pace, QUIET_s


def test_fast_for_a_while_after_anything_has_moved() -> None:
    pace = Pace(0.0, response_s=1.0).moved(10.0)
    assert [pace.period_s(time_s) for time_s in (10.0, 14.9, 15.0)] == [FAST_s, FAST_s, QUIET_s]
    slow_charger = Pace(0.0, response_s=4.0).moved(10.0)  # five response times
    assert [slow_charger.period_s(time_s) for time_s in (29.9, 30.0)] == [FAST_s, QUIET_s]


def test_an_edge_of_the_current_is_a_move_and_noise_is_none() -> None:
    quiet = Pace(0.0, 1.0, current_A=3.0, largest_A=3.0)
    assert quiet.seen(100.0, 3.05).period_s(100.0) == QUIET_s  # 2 % of the largest is 60 mA
    assert quiet.seen(100.0, 2.93).period_s(100.0) == FAST_s
    small = Pace(0.0, 1.0, current_A=0.0, largest_A=0.1)
    assert small.seen(100.0, 0.019).period_s(100.0) == QUIET_s
    assert small.seen(100.0, 0.021).period_s(100.0) == FAST_s


@given(st.lists(st.floats(-10.0, 10.0), min_size=1, max_size=30))
def test_the_same_samples_give_the_same_pace_and_fast_throughout_is_fast(currents: list[float]) -> None:
    one, two, fast = Pace(0.0, 1.0), Pace(0.0, 1.0), Pace(0.0, 1.0, always_fast=True)
    for second, current_A in enumerate(currents):
        one, two, fast = (pace.seen(float(second), current_A) for pace in (one, two, fast))
        assert one == two
        assert fast.period_s(second + 0.5) == FAST_s
    assert one.largest_A == max(map(abs, currents))


def test_a_slow_change_is_no_move() -> None:
    """A taper of 450 s falls by 0.2 % a second; it is looked at quietly."""
    pace, current_A = Pace(0.0, 1.0, current_A=3.0, largest_A=3.0), 3.0
    for second in range(600):
        current_A *= 1 - 1 / 450
        pace = pace.seen(float(second), current_A)
        assert pace.period_s(float(second)) == QUIET_s
