"""What a specification declares, and what follows from it for the bench."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from sequencer.model.specification import Specification

DWELL = {"start_delay": "2 s", "clear": "2 s", "response": "1 s"}


def spec_of(charge: dict[str, object], **more: object) -> Specification:
    return Specification.model_validate({"model": "invented", "pack": "p", "dwell": DWELL, "charge": charge, **more})


def test_the_load_is_sized_for_what_the_charger_can_deliver() -> None:
    charge = {"stages": [{"current": "2 A ± 5 %"}, {"current": ["0.9 A", "1.1 A"]}]}
    assert spec_of(charge).largest_declared_A == pytest.approx(2.1)
    assert spec_of(charge).physical_current_A == pytest.approx(3.15)  # 1.5 times, without a rating plate
    assert spec_of(charge, rating_current="4.5 A").physical_current_A == 4.5


def test_bands_in_which_something_is_declared_to_happen() -> None:
    stages = [
        {"current": "2 A ± 5 %", "threshold_per_cell": "4.20 V ± 25 mV"},
        {"current": "1 A ± 5 %", "threshold_per_cell": {"below": "4.1 V"}},
        {"current": "0.5 A ± 5 %"},
    ]
    spec = spec_of({"stages": stages, "voltage_per_cell": ["4.0 V", "4.05 V"]})
    assert [pytest.approx(band) for band in spec.events_V] == [(4.0, 4.05), (4.1, 4.1), (4.175, 4.225)]
    assert spec_of({"stages": stages[2:]}).events_V == ()


@pytest.mark.parametrize(
    ("charge", "said"),
    [
        ({}, "needs the declared current"),
        ({"stages": []}, "needs the declared current"),
        ({"stages": [{"current": {"above": "1 A"}}]}, "no upper end"),
        ({"stages": [{"current": "0 A ± 0 A"}]}, "no upper end above 0 A"),
        ({"stages": [{"current": "1 A ± 5 %"}], "timer": "3 h"}, "not permitted"),
    ],
)
def test_what_no_charge_may_be(charge: dict[str, object], said: str) -> None:
    with pytest.raises(ValidationError, match=said):
        spec_of(charge)
