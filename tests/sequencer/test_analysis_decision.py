"""Decisions against ILAC-G8:09/2019 and JCGM 106:2012."""

import math

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from sequencer.analysis.decision import (
    WORST_FIRST,
    Decision,
    decide,
    decide_class,
    decide_screening,
    decide_state,
    exit_status,
    overall,
    probability_of_conformity,
)  # fmt: skip

VALUES = st.floats(-100.0, 100.0)
SIZES = st.floats(1e-3, 10.0)


def badness(decision: Decision) -> int:
    return len(WORST_FIRST) - WORST_FIRST.index(decision.verdict)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("y", "verdict"),
    [  # ILAC-G8:09/2019 4.2.3 with TU = 4.25 V, U = w = 4 mV: y <= TU - w, <= TU, <= TU + w, above
        (4.246, "pass"), (4.2461, "conditional pass"), (4.250, "conditional pass"),
        (4.2501, "conditional fail"), (4.254, "conditional fail"), (4.2541, "fail"),
    ],
)  # fmt: skip
def test_ilac_zones_upper_limit(y: float, verdict: str) -> None:
    assert decide(y, 0.002, 2.0, None, 4.25, "guarded").verdict == verdict


@pytest.mark.parametrize(
    ("y", "verdict"),
    [(4.104, "pass"), (4.1039, "conditional pass"), (4.100, "conditional pass"), (4.0999, "conditional fail"),
     (4.096, "conditional fail"), (4.0959, "fail")],
)  # fmt: skip
def test_ilac_zones_lower_limit(y: float, verdict: str) -> None:
    assert decide(y, 0.002, 2.0, 4.10, None, "guarded").verdict == verdict


@pytest.mark.parametrize(("y", "verdict"), [(4.25, "pass"), (4.2500001, "fail")])
def test_simple_acceptance(y: float, verdict: str) -> None:
    decision = decide(y, 0.002, 2.0, 4.0, 4.25, "simple")  # ILAC-G8:09/2019 4.2.1, w = 0
    assert (decision.verdict, decision.guard_band) == (verdict, 0.0)


@pytest.mark.parametrize(
    ("r", "risk", "tolerance"),
    [  # w = r U, U = 2 u: ILAC-G8:09/2019 table of risks; ISO 14253-1 for 0.83
        (0.0, 0.5, 1e-5), (0.83, 0.04846, 1e-5), (1.0, 0.02275, 1e-5), (1.5, 0.00135, 1e-5), (3.0, 9.87e-10, 1e-12),
    ],
)  # fmt: skip
def test_false_accept_risk_at_the_acceptance_limit(r: float, risk: float, tolerance: float) -> None:
    high, u = 10.0, 0.25
    p_conform = decide(high - r * 2.0 * u, u, 2.0, None, high, "guarded").p_conform
    assert p_conform is not None
    assert 1.0 - p_conform == pytest.approx(risk, abs=tolerance)


def test_probability_of_conformity_two_sided() -> None:
    assert probability_of_conformity(13.6, 1.8, 12.5, 16.3) == pytest.approx(0.6626, abs=1e-4)  # JCGM 106 7.4


@pytest.mark.parametrize(
    ("y", "u", "low", "high", "p"),
    [(-5.47, 0.05, None, -5.40, 0.919), (509.7, 8.6, 490.0, None, 0.989)],  # JCGM 106 7.5, from memory
)
def test_probability_of_conformity_one_sided(y: float, u: float, low: float, high: float, p: float) -> None:
    assert probability_of_conformity(y, u, low, high) == pytest.approx(p, abs=5e-4)


def test_probability_keeps_its_digits_far_outside() -> None:
    p = probability_of_conformity(12.0, 1.0, 0.0, 4.0)
    assert p == pytest.approx(0.5 * math.erfc(8.0 / math.sqrt(2.0)), rel=1e-9)


def test_reason_reads_like_a_laboratory() -> None:
    assert decide(4.2031, 0.0019, 2.0, 4.0, 4.2050, "guarded", unit="V").why == (
        "4.2031 V is 1.9 mV above the acceptance limit 4.2012 V (upper limit 4.2050 V less guard band 3.8 mV)"
    )


