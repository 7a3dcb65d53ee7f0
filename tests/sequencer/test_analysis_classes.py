"""What one insertion showed. The defaults are those of the findings' table; the traces are made up here."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.classes import Seen, class_of, nearest_band

DECLARED = ((1.425, 1.575), (2.85, 3.15))  # 1.5 A and 3.0 A, ± 5 %


def trace(
    *parts: tuple[float, float], period_s: float = 0.1, noise_A: float = 1e-3, seed: int = 1
) -> tuple[np.ndarray, np.ndarray]:
    """Parts of (duration in s, current in A) one after the other."""
    levels = np.concatenate([np.full(round(duration / period_s), level) for duration, level in parts])
    times = period_s * np.arange(levels.size)
    return times, levels + noise_A * np.random.default_rng(seed).normal(size=levels.size)


def seen(*parts: tuple[float, float], declared: tuple[tuple[float, float], ...] = DECLARED, **options: float) -> Seen:
    return class_of(*trace(*parts, **options), declared_A=declared)


@pytest.mark.parametrize(
    ("parts", "band", "label"),
    [
        ([(2.0, 0.0), (5.0, 3.0)], 1, "charges, band 2"),
        ([(2.0, 0.0), (5.0, 1.5)], 0, "charges, band 1"),
        ([(2.0, 0.0), (5.0, 3.3)], 1, "charges, band 2"),  # beyond its limits, and still nobody else's
        ([(2.0, 0.0), (5.0, 2.2)], None, "charges at no declared current"),
        ([(2.0, 0.0), (5.0, 9.0)], None, "charges at no declared current"),
        ([(2.0, 0.0), (1.0, 0.3), (5.0, 3.0)], 1, "charges, band 2"),  # a small current first, then the full one
        ([(1.0, 0.0), (1.0, 3.0), (1.0, 0.0), (5.0, 3.0)], 1, "charges, band 2"),  # one test pulse at the start
    ],
)
def test_charges(parts: list[tuple[float, float]], band: int | None, label: str) -> None:
    found = seen(*parts)
    assert (found.kind, found.band, found.label, found.flows) == ("charges", band, label, True)
    assert found.current is not None
    assert found.current.value == pytest.approx(parts[-1][1], abs=2e-3)
    assert found.current.end_s - found.current.start_s == pytest.approx(2.0, abs=0.11)


def test_words_say_what_a_person_would_ask_next() -> None:
    assert seen((2.0, 0.0), (5.0, 3.0)).words == "charges: 3.000 A, current 2 of 2"
    assert seen((2.0, 0.0), (5.0, 3.3)).words == "charges: 3.300 A, current 2 of 2, outside its limits"
    assert seen((2.0, 0.0), (5.0, 2.2)).words == "charges: 2.200 A, which is no declared current"
    assert "after a pulse at the start" in seen((1.0, 0.0), (1.0, 3.0), (1.0, 0.0), (5.0, 3.0)).words
    assert seen((20.0, 0.0)).words.startswith("no charge: mean ")


def test_no_charge_needs_its_time() -> None:
    assert seen((15.1, 0.0)).kind == "no charge"
    short = seen((8.0, 0.0))
    assert (short.kind, short.flows) == ("undecided", False)
    assert short.words == "no current in 7.9 s; 15.0 s must be watched before it is no charge"
    longer = class_of(*trace((20.0, 0.0)), declared_A=DECLARED, watched_s=24.0)  # start delay of 8 s
    assert longer.kind == "undecided"


@pytest.mark.parametrize(
    ("level_A", "kind", "flows"),
    [
        (0.009, "no charge", False), (-0.009, "no charge", False), (0.012, "undecided", True),
        (0.3, "undecided", True), (-0.012, "undecided", False), (-0.3, "undecided", False),
        (0.70, "undecided", True), (0.73, "charges", True),  # half of the lowest declared current is 0.7125 A
    ],
)  # fmt: skip
def test_between_no_charge_and_charging_nothing_is_claimed(level_A: float, kind: str, flows: bool) -> None:
    found = seen((20.0, level_A))
    assert (found.kind, found.flows) == (kind, flows)


def test_a_current_too_small_to_be_charging_is_still_a_current() -> None:
    words = seen((20.0, 0.3), noise_A=0.0).words
    assert words == "300 mA flows: too much for no charge, not above the 712 mA of charging"


@pytest.mark.parametrize(
    "parts",
    [
        [(5.0, 0.0), (0.1, 0.06), (15.0, 0.0)],  # a single reading above 50 mA
        [(2.0, 0.0), (6.0, 3.0), (12.0, 0.0)],  # charged, then stopped
        [(0.5, 0.0), *([(0.5, 3.0), (0.5, 0.0)] * 15)],
        [(0.5, 0.0), *([(0.5, 0.0), (0.5, 3.0)] * 15)],  # the same, watched until it is on
        [(1.0, 0.0), *([(3.0, 3.0), (1.0, 0.0)] * 4), (3.0, 3.0)],  # pulses longer than the plateau
    ],
)
def test_what_came_and_went_is_neither_charge_nor_its_absence(parts: list[tuple[float, float]]) -> None:
    found = seen(*parts)
    assert (found.kind, found.band, found.flows) == ("pulses", None, True)


def test_pulses_are_counted() -> None:
    assert "15 pulses up to 3.0" in seen((0.5, 0.0), *([(0.5, 3.0), (0.5, 0.0)] * 15), noise_A=0.0).words
    assert seen((2.0, 0.0), (6.0, 3.0), (12.0, 0.0), noise_A=0.0).words == "one pulse up to 3.000 A, 6.0 s in all"


def test_a_current_that_still_moves_has_not_settled() -> None:
    times = 0.1 * np.arange(60)
    found = class_of(times, np.minimum(3.0, 0.5 * times), declared_A=DECLARED)
    assert (found.kind, found.flows) == ("undecided", True)
    assert "has not settled" in found.words
    taper = class_of(times, 3.0 * np.exp(-times / 450.0), declared_A=DECLARED)  # a taper of a usual pack is settled
    assert taper.kind == "charges"


def test_slow_readings_are_enough_when_there_are_three() -> None:
    assert seen((3.0, 0.0), (5.0, 3.0), period_s=1.0).kind == "charges"
    few = class_of([0.0, 1.0], [3.0, 3.0], declared_A=DECLARED)
    assert (few.kind, few.current) == ("undecided", None)
    assert few.words == "2 readings; 3 are needed"


def test_without_a_declared_current_what_is_more_than_a_pulse_is_charging() -> None:
    assert seen((20.0, 0.08), declared=()).kind == "charges"
    assert seen((20.0, 0.03), declared=()).kind == "undecided"


@pytest.mark.parametrize(
    ("times", "current", "declared", "words"),
    [
        ([0.0, 1.0], [0.0], DECLARED, "two rows of one length"),
        ([0.0, 1.0, 2.0], [0.0, np.nan, 0.0], DECLARED, "finite readings"),
        ([0.0, 1.0, 1.0], [0.0, 0.0, 0.0], DECLARED, "times that rise"),
        ([0.0, 1.0, 2.0], [0.0, 0.0, 0.0], ((2.0, 1.0),), r"declared_A: expected 0 < low <= high, got \(2.0, 1.0\)"),
    ],
)
def test_what_does_not_fit_is_refused(times: list[float], current: list[float], declared: object, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        class_of(times, current, declared_A=declared)  # type: ignore[arg-type]


@given(
    level_A=st.floats(-5.0, 5.0), seconds=st.floats(1.0, 40.0), noise_A=st.floats(0.0, 2e-3), seed=st.integers(0, 99)
)
def test_a_steady_current_is_never_called_by_a_wrong_name(
    level_A: float, seconds: float, noise_A: float, seed: int
) -> None:
    found = seen((seconds, level_A), noise_A=noise_A, seed=seed)
    if found.kind == "no charge":
        assert abs(level_A) < 0.012
        assert seconds >= 14.9
    elif found.kind == "charges":
        assert level_A > 0.70
    if abs(level_A) > 0.06:  # a steady current, with noise of 2 mA, is no pulse
        assert found.kind != "pulses"
        assert found.flows == (level_A > 0.0 and seconds >= 0.3)


def test_bands_that_touch_or_share_a_current() -> None:
    assert nearest_band(1.5, DECLARED) == 0
    assert nearest_band(2.04, ((1.9, 2.1), (2.0, 2.2))) == 0
    assert nearest_band(2.08, ((1.9, 2.1), (2.0, 2.2))) == 1
    assert nearest_band(2.0, ((1.9, 2.1), (1.9, 2.1))) == 0
    assert nearest_band(3.15 * 1.19, DECLARED) == 1
    assert nearest_band(3.15 * 1.21, DECLARED) is None
    assert nearest_band(2.0, ()) is None
