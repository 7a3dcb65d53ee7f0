"""The stability rule of the stand-in, against polynomial roots found by others and against a bench that is slow."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import procedures
from sequencer.engine.evidence import Evidence, Trace, open_evidence
from sequencer.engine.stability import delay_scans, gain, largest_gain, turning_points

PACKS = Path(procedures.__file__).parent / "packs"
RATIOS = st.floats(0.0, 60.0)
DELAYS = st.integers(0, 12)


def largest_root(a: float, ratio: float, delay: int) -> float:
    """Of z^(d+1) - (1-a) z^d + a ratio, by numpy's companion matrix."""
    polynomial = np.zeros(delay + 2)
    polynomial[0] = 1.0
    polynomial[1] -= 1.0 - a
    polynomial[-1] += a * ratio
    return float(np.max(np.abs(np.roots(polynomial))))


@pytest.mark.parametrize("delay", [0, 1, 2, 3, 5, 8])
@pytest.mark.parametrize("ratio", [1.0, 1.5, 3.0, 5.0, 15.0, 40.0])
def test_the_largest_gain_is_where_a_root_reaches_the_unit_circle(ratio: float, delay: int) -> None:
    most = largest_gain(ratio, delay)
    assert largest_root(0.999 * most, ratio, delay) < 1.0
    assert largest_root(1.001 * most, ratio, delay) > 1.0


@pytest.mark.parametrize("delay", [1, 2, 5])
@pytest.mark.parametrize("ratio", [0.0, 0.2, 0.6, 0.99])
def test_below_the_largest_gain_all_is_stable_for_small_ratios_too(ratio: float, delay: int) -> None:
    for share in (0.05, 0.3, 0.6, 0.9, 0.999):
        assert largest_root(share * largest_gain(ratio, delay), ratio, delay) < 1.0
    assert largest_gain(ratio, delay) >= 1.0  # the triangle inequality


@pytest.mark.parametrize(("ratio", "expected"), [(5.0, 0.131), (15.0, 0.042)])
def test_two_scans_of_delay(ratio: float, expected: float) -> None:
    """Figures of an experiment with the same polynomial, printed to three digits."""
    assert largest_gain(ratio, 2) == pytest.approx(expected, abs=5e-4)


@given(ratio=RATIOS)
def test_without_delay_in_closed_form(ratio: float) -> None:
    """a < 2/(1 + ratio): computed, |1 - a (1 + ratio)| < 1."""
    assert largest_gain(ratio, 0) == pytest.approx(2.0 / (1.0 + ratio), rel=1e-12)


@given(ratio=st.floats(1.0, 60.0), delay=st.integers(1, 12))
def test_the_bound_by_the_marginal_root_lies_on_the_safe_side(ratio: float, delay: int) -> None:
    """(2/ratio) sin(pi/(2(2d+1))), computed by z = e^(jw); exact for ratio = 1 and in the limit of large ratios."""
    bound = 2.0 / ratio * math.sin(math.pi / (2 * (2 * delay + 1)))
    assert bound <= largest_gain(ratio, delay) * (1 + 1e-9)


@pytest.mark.parametrize("delay", [1, 2, 7])
def test_the_bound_is_exact_for_large_ratios(delay: int) -> None:
    bound = 2.0 / 1e5 * math.sin(math.pi / (2 * (2 * delay + 1)))
    assert largest_gain(1e5, delay) == pytest.approx(bound, rel=1e-4)


@given(ratio=RATIOS, delay=DELAYS)
def test_the_gain_in_use_is_half_of_the_largest_and_never_above_one(ratio: float, delay: int) -> None:
    assert gain(ratio, delay) == pytest.approx(min(1.0, 0.5 * largest_gain(ratio, delay)))
    assert largest_root(gain(ratio, delay), ratio, delay) < 1.0


@given(ratio=st.floats(1.0, 60.0), more=st.floats(1.0, 3.0), delay=DELAYS)
def test_more_resistance_or_more_delay_never_allows_more_gain(ratio: float, more: float, delay: int) -> None:
    assert largest_gain(ratio * more, delay) <= largest_gain(ratio, delay) * (1 + 1e-9)
    assert largest_gain(ratio, delay + 1) <= largest_gain(ratio, delay) * (1 + 1e-9)


def test_a_virtual_resistance_below_zero_is_played_without_feedback_to_fear() -> None:
    assert gain(-0.5, 3) == gain(0.0, 3)
    with pytest.raises(ValueError, match="must not be negative"):
        largest_gain(-0.1, 0)
    with pytest.raises(ValueError, match="must not be negative"):
        largest_gain(1.0, -1)


