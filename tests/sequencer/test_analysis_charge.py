"""What a full-charge recording shows, against charges known in closed form (textbook relation, computed)."""

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.charge import ChargeReading, current_agreement, largest_mean, measure_charge
from sequencer.analysis.classify import classify
from sequencer.analysis.coverage import t_factor
from sequencer.analysis.estimates import Estimate
from sequencer.analysis.taper import end_of_charge, trend_at


def measured(log: np.ndarray, *, end_s: float = math.inf) -> ChargeReading:
    return measure_charge(*log, classify(*log), start_s=0.0, end_s=end_s)


def covers(estimate: Estimate | None, truth: float) -> bool:
    assert estimate is not None
    return abs(estimate.value - truth) <= t_factor(estimate.dof) * estimate.u


def ended_at(current: np.ndarray) -> int | None:
    return end_of_charge(np.arange(float(current.size)), current, 1.0)


@pytest.mark.parametrize(
    ("period_s", "compressed"),
    [(1.0, 1.0), (1.0, 10.0), (0.1, 10.0), (1.0, 20.0)],
    ids=["real time", "quiet pace", "fast pace", "quiet pace, 20 times"],
)
def test_noise_gives_back_the_truth_within_the_stated_uncertainty(
    closed_form: Callable[..., Any], period_s: float, compressed: float
) -> None:
    """I0, V and the cut-off by tau, 100 seeds. 95.45 % is promised, so 91 of 100 is 2 σ of the counting below it;
    over all three quantities together at least 95 % must hold.
    """
    truth = closed_form(compressed=compressed)
    hits = np.zeros(3)
    for seed in range(100):
        log = truth.log(seed, period_s=period_s)
        last_s = float(log[0][log[0] <= truth.cc_s + truth.cv_s][-1])
        reading = measured(log)
        assert reading.ended_s == last_s
        hits += [
            covers(reading.plateaus[0].current_A, truth.I0_A),
            covers(reading.regulation_V, truth.limit_V),
            covers(reading.cutoff_A, float(truth.current_A(np.array(last_s)))),
        ]
    assert hits.min() >= 91
    assert hits.sum() >= 0.95 * 300


def test_cut_off_lies_within_its_bracket(closed_form: Callable[..., Any]) -> None:
    """The charger's own 0.3 A lies between the trend at the last sample and one spacing later."""
    truth = closed_form(compressed=20.0)
    reading = measured(truth.log(4, noise_A=1e-5, noise_V=1e-5))
    assert reading.cutoff_A is not None
    assert reading.cutoff_bracket_A is not None
    u = 4.0 * reading.cutoff_A.u
    assert reading.cutoff_A.value - reading.cutoff_bracket_A - u <= 0.3 <= reading.cutoff_A.value + u
    assert reading.cutoff_bracket_A == pytest.approx(0.3 / truth.tau_s, rel=0.1)


def test_after_the_end(closed_form: Callable[..., Any]) -> None:
    truth = closed_form()
    log = truth.log(2)
    over = log[0] > truth.cc_s + truth.cv_s
    log[2][over] += 0.008
    reading = measured(log)
    assert reading.ended
    assert reading.last_current_A is None
    assert covers(reading.after_end_A, 0.008)
    assert reading.after_end_duration_s == pytest.approx(198.0, abs=2.0)
    assert reading.after_end_largest_A == pytest.approx(np.max(np.abs(log[2][over][1:])))


def test_a_charge_that_does_not_end_shows_its_last_current(closed_form: Callable[..., Any]) -> None:
    truth = closed_form()
    reading = measured(truth.log(2), end_s=3900.0)
    assert (reading.ended, reading.ended_s, reading.cutoff_A, reading.after_end_A) == (False, None, None, None)
    assert covers(reading.last_current_A, float(truth.current_A(np.array(3900.0))))


