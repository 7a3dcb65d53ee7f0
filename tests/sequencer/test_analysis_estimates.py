"""Means of correlated readings, against NIST's certified values and series of known correlation."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.estimates import effective_number, lag_correlation, mean_between, mean_estimate

# NIST StRD, univariate: Michelso (Dorsey's copy of Michelson's speed of light) and Mavro (filter transmittance).
MICHELSO = """299.85 299.74 299.90 300.07 299.93 299.85 299.95 299.98 299.98 299.88 300.00 299.98 299.93 299.65 299.76
299.81 300.00 300.00 299.96 299.96 299.96 299.94 299.96 299.94 299.88 299.80 299.85 299.88 299.90 299.84 299.83 299.79
299.81 299.88 299.88 299.83 299.80 299.79 299.76 299.80 299.88 299.88 299.88 299.86 299.72 299.72 299.62 299.86 299.97
299.95 299.88 299.91 299.85 299.87 299.84 299.84 299.85 299.84 299.84 299.84 299.89 299.81 299.81 299.82 299.80 299.77
299.76 299.74 299.75 299.76 299.91 299.92 299.89 299.86 299.88 299.72 299.84 299.85 299.85 299.78 299.89 299.84 299.78
299.81 299.76 299.81 299.79 299.81 299.82 299.85 299.87 299.87 299.81 299.74 299.81 299.94 299.95 299.80 299.81 299.87
"""
MAVRO = """
2.00180 2.00170 2.00180 2.00190 2.00180 2.00170 2.00150 2.00140 2.00150 2.00150 2.00170 2.00180 2.00180 2.00190
2.00190 2.00210 2.00200 2.00160 2.00140 2.00130 2.00130 2.00150 2.00150 2.00160 2.00150 2.00140 2.00130 2.00140 2.00150
2.00140 2.00150 2.00160 2.00150 2.00160 2.00190 2.00200 2.00200 2.00210 2.00220 2.00230 2.00240 2.00250 2.00270 2.00260
2.00260 2.00260 2.00270 2.00260 2.00250 2.00240"""
NUMACC1 = [10000001.0, 10000003.0, 10000002.0]
NUMACC4 = [10000000.2] + [10000000.1, 10000000.3] * 500


def numbers(text: str) -> list[float]:
    return [float(word) for word in text.split()]


@pytest.mark.parametrize(
    ("readings", "mean", "s", "digits"),
    [  # certified values: NIST StRD; digits asked for: our choice, no source
        # (agreeing digits = -log10 of the relative error)
        pytest.param(numbers(MICHELSO), 299.852400000000, 0.0790105478190518, 12, id="Michelso"),
        pytest.param(numbers(MAVRO), 2.00185600000000, 0.000429123454003053, 12, id="Mavro"),
        pytest.param(NUMACC1, 10000002.0, 1.0, 8, id="NumAcc1"),
        pytest.param(NUMACC4, 10000000.2, 0.1, 8, id="NumAcc4"),
    ],
)
def test_mean_and_scatter_keep_their_digits(readings: list[float], mean: float, s: float, digits: int) -> None:
    estimate = mean_estimate(readings)
    assert estimate.value == pytest.approx(mean, rel=10.0**-digits)
    assert estimate.s == pytest.approx(s, rel=10.0**-digits)


@pytest.mark.parametrize(
    ("readings", "lag_1"),
    [  # certified lag-1 autocorrelation: NIST StRD
        pytest.param(numbers(MICHELSO), 0.535199668621283, id="Michelso"),
        pytest.param(numbers(MAVRO), 0.937989183438248, id="Mavro"),
        pytest.param(NUMACC1, -0.5, id="NumAcc1"),
    ],
)
def test_lag_correlation_is_the_certified_one(readings: list[float], lag_1: float) -> None:
    deviations = np.array(readings) - np.mean(readings)
    assert lag_correlation(deviations)[1] == pytest.approx(lag_1, abs=1e-10)


@pytest.mark.parametrize("phi", [0.0, 0.5, 0.9])
def test_first_order_series_is_worth_what_theory_says(phi: float) -> None:
    """AR(1): n_eff -> n (1 - φ)/(1 + φ) (textbook, closed form)."""
    n = 20_000
    rng = np.random.default_rng(11)
    found = []
    for _ in range(8):
        shocks = rng.normal(size=n)
        series = np.empty(n)
        series[0] = shocks[0]
        for i in range(1, n):
            series[i] = phi * series[i - 1] + shocks[i]
        found.append(mean_estimate(series).n_eff)
    assert np.mean(found) == pytest.approx(n * (1 - phi) / (1 + phi), rel=0.15)


def test_alternating_readings_earn_no_bonus() -> None:
    assert mean_estimate(NUMACC4).n_eff == len(NUMACC4)


def test_a_pure_drift_is_worth_two_readings_at_most_a_few() -> None:
    assert mean_estimate(np.linspace(0.0, 1.0, 1000)).n_eff < 5.0


@given(st.lists(st.floats(-1e6, 1e6), min_size=2, max_size=40), st.floats(-1e5, 1e5))
def test_shift_moves_the_mean_and_nothing_else(readings: list[float], shift: float) -> None:
    here, there = mean_estimate(readings), mean_estimate(np.array(readings) + shift)
    assert there.value == pytest.approx(here.value + shift, abs=1e-8)
    assert there.s == pytest.approx(here.s, abs=1e-8)
    assert 2.0 <= here.n_eff <= len(readings)


def test_window_says_which_readings_it_used() -> None:
    time_s = np.arange(0.0, 10.0)
    estimate = mean_between(time_s, time_s * 2.0, 2.5, 6.2)
    assert (estimate.value, estimate.n, estimate.start_s, estimate.end_s) == (9.0, 4, 3.0, 6.0)


@pytest.mark.parametrize("readings", [[], [1.0], [[1.0, 2.0]], [1.0, math.nan], [1.0, math.inf]])
def test_unusable_readings_are_refused_by_name(readings: list[float]) -> None:
    with pytest.raises(ValueError, match=r"^x: "):
        mean_estimate(readings)


def test_empty_window_is_refused() -> None:
    with pytest.raises(ValueError, match="0 readings between 20 s and 30 s"):
        mean_between(np.arange(10.0), np.arange(10.0), 20.0, 30.0)


def test_constant_readings_are_all_counted() -> None:
    assert effective_number(np.zeros(7)) == 7.0
