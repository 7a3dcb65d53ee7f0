"""Intervals against limits: the zones of ILAC-G8:09/2019 4.2.3 with a bracket between the readings."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.decision import WORST_FIRST, Decision, Rule, decide, probability_of_conformity
from sequencer.analysis.intervals import Trip, decide_interval, probability_over, telling_sizes

VALUES = st.floats(-100.0, 100.0).map(lambda value: round(value, 6))  # as instruments give them: with a last digit
SIZES = st.floats(1e-3, 10.0)
RULES = st.sampled_from(["guarded", "simple"])


def badness(decision: Decision) -> int:
    return len(WORST_FIRST) - WORST_FIRST.index(decision.verdict)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("low", "high", "verdict"),
    [  # upper limit 4.28 V, U = w = 4 mV (ILAC-G8:09/2019 4.2.3), bracket 10 mV: the boundaries are computed
        (4.266, 4.276, "pass"),  # high on the acceptance limit 4.276 V
        (4.267, 4.277, "conditional pass"),
        (4.270, 4.280, "conditional pass"),
        (4.2749, 4.2849, "conditional pass"),  # across the limit, its middle inside
        (4.2751, 4.2851, "conditional fail"),
        (4.281, 4.291, "conditional fail"),
        (4.284, 4.294, "conditional fail"),  # low on the rejection limit 4.284 V
        (4.285, 4.295, "fail"),
    ],
)
def test_zones_of_an_upper_limit(low: float, high: float, verdict: str) -> None:
    decision = decide_interval(low, high, 0.002, 2.0, None, 4.28, "guarded", "V")
    assert (decision.verdict, decision.guard_band) == (verdict, 0.004)
    mirrored = decide_interval(-high, -low, 0.002, 2.0, -4.28, None, "guarded", "V")
    assert mirrored.verdict == verdict
    assert mirrored.p_conform == pytest.approx(decision.p_conform)


@pytest.mark.parametrize(
    ("low", "high", "verdict"),
    [(4.270, 4.280, "pass"), (4.274, 4.284, "conditional pass"), (4.276, 4.286, "conditional fail"),
     (4.281, 4.291, "fail")],
)  # fmt: skip
def test_simple_acceptance_decides_what_lies_on_one_side(low: float, high: float, verdict: str) -> None:
    decision = decide_interval(low, high, 0.002, 2.0, None, 4.28, "simple", "V")
    assert (decision.verdict, decision.guard_band) == (verdict, 0.0)


def test_the_worse_of_two_limits_holds() -> None:
    assert decide_interval(0.9, 1.1, 0.01, 2.0, 0.8, 1.2, "guarded").verdict == "pass"
    assert decide_interval(0.81, 1.1, 0.01, 2.0, 0.8, 1.2, "guarded").verdict == "conditional pass"
    assert decide_interval(0.6, 0.7, 0.01, 2.0, 0.8, 1.2, "guarded").verdict == "fail"
    assert decide_interval(0.6, 1.4, 0.01, 2.0, 0.8, 1.2, "guarded").verdict == "conditional pass"  # never a pass


@pytest.mark.parametrize(
    ("low", "high", "rule", "words"),
    [
        (4.26, 4.27, "guarded",
         "the whole interval 4.2600 V to 4.2700 V lies inside the limits 4.2000 V to 4.2800 V by the guard band of "
         "4.0 mV and more"),
        (4.29, 4.30, "simple", "the whole interval 4.290 V to 4.300 V lies outside the limits 4.200 V to 4.280 V"),
        (4.274, 4.284, "guarded",
         "the interval 4.2740 V to 4.2840 V lies across a limit or within a guard band of it; its middle lies inside "
         "the limits 4.2000 V to 4.2800 V"),
    ],
)  # fmt: skip
def test_the_sentence_says_what_was_found(low: float, high: float, rule: Rule, words: str) -> None:
    assert decide_interval(low, high, 0.002, 2.0, 4.20, 4.28, rule, "V").why == words


@given(value=VALUES, u=SIZES, k=st.floats(1.0, 4.0), low=VALUES, width=SIZES, rule=RULES)
def test_no_width_is_a_value(value: float, u: float, k: float, low: float, width: float, rule: Rule) -> None:
    expected = decide(value, u, k, low, low + width, rule, unit="V")
    assert decide_interval(value, value, u, k, low, low + width, rule, "V") == expected


@given(low=VALUES, width=SIZES, u=SIZES, limit=VALUES, step=SIZES, rule=RULES)
def test_further_out_is_never_better(low: float, width: float, u: float, limit: float, step: float, rule: Rule) -> None:
    here = decide_interval(low, low + width, u, 2.0, None, limit, rule)
    there = decide_interval(low + step, low + step + width, u, 2.0, None, limit, rule)
    assert badness(there) >= badness(here)
    assert (there.p_conform or 0.0) <= (here.p_conform or 0.0) + 1e-9


@given(low=VALUES, width=SIZES, wider=SIZES, u=SIZES, limit=VALUES, rule=RULES)
def test_a_wider_interval_is_never_surer(
    low: float, width: float, wider: float, u: float, limit: float, rule: Rule
) -> None:
    narrow = decide_interval(low, low + width, u, 2.0, None, limit, rule).verdict
    wide = decide_interval(low - wider, low + width + wider, u, 2.0, None, limit, rule).verdict
    assert wide != "pass" or narrow == "pass"
    assert wide != "fail" or narrow == "fail"


@given(low=VALUES, width=SIZES, u=SIZES, share=st.floats(0.0, 1.0), limit_low=VALUES, span=SIZES, rule=RULES)
def test_a_pass_or_a_fail_is_one_for_every_value_inside(
    low: float, width: float, u: float, share: float, limit_low: float, span: float, rule: Rule
) -> None:
    whole = decide_interval(low, low + width, u, 2.0, limit_low, limit_low + span, rule).verdict
    inside = decide(min(low + share * width, low + width), u, 2.0, limit_low, limit_low + span, rule).verdict
    if whole == "pass":
        assert inside == "pass"
    if whole == "fail":
        assert inside in ("fail", "conditional fail")


@pytest.mark.parametrize(
    ("low", "high", "u", "limit_low", "limit_high"),
    [(0.9, 1.3, 0.05, 0.8, 1.2), (1.19, 1.21, 0.05, None, 1.2), (0.7, 0.9, 0.02, 0.8, None), (0.0, 2.0, 0.3, 0.8, 1.2)],
)
def test_probability_by_monte_carlo(
    low: float, high: float, u: float, limit_low: float | None, limit_high: float | None
) -> None:
    rng = np.random.default_rng(20260101)  # JCGM 101:2008, propagation of distributions
    true = rng.uniform(low, high, 400_000) + u * rng.standard_normal(400_000)
    inside = np.mean((true >= (-math.inf if limit_low is None else limit_low)) & (true <= (limit_high or math.inf)))
    assert probability_over(low, high, u, limit_low, limit_high) == pytest.approx(float(inside), abs=3e-3)


@given(low=VALUES, width=st.floats(1e-5, 1e-3), u=SIZES, limit=VALUES)
def test_probability_of_a_narrow_interval_is_that_of_a_value(low: float, width: float, u: float, limit: float) -> None:
    narrow = probability_over(low, low + width, u, None, limit)
    assert narrow == pytest.approx(
        probability_of_conformity(low + width / 2, u, None, limit), abs=2e-2 * width / u + 1e-7
    )


def test_probability_without_uncertainty_is_a_share() -> None:
    assert probability_over(0.0, 4.0, 0.0, None, 1.0) == 0.25
    assert probability_over(0.0, 4.0, 0.0, 1.0, 2.0) == 0.25
    assert probability_over(1.0, 1.0, 0.0, None, 1.0) == 1.0
    assert probability_over(2.0, 4.0, 0.0, None, 1.0) == 0.0


@given(
    width=SIZES, u=SIZES, share=st.floats(0.0, 1.0), error=st.floats(-1.0, 1.0), distance=st.floats(1e-6, 50.0),
    rule=RULES,
)  # fmt: skip
def test_sizes_that_a_trip_can_tell(
    width: float, u: float, share: float, error: float, distance: float, rule: Rule
) -> None:
    """The edge lies `distance` beyond its limit, anywhere in its bracket; the settings are wrong by up to U."""
    low = distance - share * width + error * 2.0 * u
    verdict = decide_interval(low, low + width, u, 2.0, None, 0.0, rule).verdict
    sizes = telling_sizes(width, u, 2.0, rule)
    rounding = 1e-9 * (1.0 + distance + width + u)
    if distance > sizes.passes_up_to + rounding:
        assert verdict != "pass"
    if distance > sizes.fails_from + rounding:
        assert verdict == "fail"


@pytest.mark.parametrize("beyond", [0.25, 0.5, 1.0])
def test_a_size_of_half_the_uncertainty_does_not_pass_as_certain(beyond: float) -> None:
    u, k, limit_V, step_V = 0.002, 2.0, 4.28, 0.010
    for share in (0.0, 0.3, 0.5, 0.7, 1.0):
        edge_V = limit_V + beyond * k * u
        trip = Trip(edge_V - share * step_V, edge_V + (1.0 - share) * step_V, "V")
        decision = trip.decide(u, k, 4.20, limit_V, "guarded")
        assert decision.verdict in ("conditional pass", "conditional fail")
        assert decision.p_conform is not None
        assert 0.0 < decision.p_conform < 1.0


def test_a_trip_in_words() -> None:
    trip = Trip(4.23, 4.24, "V")
    assert trip.words == "still charging at 4.230 V, stopped at 4.240 V"
    assert (trip.low, trip.high) == (4.23, 4.24)
    assert trip.sizes(0.002, 2.0, "guarded").words("V") == (
        "an edge beyond its limit never passes; it fails for certain from 18 mV beyond it"
    )
    assert trip.sizes(0.002, 2.0, "simple").words("V") == (
        "an edge up to 4.0 mV beyond its limit may pass; it fails for certain from 14 mV beyond it"
    )
    cold = Trip(3.2, 3.0, "°C")  # downward: the last that charged lies above
    assert (cold.low, cold.high) == (3.0, 3.2)
    assert cold.decide(0.05, 2.0, 1.0, 5.0, "guarded").verdict == "pass"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((2.0, 1.0, 0.1, 2.0, None, 3.0), "low: expected an end not above high"),
        ((1.0, 2.0, -0.1, 2.0, None, 3.0), "u: expected"),
        ((1.0, 2.0, 0.1, 0.0, None, 3.0), "k: expected"),
        ((1.0, 2.0, 0.1, 2.0, None, None), "limit_low, limit_high: expected at least one"),
        ((1.0, 2.0, 0.1, 2.0, 4.0, 3.0), "limit_low: expected a limit not above limit_high"),
        ((math.nan, 2.0, 0.1, 2.0, None, 3.0), "low: expected a finite number"),
        ((1.0, 2.0, 0.1, 2.0, None, math.inf), "limit_high: expected a finite number"),
    ],
)
def test_what_cannot_be_decided_is_refused(arguments: tuple[float, ...], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        decide_interval(*arguments, "guarded")  # type: ignore[call-arg, arg-type]
    with pytest.raises(ValueError, match="width"):
        telling_sizes(-1.0, 0.1, 2.0, "guarded")


def test_one_sided_limits_are_said_as_sides() -> None:
    """ "Inside the upper limit" is no English for an interval that lies below it."""
    for low, high, words in (
        (None, 900.0, "lies below the upper limit 900"),
        (700.0, None, "lies above the lower limit 700"),
        (700.0, 900.0, "lies inside the limits 700"),
        (None, 790.0, "lies above the upper limit 790"),
    ):
        assert words in decide_interval(800.0, 810.0, 1.0, 2.0, low, high, "guarded", unit="Ω").why
