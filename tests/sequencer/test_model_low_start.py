"""What a specification may declare of a discharged pack, and which limits come of it."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from sequencer.engine.inputs import Asked, gather
from sequencer.engine.targets import threshold_levels, weak_offsets
from sequencer.model.limits import Declared
from sequencer.model.low_start import LowStart
from sequencer.model.specification import Specification
from sequencer.model.steps import StartLow

STARTS = [
    {"cell_voltage": {"below": "2.0 V"}, "response": "refuses"},
    {"cell_voltage": ["2.0 V", "2.9 V"], "response": ["precharges", "refuses"]},
]
STEP = {"cell_voltage": "3.7 V", "voltages": ["2.0 V", "2.9 V"]}


def spec(**changes: Any) -> Specification:
    model = gather(Asked("start-low", bench="virtual-in-process")).specification.model
    return model.model_copy(update=changes)


def test_a_voltage_lies_in_its_range() -> None:
    low = LowStart.model_validate({"starts": STARTS})
    assert [one.holds(1.0) for one in low.starts] == [True, False]
    assert [one.holds(2.9) for one in low.starts] == [False, True]
    assert low.starts[1].response == "precharges or refuses"


@pytest.mark.parametrize(
    ("changed", "said"),
    [
        ({"starts": STARTS[::-1]}, "ranges rise"),
        ({"starts": [{"cell_voltage": {"above": "2 V"}, "response": "refuses"}]}, "upper end is needed"),
        ({"weak_cell": "refusess"}, "refuses"),
        ({"weak_cell": []}, "a response was expected"),
        ({"precharge": {"threshold_per_cell": "3 V ± 5 %"}}, "current"),
        ({"start": []}, "not permitted"),
    ],
)
def test_what_cannot_be_declared(changed: dict[str, Any], said: str) -> None:
    with pytest.raises(ValidationError, match=said):
        LowStart.model_validate(changed)


def test_one_limit_a_range_and_cell_or_one_line_where_nothing_is_declared() -> None:
    judged = ("low_start.response", "low_start.weak_cell", "low_start.threshold")
    full = [row.name for row in Declared(spec(), 5).rows(judged)]
    assert full[:2] == ["low_start.start1.response", "low_start.start2.response"]
    assert full[2:] == [*(f"low_start.cell{cell}.weak_cell" for cell in range(1, 6)), "low_start.threshold"]
    rows = Declared(spec(low_start=None), 5).rows(judged)
    assert [(row.name, row.declared) for row in rows] == [(name, False) for name in judged]


def test_rules_and_limits_of_the_family() -> None:
    low = LowStart.model_validate({"starts": STARTS, "rule": "simple", "probe": {"time": {"below": "1 s"}}})
    rows = {row.finding: row for row in Declared(spec(low_start=low), 5).rows(("low_start.probe_time",))}
    assert rows["low_start.probe_time"].rule == "simple"
    assert rows["low_start.probe_time"].band is not None
    assert not Declared(spec(low_start=low), 5).rows(("low_start.threshold",))[0].declared


@pytest.mark.parametrize(
    "changed",
    [
        {"voltages": []},
        {"voltages": ["2.0 V", "2.0 V"]},
        {"voltages": [f"{number / 10} V" for number in range(1, 15)]},
        {"to": "2.9 V"},
        {"weak_cell": "3.8 V"},
        {"by": "1 mV"},
        {"hold": "-1 s"},
        {"cell": 1},
    ],
)
def test_a_step_that_cannot_be(changed: dict[str, Any]) -> None:
    assert StartLow.model_validate(STEP).end == 3.30
    with pytest.raises(ValidationError):
        StartLow.model_validate({**STEP, **changed})


def test_levels_are_small_where_the_threshold_is_declared() -> None:
    step = StartLow.model_validate(STEP)
    low = LowStart.model_validate({"precharge": {"current": "1 A ± 5 %", "threshold_per_cell": "3.0 V ± 50 mV"}})
    assert low.precharge is not None
    levels = threshold_levels(step, low.precharge.threshold_per_cell, 2.0)
    assert levels[:9] == pytest.approx([2.1, 2.2, 2.3, 2.4, 2.5, 2.6, 2.7, 2.8, 2.9])
    assert levels[9:12] == pytest.approx([2.92, 2.94, 2.96])
    assert levels[-1] == pytest.approx(3.30)
    assert threshold_levels(step, None, 2.9)[0] == pytest.approx(2.92)


def test_one_weak_cell_leaves_the_others_normal() -> None:
    mean_V, offsets_V = weak_offsets(5, 5, 2.0, 3.7)
    assert [mean_V + offset for offset in offsets_V] == pytest.approx([3.7, 3.7, 3.7, 3.7, 2.0])
    assert sum(offsets_V) == pytest.approx(0.0)