@pytest.mark.parametrize(
    ("settling_s", "period_s", "scans"),
    [(0.015, 0.1, 0), (0.1, 0.1, 0), (0.101, 0.1, 1), (0.35, 0.1, 3), (0.8, 0.1, 7), (0.35, 1.0, 0), (0.3, 0.1, 2)],
)
def test_scans_of_delay(settling_s: float, period_s: float, scans: int) -> None:
    """A node that has settled by the next reading delays nothing; each further scan counts one."""
    assert delay_scans(settling_s, period_s) == scans


def test_turning_points_of_a_triangle_and_of_small_noise() -> None:
    assert turning_points(range(9), [0, 1, 2, 1, 0, 1, 2, 1, 0], 0.5) == [2, 4, 6]
    assert turning_points(range(5), [0, 1, 2, 3, 4], 0.5) == []
    assert turning_points(range(6), [0, 0.4, 0, 0.4, 0, 0.4], 0.5) == []
    assert turning_points([], [], 0.5) == []


@given(st.integers(2, 9), st.floats(0.6, 50.0))
def test_a_sine_turns_twice_a_period(periods: int, height: float) -> None:
    t_s = np.linspace(0.0, periods, 60 * periods)
    assert len(turning_points(t_s, height * np.sin(2 * np.pi * t_s), 0.5)) == 2 * periods


# The bench that is slow: 200 ms from command to reaction, then 150 ms of settling, ten scans a second.

SLOW = {"node: {delay: 5 ms, settling: 10 ms}": "node: {delay: 200 ms, settling: 150 ms}"}
SMALLEST_MOVE_V = 0.5e-3  # the supply is not moved by less


@pytest.fixture
def large_pack(tmp_path: Path) -> str:
    """A pack of 600 mΩ: Rv is four times Rp. (For Rv < Rp no gain up to 1 swings, whatever the delay.)"""
    text = (PACKS / "sprayer.yaml").read_text("utf-8")
    assert "180 mΩ" in text
    path = tmp_path / "large.yaml"
    path.write_text(text.replace("180 mΩ", "600 mΩ"), "utf-8")
    return str(path)


def taper_of(evidence: Evidence, plateau_A: float) -> Trace:
    """The current from 95 % to 10 % of the plateau, first passage to last."""
    current = evidence.trace("charger.current")
    below = current.time_s[(current.value < 0.95 * plateau_A) & (current.time_s > 12.0)]
    above = current.time_s[current.value > 0.11 * plateau_A]
    return current.within(float(below[0]), float(above[-1]))


@pytest.mark.parametrize(("large", "options"), [(False, {}), (True, {}), (True, {"always_fast": True})])
def test_a_slow_supply_does_not_swing(
    rehearse: Callable[..., Any], large_pack: str, large: bool, options: dict[str, bool]
) -> None:
    pack = {"pack": large_pack, "changes": {"start": "3.75 V"}} if large else {}
    done = rehearse(bench=SLOW, **pack, **options)
    evidence = open_evidence(done.record)
    standin = evidence.manifest["standin"]
    assert standin["settling_s"] >= 0.35
    assert standin["delay_scans"] >= 3
    assert set(done.verdicts.values()) <= {"pass", "not applicable"}
    assert done.verdicts["charge.voltage"] == "pass"
    assert done.judged.document["overall"] == "pass"
    rises_A = np.diff(taper_of(evidence, 3.0).value)
    # a rise of two of the supply's smallest moves, and nothing larger: 8 mA of 3 A
    assert float(np.max(rises_A)) < 2 * SMALLEST_MOVE_V / standin["Rp_ohm"] + 1e-3


def test_with_the_rule_for_no_delay_the_same_charger_swings(rehearse: Callable[..., Any], large_pack: str) -> None:
    done = rehearse(bench=SLOW, pack=large_pack, changes={"start": "3.75 V"}, forced_delay=0, always_fast=True)
    evidence = open_evidence(done.record)
    assert evidence.manifest["standin"]["gain"] > largest_gain(4.0, 4)  # settled within 0.5 s at the best
    current = taper_of(evidence, 3.0)
    current = current.within(float(current.time_s[0]), float(current.time_s[0]) + 100.0)
    turns = turning_points(current.time_s, current.value, 0.3)  # a tenth of the plateau, a hundred times the noise
    print(f"swings of more than 10 % of the plateau: {len(turns)} turns in 100 s, {np.ptp(current.value):.2f} A")
    assert len(turns) > 50
    assert np.ptp(current.value) > 0.5 * 3.0
    # and what the bench did is never held against the charger
    assert not done.failing
    assert done.verdicts["charge.voltage"] == "inconclusive"
    assert "swung" in done.verdict("charge.voltage")["why"]
    assert done.judged.exit_status == 4
