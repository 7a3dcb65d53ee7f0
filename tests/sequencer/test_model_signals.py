"""Declared bands, windows and trips as people write them."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from sequencer.model import preferred
from sequencer.model.signals import Balancing, IdBand, TapTrip, TemperatureWindow


def band(low_ohm: float, high_ohm: float) -> IdBand:
    return IdBand.model_validate({"id": [f"{low_ohm!r} Ω", f"{high_ohm!r} Ω"], "current": "3 A ± 5 %"})


@given(st.floats(1.0, 1e5), st.floats(1.01, 10.0))
def test_the_middle_of_a_band_is_as_far_from_both_ends_as_a_ratio(low_ohm: float, ratio: float) -> None:
    """Tolerances of resistors are ratios (IEC 60063 series are geometric)."""
    middle_ohm = band(low_ohm, low_ohm * ratio).middle_ohm
    assert math.isclose(middle_ohm / low_ohm, math.sqrt(ratio), rel_tol=1e-9)


@pytest.mark.parametrize("nominal_ohm", [3.0e3, 4.7e3])
def test_the_packs_that_ship_have_preferred_resistors(nominal_ohm: float) -> None:
    """IEC 60063, E24: 3.0 and 4.7; their 5 % parts lie within the band declared for them."""
    assert preferred.between(nominal_ohm / 1.01, nominal_ohm * 1.01, "E24") == (pytest.approx(nominal_ohm),)


@pytest.mark.parametrize(
    "text", ["1.0 kΩ", {"above": "1 kΩ"}, ["0 Ω", "1 kΩ"], ["2 kΩ", "1 kΩ"], ["1 kΩ"], ["1 V", "2 V"]]
)
def test_a_band_needs_two_ends_above_nothing(text: object) -> None:
    with pytest.raises(ValidationError):
        IdBand.model_validate({"id": text, "current": "3 A ± 5 %"})


def test_ends_of_a_window() -> None:
    window = TemperatureWindow.model_validate({"curve": "ntc-10k-3435", "start": ["3 °C ± 2 °C", "45 °C ± 2 °C"]})
    assert window.start is not None
    assert [(end.low, end.high) for end in window.start] == [(1.0, 5.0), (43.0, 47.0)]
    assert window.run is None


@pytest.mark.parametrize(
    "start",
    ["3 °C", ["3 °C ± 2 °C"], ["45 °C ± 2 °C", "3 °C ± 2 °C"], ["3 V ± 2 V", "45 V ± 2 V"], ["3 °C", "4 °C", "5 °C"]],
)  # fmt: skip
def test_a_window_that_is_none(start: object) -> None:
    with pytest.raises(ValidationError):
        TemperatureWindow.model_validate({"curve": "ntc-10k-3435", "start": start})


def test_unknown_words_are_refused() -> None:
    with pytest.raises(ValidationError):
        TapTrip.model_validate({"voltage": ["4.20 V", "4.28 V"], "release": "sometimes"})
    with pytest.raises(ValidationError):
        TapTrip.model_validate({"voltage": ["4.20 V", "4.28 V"], "delay": "2 s"})


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ({}, "one of them"),
        ({"none_above": "1 mA", "current": "4 mA ± 20 %"}, "one of them"),
        ({"current": {"below": "4 mA"}}, "has a lower end above 0 A"),
        ({"none_above": "0 mA"}, "must be above"),
        ({"none_above": "1 V"}, "a voltage"),
    ],
)
def test_balancing_is_declared_in_one_way(text: dict[str, object], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        Balancing.model_validate(text)
    most = Balancing.model_validate({"none_above": "1 mA", "rule": "simple"}).most
    assert most is not None
    assert (most.low, most.high, most.rule, most.text) == (None, 0.001, "simple", "none above 1 mA")
