"""The kinds of step, and what each refuses."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from sequencer.model.steps import KINDS, SWEEPS, RaiseCell, Step, SweepId, SweepTemperature

RAISE = {"cell_voltage": "3.7 V", "from": "4.15 V", "to": "4.40 V", "by": "10 mV"}


def test_defaults_are_the_ones_said() -> None:
    sweep = SweepId.model_validate({"cell_voltage": "3.7 V"})
    assert (sweep.resolution, sweep.outside) == (0.01, 0.25)
    temperature = SweepTemperature.model_validate({"cell_voltage": "3.7 V"})
    assert (temperature.resolution, temperature.beyond) == (0.5, 3.0)


@pytest.mark.parametrize(
    "changed",
    [
        {"from": "3.6 V"},
        {"to": "4.1 V"},
        {"from": "3.7 V"},
        {"by": "1 mV"},
        {"by": "0 V"},
        {"by": "10 mA"},
        {"cell": 3},
    ],
)
def test_a_raise_that_cannot_be(changed: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        RaiseCell.model_validate({**RAISE, **changed})


@pytest.mark.parametrize("resolution", ["0 %", "-1 %", "1 K", "fine"])
def test_a_resolution_is_a_share_above_nothing(resolution: str) -> None:
    with pytest.raises(ValidationError):
        SweepId.model_validate({"cell_voltage": "3.7 V", "resolution": resolution})


@pytest.mark.parametrize("beyond", ["0 K", "-3 K", "3 V", "far"])
def test_a_search_begins_somewhere_outside(beyond: str) -> None:
    with pytest.raises(ValidationError):
        SweepTemperature.model_validate({"cell_voltage": "3.7 V", "beyond": beyond})


def test_a_step_does_one_thing() -> None:
    assert Step.model_validate({"raise_cell": RAISE}).kind == "raise_cell"
    for text in ({}, {"remove": {}, "insert": {"cell_voltage": "3.7 V"}}, {"remove": {}, "expect": "charges"}):
        with pytest.raises(ValidationError):
            Step.model_validate(text)
    assert set(SWEEPS) <= set(KINDS)