@pytest.mark.parametrize(
    ("y", "start"),
    [
        (2.95, "2.950 A is 12 mA below the acceptance limit 2.962 A (lower limit 2.900 A plus guard band 62 mA)"),
        (2.89, "2.890 A is 10 mA below the lower limit 2.900 A"),
        (2.80, "2.800 A is 38 mA below the rejection limit 2.838 A (lower limit 2.900 A less guard band 62 mA)"),
        (3.00, "3.000 A is 38 mA above the acceptance limit 2.962 A"),
    ],
)
def test_reason_for_each_zone(y: float, start: str) -> None:
    assert decide(y, 0.031, 2.0, 2.9, None, "guarded", unit="A").why.startswith(start)


def test_guard_bands_that_leave_no_room_are_said() -> None:
    decision = decide(4.1, 0.06, 2.0, 4.0, 4.2, "guarded", unit="V")
    assert decision.verdict == "conditional pass"
    assert "no value could pass" in decision.why


@given(VALUES, VALUES, SIZES, VALUES)
def test_monotone_in_the_value(a: float, b: float, u: float, high: float) -> None:
    lower, upper = sorted((a, b))
    verdicts = [decide(y, u, 2.0, None, high, "guarded") for y in (lower, upper)]
    assert badness(verdicts[0]) <= badness(verdicts[1])


@given(VALUES, SIZES, VALUES, SIZES)
def test_symmetric(offset: float, u: float, middle: float, half: float) -> None:
    """Integers in 1/64 keep the arithmetic exact, so that both sides of a boundary are the same number."""
    offset, u, middle, half = (round(64 * x) / 64 for x in (offset, u + 0.1, middle, half + 0.1))
    above = decide(middle + offset, u, 2.0, middle - half, middle + half, "guarded")
    below = decide(middle - offset, u, 2.0, middle - half, middle + half, "guarded")
    assert above.verdict == below.verdict
    assert above.p_conform == pytest.approx(below.p_conform, abs=1e-12)


@given(VALUES, SIZES, st.floats(0.0, 1.0), VALUES, SIZES)
def test_smaller_uncertainty_only_makes_it_clearer(y: float, u: float, share: float, low: float, width: float) -> None:
    """Inside the limits a smaller u never makes the verdict worse, outside never better."""
    high = low + width
    assume(min(abs(y - low), abs(y - high)) > 1e-6)
    before = decide(y, u, 2.0, low, high, "guarded")
    after = decide(y, u * share, 2.0, low, high, "guarded")
    if low <= y <= high:
        assert badness(after) <= badness(before)
        assert after.verdict in ("pass", "conditional pass")
    else:
        assert badness(after) >= badness(before)
        assert after.verdict in ("fail", "conditional fail")


@given(VALUES, SIZES, VALUES, SIZES)
def test_rules_agree_on_the_side_of_the_limit(y: float, u: float, low: float, width: float) -> None:
    simple = decide(y, u, 2.0, low, low + width, "simple").verdict
    guarded = decide(y, u, 2.0, low, low + width, "guarded").verdict
    assert (simple == "pass") == (guarded in ("pass", "conditional pass"))


@given(VALUES, SIZES, VALUES, SIZES)
def test_probability_is_a_probability(y: float, u: float, low: float, width: float) -> None:
    both = probability_of_conformity(y, u, low, low + width)
    assert 0.0 <= both <= 1.0
    assert both <= probability_of_conformity(y, u, low, None) + 1e-12


@pytest.mark.parametrize("name", ["value", "u", "k", "low", "high"])
@pytest.mark.parametrize("bad", [math.nan, math.inf])
def test_numbers_that_are_none_are_refused_by_name(name: str, bad: float) -> None:
    arguments = {"value": 1.0, "u": 0.1, "k": 2.0, "low": 0.0, "high": 2.0} | {name: bad}
    with pytest.raises(ValueError, match=f"^{name}: "):
        decide(**arguments, rule="guarded")  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("change", "named"),
    [({"u": -0.1}, "u"), ({"k": 0.0}, "k"), ({"low": None, "high": None}, "low, high"), ({"low": 3.0}, "low"),
     ({"rule": "kind"}, "rule")],
)  # fmt: skip
def test_impossible_limits_are_refused_by_name(change: dict[str, object], named: str) -> None:
    arguments = {"value": 1.0, "u": 0.1, "k": 2.0, "low": 0.0, "high": 2.0, "rule": "simple"} | change
    with pytest.raises(ValueError, match=f"^{named}: "):
        decide(**arguments)  # type: ignore[arg-type]