def test_a_charger_that_never_ends_floats(closed_form: Callable[..., Any]) -> None:
    """No termination: the current only tapers away."""
    time = np.arange(0.0, 9000.0)
    truth = closed_form(cutoff_A=1e-9)
    rng = np.random.default_rng(3)
    log = np.array([time, truth.voltage_V(time), truth.current_A(time) + 0.001 * rng.normal(size=time.size)])
    assert not measured(log).ended


def test_end_voltage_is_the_largest_second(closed_form: Callable[..., Any]) -> None:
    log = closed_form(compressed=10.0).log(5, period_s=0.1, noise_V=1e-6)
    log[1][(log[0] > 330.0) & (log[0] < 331.5)] += 0.02  # an overshoot that lasts
    log[1][3500] += 0.5  # and one sample
    reading = measured(log)
    assert reading.end_voltage_V.value == pytest.approx(4.2 + 0.5 / 10.0, abs=1e-4)
    assert reading.end_voltage_V.n == 10
    assert reading.peak_V == pytest.approx(4.7, abs=1e-4)


@pytest.mark.parametrize("period_s", [0.1, 1.0])
def test_thresholds_of_a_stepped_charge(pack: Callable[..., Any], period_s: float) -> None:
    cell = pack(empty_V=3.0, capacity_Ah=0.3, resistance_ohm=0.05, span_V=1.2, period_s=period_s)
    for current in (3.0, 1.5):
        cell.constant_current(current, 4.2)
    cell.rest(60.0)
    reading = measured(cell.log(6, noise_A=0.001, noise_V=0.0003))
    assert [p.current_A.value for p in reading.plateaus] == pytest.approx([3.0, 1.5], abs=1e-3)
    for plateau in reading.plateaus:
        assert plateau.threshold_V is not None
        assert plateau.threshold_bracket_V is not None
        # the mean over 0.5 s lags the last sample by at most half of it, and the threshold is at most one spacing away
        slope_V_per_s = 3.0 / (3600.0 * 0.3) * 1.2
        reach = slope_V_per_s * (period_s + 0.5) + 4.0 * 0.0003
        assert 4.2 - reach <= plateau.threshold_V.value <= 4.2 + 4.0 * 0.0003
        assert plateau.threshold_V.end_s - plateau.threshold_V.start_s <= 0.5
    assert reading.regulation_V is None
    assert reading.cutoff_A is not None
    assert reading.cutoff_A.value == pytest.approx(1.5, abs=0.003)


def test_plateau_before_a_held_voltage_has_no_threshold(closed_form: Callable[..., Any]) -> None:
    (plateau,) = measured(closed_form().log(7)).plateaus
    assert (plateau.threshold_V, plateau.threshold_bracket_V) == (None, None)


