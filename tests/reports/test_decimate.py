"""Thinning must keep every peak: that is why it is not taking each n-th sample."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from reports.decimate import decimate


@given(
    steps=st.lists(st.floats(0.001, 50.0), min_size=2, max_size=400),
    seed=st.integers(0, 2**32 - 1),
    half=st.integers(2, 40),
)
def test_extremes_ends_and_order_survive(steps: list[float], seed: int, half: int) -> None:
    time_s = np.cumsum(steps)
    level = np.random.default_rng(seed).normal(size=time_s.size)
    thin_s, thin = decimate(time_s, level, points=2 * half)
    assert thin_s.size == thin.size <= max(2 * half, 2)
    assert (thin.min(), thin.max()) == (level.min(), level.max())  # computed: what min/max of each bin implies
    assert (thin_s[0], thin_s[-1]) == (time_s[0], time_s[-1])
    assert np.all(np.diff(thin_s) > 0)


def test_a_single_spike_of_100000_samples_is_still_there() -> None:
    time_s = np.arange(100_000.0)
    level = np.zeros(100_000)
    level[77_777] = 1.0
    thin_s, thin = decimate(time_s, level, points=2000)
    assert thin_s.size <= 2000
    assert thin_s[np.argmax(thin)] == 77_777.0


def test_unknown_stretches_stay_gaps() -> None:
    time_s = np.arange(1000.0)
    level = np.where((time_s >= 400) & (time_s < 600), np.nan, 1.0)
    thin_s, thin = decimate(time_s, level, points=100)
    inside = thin[(thin_s > 420) & (thin_s < 580)]
    assert inside.size > 0
    assert np.isnan(inside).all()


def test_short_traces_are_left_alone() -> None:
    time_s, level = np.array([0.0, 1.0]), np.array([np.nan, 2.0])
    assert decimate(time_s, level, points=4)[1] is level