def test_states() -> None:
    assert decide_state("ended", "ended").verdict == "pass"
    assert decide_state(None, "ended").verdict == "inconclusive"
    wrong = decide_state(False, True, what="charges with a nominal pack")
    assert (wrong.verdict, wrong.why) == ("fail", "charges with a nominal pack: no; declared is yes")


@pytest.mark.parametrize(
    ("seen", "probability", "verdict"),
    [("cc-cv", 0.95, "pass"), ("cc-cv", 0.89, "inconclusive"), ("stepped-cc", 0.95, "fail"),
     ("stepped-cc", 0.5, "inconclusive"), ("inconclusive", 0.99, "inconclusive")],
)  # fmt: skip
def test_classes(seen: str, probability: float, verdict: str) -> None:
    assert decide_class(seen, probability, "cc-cv").verdict == verdict


def test_class_without_probability_is_refused() -> None:
    with pytest.raises(ValueError, match=r"^probability: "):
        decide_class("cc-cv", 1.2, "cc-cv")


@pytest.mark.parametrize(
    ("verdicts", "left_out", "worst", "status"),
    [  # the first that applies: 1 a fail, 4 not judged, 5 a conditional pass, 0 every verdict pass
        (["pass", "pass"], 0, "pass", 0),
        (["pass", "conditional pass"], 0, "conditional pass", 5),
        (["conditional pass", "not run"], 0, "not run", 4),
        (["conditional pass", "not run"], 1, "not run", 5),
        (["pass", "not run"], 1, "not run", 0),
        (["not run"], 1, "not run", 4),
        (["not applicable"], 0, "not run", 4),
        ([], 0, "not run", 4),
        (["inconclusive", "pass"], 0, "inconclusive", 4),
        (["inconclusive", "conditional fail"], 0, "conditional fail", 1),
        (["conditional fail", "fail", "pass"], 0, "fail", 1),
    ],
)
def test_what_a_run_comes_to(verdicts: list[str], left_out: int, worst: str, status: int) -> None:
    assert overall(verdicts) == worst
    assert exit_status(verdicts, left_out=left_out) == status


def test_unknown_word_is_refused() -> None:
    with pytest.raises(ValueError, match="'passed' is no verdict"):
        overall(["passed"])
    with pytest.raises(ValueError, match=r"^left_out: "):
        exit_status(["pass"], left_out=1)


@pytest.mark.parametrize(
    ("found", "detectable", "most", "verdict", "words"),
    [
        (None, 2e-6, 1e-3, "pass", "none found above 2.0 µA; declared is none above 1 mA"),
        (None, 2e-3, 1e-3, "inconclusive", "none found above 2.0 mA; 1 mA would not have been seen"),
        ((3e-4, 1e-5, 2.0), 2e-6, 1e-3, "pass", "below the acceptance limit"),
        ((9.9e-4, 1e-5, 2.0), 2e-6, 1e-3, "conditional pass", ""),
        ((4e-3, 1e-5, 2.0), 2e-6, 1e-3, "fail", ""),
        ((4e-3, 1e-5, 2.0), 2e-6, None, "pass", "found, as declared"),
        (None, 2e-6, None, "fail", "none found above 2.0 µA; declared is that it is there"),
        (None, 4e-3, None, "inconclusive", "3.2 mA would not have been seen"),
    ],
)
def test_screenings(
    found: tuple[float, float, float] | None, detectable: float, most: float | None, verdict: str, words: str
) -> None:
    """What would not have been seen is never a pass, and what is there is held against what is declared."""
    decision = decide_screening(found, detectable, most, 3.2e-3, "guarded", "A")
    assert decision.verdict == verdict
    assert words in decision.why
