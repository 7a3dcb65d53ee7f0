"""Steps, plateaus and slopes of a current trace, and the noise that hides them."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.segments import active_runs, cut, plateau_level
from sequencer.analysis.smoothing import despiked, display_step, moving_mean, noise_of, width_for


def kinds(current: np.ndarray, noise: float = 0.0) -> list[tuple[str, int, int]]:
    time = np.arange(float(current.size))
    found = cut(time, current, 0, current.size, scale_A=float(np.max(current)), noise_A=noise)
    return [(segment.kind, segment.start, segment.stop) for segment in found]


def test_steps_are_cut_where_they_are() -> None:
    current = np.repeat([2.0, 1.0, 0.5], 50)
    assert kinds(current) == [("flat", 0, 50), ("flat", 50, 100), ("flat", 100, 150)]


def test_plateau_and_slope_part_at_the_knee() -> None:
    current = np.concatenate((np.full(300, 3.0), 3.0 * np.exp(-np.arange(1, 400) / 200.0)))
    (flat, slope) = kinds(current)
    assert flat[0] == "flat"
    assert slope[0] == "slope"
    assert abs(flat[2] - 300) <= 4  # 1 % of sag takes 2 samples here


def test_pure_exponential_has_no_plateau() -> None:
    assert [kind for kind, _, _ in kinds(3.0 * np.exp(-np.arange(500) / 200.0))] == ["slope"]


@given(st.integers(0, 2**32 - 1), st.floats(0.0005, 0.01), st.floats(0.4, 0.9))
def test_a_step_is_found_in_noise(seed: int, noise: float, ratio: float) -> None:
    rng = np.random.default_rng(seed)
    current = np.concatenate((np.full(400, 1.0), np.full(400, ratio))) + noise * rng.normal(size=800)
    flats = [segment for segment in kinds(current, noise) if segment[0] == "flat"]
    assert len(flats) == 2
    assert abs(flats[0][2] - 400) <= 3


def test_plateau_level_ignores_a_short_overshoot() -> None:
    current = np.concatenate((np.full(5, 1.3), np.full(300, 1.0), np.linspace(1.0, 0.1, 200)))
    assert plateau_level(np.arange(float(current.size)), current) == pytest.approx(1.0, abs=0.01)


def test_runs_end_where_the_current_is_gone() -> None:
    current = np.concatenate((np.zeros(10), np.full(20, 1.0), np.zeros(10), np.full(5, 0.5), np.zeros(3)))
    assert active_runs(current, 0.05, noise_A=0.0) == [(10, 30), (40, 45)]


@pytest.mark.parametrize("sigma", [1e-6, 1e-3, 10.0])
def test_noise_is_found_beside_slopes_and_steps(sigma: float) -> None:
    rng = np.random.default_rng(3)
    signal = np.concatenate((np.full(500, 5.0), np.linspace(5.0, 1.0, 500))) * 1000.0 * sigma
    assert noise_of(signal + sigma * rng.normal(size=1000)) == pytest.approx(sigma, rel=0.15)


def test_display_digit_is_noise_too() -> None:
    ramp = np.round(np.linspace(0.0, 1.0, 301), 2)
    assert display_step(ramp) == pytest.approx(0.01)
    assert noise_of(ramp) >= 0.01 / np.sqrt(12.0) * 0.999


def test_steps_of_a_charger_are_no_display_digit() -> None:
    assert display_step(np.repeat([7.5, 5.0, 2.5], 1000)) == 0.0


def test_despiking_takes_glitches_and_leaves_steps() -> None:
    trace = np.array([1.0, 1.0, 9.0, 1.0, 1.0, 2.0, 2.0])
    assert despiked(trace).tolist() == [1.0, 1.0, 1.0, 1.0, 1.0, 2.0, 2.0]


@given(st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=30), st.integers(1, 9))
def test_moving_mean_is_the_mean_of_the_neighbours(values: list[float], width: int) -> None:
    level = np.array(values)
    smooth = moving_mean(level, width)
    for i in range(level.size):
        reach = min(width // 2, i, level.size - 1 - i)
        assert smooth[i] == pytest.approx(np.mean(level[i - reach : i + reach + 1]), abs=1e-9)


def test_width_brings_the_noise_down() -> None:
    assert width_for(0.01, 0.002, 1000) == 25
    assert width_for(0.001, 0.002, 1000) == 1
    assert width_for(1.0, 0.002, 40) == 40