def test_evidence_lies_in_the_window(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(8)
    reading = measure_charge(*log, classify(*log), start_s=1000.0, end_s=4300.0)
    shown = [reading.plateaus[0].current_A, reading.regulation_V, reading.end_voltage_V, reading.cutoff_A]
    for estimate in [*shown, reading.after_end_A]:
        assert estimate is not None
        assert 1000.0 <= estimate.start_s <= estimate.end_s <= 4300.0
        assert estimate.n >= 1


def test_readings_that_are_none_are_left_out(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(9)
    log[2, 1500:1510] = np.nan
    assert measured(log).plateaus[0].current_A.value == pytest.approx(3.0, abs=1e-3)


def test_current_agreement_shows_the_difference() -> None:
    rng = np.random.default_rng(1)
    time = np.arange(0.0, 100.0, 0.5)
    noise = 0.002 * rng.normal(size=(3, time.size))
    found = current_agreement(time, 3.0 + noise[0], 4.0 + noise[1], 1.03 + noise[2], start_s=10.0, end_s=90.0)
    assert covers(found, 0.03)
    assert (found.n, found.start_s, found.end_s) == (161, 10.0, 90.0)


@pytest.mark.parametrize(
    ("call", "named"),
    [
        (lambda: current_agreement([0.0, 1.0], [1.0], [1.0, 1.0], [0.0, 0.0], start_s=0, end_s=1), r"^shunt_A: "),
        (lambda: current_agreement([0.0, 1.0], [1.0] * 2, [1.0] * 2, [0.0] * 2, start_s=5, end_s=9), r"^start_s"),
        (lambda: measured(np.zeros((3, 20)), end_s=-1.0), r"^start_s, end_s: 0 rows"),
        (lambda: trend_at(np.arange(5.0), np.ones(5), 1), r"^last, earliest: 2 samples"),
    ],
)
def test_what_cannot_be_measured_is_refused_by_name(call: Callable[[], object], named: str) -> None:
    with pytest.raises(ValueError, match=named):
        call()


@given(st.floats(0.1, 3.0), st.floats(5.0, 500.0), st.sampled_from([0.1, 1.0]))
def test_trend_of_an_exponential_is_exact(end_A: float, tau_s: float, period_s: float) -> None:
    time = np.arange(0.0, 60.0, period_s)
    current = end_A * np.exp((time[-1] - time) / tau_s)
    trend = trend_at(time, current, time.size - 1)
    assert trend.current_A.value == pytest.approx(end_A, rel=1e-9)
    assert trend.fall_per_s == pytest.approx(end_A / tau_s, rel=1e-6)


@given(st.floats(0.06, 1.0), st.integers(0, 3))
def test_end_is_found_at_the_last_full_sample(level: float, spanning: int) -> None:
    """A sample that spans the drop does not count, whatever share of it is full."""
    tail = [] if spanning == 0 else [level * (0.2 + 0.2 * spanning)]
    current = np.array([1.0] * 20 + [level] * 20 + tail + [0.0] * 20)
    assert ended_at(current) == 39


def test_end_from_a_taper_below_five_percent() -> None:
    current = np.concatenate((np.ones(20), np.exp(-np.arange(1.0, 181.0) / 50.0), np.zeros(20)))
    assert float(current[199]) == pytest.approx(math.exp(-3.6))
    assert ended_at(current) == 199


@pytest.mark.parametrize(("cutoff_A", "ended"), [(0.15, True), (0.0, False)])
def test_the_last_step_of_a_stand_in_is_no_end(pack: Callable[..., Any], cutoff_A: float, ended: bool) -> None:
    """Steps of 10 mV behind 150 mΩ move the current by 67 mA; without a cut-off the last of them reaches 0."""
    tool = pack(capacity_Ah=0.2, span_V=6.0, grid_V=0.010, charge_As=600.0)
    tool.constant_current(3.0, 21.0)
    tool.constant_voltage(21.0, max(cutoff_A, 0.01), 3.0)
    tool.rest(60.0)
    reading = measured(tool.log(1, noise_A=0.001, noise_V=0.001))
    assert reading.ended == ended
    if ended:
        assert reading.cutoff_A is not None
        assert reading.cutoff_bracket_A is not None
        assert reading.cutoff_bracket_A == pytest.approx(0.01 / 0.15, rel=0.5)
        slack = 4.0 * reading.cutoff_A.u
        assert reading.cutoff_A.value - reading.cutoff_bracket_A - slack <= cutoff_A <= reading.cutoff_A.value + slack


def test_a_fall_to_a_trickle_is_an_end() -> None:
    assert ended_at(np.array([1.0] * 20 + [0.1] * 20 + [0.01] * 20)) == 39


@pytest.mark.parametrize(
    "current",
    [
        pytest.param([1.0] * 20 + [0.0] * 5 + [1.0] * 20, id="it resumes"),
        pytest.param([1.0] * 20 + [0.5] * 20, id="a step only"),
        pytest.param(list(np.linspace(1.0, 0.0, 200)), id="it fades"),
        pytest.param([1.0] * 3, id="too short"),
    ],
)
def test_no_end_where_the_charge_goes_on(current: list[float]) -> None:
    assert ended_at(np.array(current)) is None


def test_largest_mean_at_a_spacing_of_the_span_is_one_sample() -> None:
    time = np.arange(10.0)
    found = largest_mean(time, time * 1.0, 1.0, 0.0, 9.0)
    assert (found.value, found.n, found.start_s) == (9.0, 1, 9.0)
