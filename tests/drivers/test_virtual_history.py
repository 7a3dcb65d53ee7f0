"""Steps and pulses: means over apertures against sums by hand."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.history import ALWAYS, Pulses, Steps
from drivers.virtual.trace import KEPT_s

TENTH = Pulses(every_s=0.01, on_s=0.001)


def stepped() -> Steps:
    steps = Steps()
    steps.set(1.0, 2.0)
    steps.set(1.5, 6.0)
    return steps


def test_mean_is_the_area_over_the_span() -> None:
    steps = stepped()
    assert steps.mean(1.0, 2.0) == pytest.approx((0.5 * 2.0 + 0.5 * 6.0) / 1.0)
    assert steps.mean(0.5, 1.25) == pytest.approx((0.5 * 0.0 + 0.25 * 2.0) / 0.75)
    assert steps.mean(1.6, 1.6) == 6.0
    assert [steps.value(t_s) for t_s in (0.0, 0.999, 1.0, 1.5)] == [0.0, 0.0, 2.0, 6.0]


def test_two_steps_at_one_moment_are_the_last_one() -> None:
    steps = stepped()
    steps.set(1.5, 4.0)
    assert steps.mean(1.5, 2.0) == 4.0


def test_pulses_show_their_duty_and_nothing_between() -> None:
    steps = Steps(3.3)
    assert steps.mean(0.0, 0.02, TENTH) == pytest.approx(0.33)  # 1 ms of 10 ms: a tenth, computed
    assert steps.mean(0.0205, 0.0295, TENTH) == pytest.approx(3.3 * 0.0005 / 0.009)
    assert steps.mean(0.0225, 0.0295, TENTH) == pytest.approx(0.0, abs=1e-12)
    assert (steps.value(0.0205, TENTH), steps.value(0.0215, TENTH)) == (3.3, 0.0)


@given(st.lists(st.floats(0.0, 5.0), min_size=3, max_size=3, unique=True), st.sampled_from([ALWAYS, TENTH]))
def test_means_of_parts_make_the_mean_of_the_whole(moments_s: list[float], pulses: Pulses) -> None:
    steps = stepped()
    a, b, c = sorted(moments_s)
    parts = steps.mean(a, b, pulses) * (b - a) + steps.mean(b, c, pulses) * (c - b)
    assert parts == pytest.approx(steps.mean(a, c, pulses) * (c - a), abs=1e-9)


def test_memory_is_bounded() -> None:
    steps = Steps()
    for count in range(10_000):
        steps.set(count * 0.01, float(count % 2))
    assert len(steps._steps) <= KEPT_s / 0.01 + 3
    assert steps.mean(-5.0, 0.0) in (0.0, 1.0)  # long before what is kept: as at its beginning
