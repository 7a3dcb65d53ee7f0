"""What a charger did with a discharged pack, read from synthetic currents whose truth is known."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.analysis.low_start import pulses_in, response_of

FULL_A = 1.4


def seen(*parts: tuple[float, float], lasts_s: float = 15.5, noise_A: float = 0.002):  # type: ignore[no-untyped-def]
    """Readings at 10 Hz; parts: (from_s, A), each until the next one."""
    times = np.arange(0.0, lasts_s, 0.1)
    current = np.zeros_like(times)
    for start_s, level_A in parts:
        current[times >= start_s - 1e-9] = level_A
    current += noise_A * np.random.default_rng(1).normal(size=times.size)
    return response_of(times, current, full_A=FULL_A, watched_s=15.0)


PROBES = [(2.0, 0.2), (2.4, 0.0), (3.9, 0.2), (4.3, 0.0)]


@pytest.mark.parametrize(
    ("parts", "kind", "pulses"),
    [
        ([], "refuses", 0),
        (PROBES, "probes and refuses", 2),
        ([(2.0, 3.0), (2.2, 0.0)], "probes and refuses", 1),  # a short pulse of full current is a probe
        ([(2.0, 0.25)], "precharges", 0),
        ([*PROBES, (6.0, 0.25)], "precharges", 2),
        ([(2.0, 0.03)], "precharges", 0),  # a small one is one too
        ([(2.0, 3.0)], "full current", 0),
        ([(2.0, 0.25), (5.0, 3.0)], "full current", 0),  # the pack stood where it was: time alone raised the current
        ([(2.0, 3.0), (4.0, 0.25)], "full current", 0),  # two seconds of it are two too many
        ([(2.0, 0.25), (8.0, 0.0)], "undecided", 1),  # a precharge that was given up, or a long probe
        ([(2.0, 0.25), (14.0, 0.5)], "undecided", 0),
        ([(14.9, 0.2), (15.3, 0.0)], "undecided", 1),  # still probing when the watching ends
    ],
)
def test_the_class_of_a_start(parts: list[tuple[float, float]], kind: str, pulses: int) -> None:
    response = seen(*parts)
    assert response.kind == kind, response.words
    if kind not in ("undecided", "full current"):
        assert len(response.pulses) == pulses


def test_a_refusal_takes_its_time() -> None:
    assert seen(lasts_s=14.0).kind == "undecided"
    assert seen((2.0, 3.0), lasts_s=6.0).kind == "full current"  # that is seen at once


def test_the_current_of_a_precharge_is_its_mean() -> None:
    response = seen((2.0, 0.25))
    assert response.current is not None
    assert response.current.value == pytest.approx(0.25, abs=3 * 0.002 / np.sqrt(20))
    assert "go unseen" in seen().words


@given(
    start_s=st.floats(1.0, 3.0),
    lasts_s=st.floats(0.15, 1.0),
    spacing_s=st.floats(0.02, 0.12),
)
def test_a_pulse_lasts_within_its_bounds(start_s: float, lasts_s: float, spacing_s: float) -> None:
    """A pulse longer than the spacing is always seen, once, and its true duration lies between its bounds."""
    times = np.arange(0.0, 6.0, spacing_s)
    current = np.where((times >= start_s) & (times < start_s + lasts_s), 0.2, 0.0)
    (pulse,) = pulses_in(times, current, 0.05)
    assert pulse.least_s <= lasts_s + 1e-9
    assert lasts_s <= pulse.most_s + 1e-9
    assert pulse.most_s - pulse.least_s == pytest.approx(2 * spacing_s, abs=1e-6)
    assert pulse.peak_A == 0.2


@pytest.mark.parametrize(
    ("times", "current", "full_A", "said"),
    [
        ([0.0, 1.0], [0.0], 1.0, "one length"),
        ([0.0, 1.0], [0.0, np.nan], 1.0, "finite"),
        ([0.0, 1.0], [0.0, 0.0], 0.05, "full_A"),
    ],
)
def test_what_cannot_be_read(times: list[float], current: list[float], full_A: float, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        response_of(times, current, full_A=full_A, watched_s=15.0)
    assert response_of([0.0, 0.1], [0.0, 0.0], full_A=1.0, watched_s=15.0).kind == "undecided"
