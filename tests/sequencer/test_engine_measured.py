"""What a full charge measured; and what is no reading of the charger."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from drivers.virtual.meter import Meter
from sequencer.engine.evidence import open_evidence
from sequencer.engine.measured import ChargeStep

QUICK = {"start": "4.00 V", "after": "20 s"}


def test_a_charger_meter_that_reads_wrong_is_never_held_against_the_charger(
    rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    """0.2 % is 8 mV per cell: too little for the guard, and it would have made a charger at 4.22 V fail."""
    converted = Meter._converted
    monkeypatch.setattr(
        Meter, "_converted", lambda self, v: converted(self, v * (1.002 if self.name == "meter_charger" else 1.0))
    )
    done = rehearse(charger={"voltage_per_cell": "4.22 V"}, changes=QUICK)
    assert done.ended.ended == "complete"
    assert not done.failing
    for limit in ("charge.voltage", "charge.end_voltage"):
        assert done.verdicts[limit] == "inconclusive"
        assert "charger's meter, and node's with the drop between them, differ" in done.verdict(limit)["why"]
    assert done.verdicts["charge.stage1.current"] == "pass"  # which hangs on no voltage


LATCHED = """packmime: procedure 1
name: latched
purpose: A sweep that latches the charger, then a charge.
steps:
  - insert: {cell_voltage: 3.7 V}
    expect: charges
  - remove: {}
  - sweep_id: {cell_voltage: 3.7 V, resolution: 20 %, outside: 25 %}
  - insert: {cell_voltage: 4.0 V}
  - charge: {compression: 20, after: 20 s}
    finding: charge
  - remove: {}
judge: [charge.stage.current, charge.current_after_end]
"""


def test_mains_cycled_before_the_charge_leave_its_zeros_alone(rehearse_full: Callable[..., Any], tmp_path: Any) -> None:
    """A zero is read while the mains are off, not from then on to the end of the record."""
    (tmp_path / "latched.yaml").write_text(LATCHED, "utf-8")
    done = rehearse_full(str(tmp_path / "latched.yaml"), spec="bellows", charger={"fault_latch": "mains"})
    evidence = open_evidence(done.record)
    cycled = [event["t"] for event in evidence.events("mains") if not event["on"]]
    window = evidence.window("charge")
    assert window is not None
    assert cycled
    assert max(cycled) < window.start_s
    assert set(done.verdicts.values()) == {"pass"}


def test_each_value_is_what_the_record_shows(rehearse: Callable[..., Any]) -> None:
    """Plain means over the stretches that the verdicts name, worked out again here."""
    done = rehearse(changes=QUICK)
    evidence = open_evidence(done.record)
    current, voltage = evidence.trace("charger.current"), evidence.trace("charger.voltage")
    for limit, trace, cells in (("charge.stage1.current", current, 1), ("charge.current_after_end", current, 1)):
        verdict = done.verdict(limit)
        assert verdict["value"] == pytest.approx(np.mean(trace.within(*verdict["evidence"]).value) / cells, abs=1e-6)
        assert verdict["n"] == trace.within(*verdict["evidence"]).value.size
    held = done.verdict("charge.voltage")
    inside = voltage.within(*held["evidence"])
    assert held["value"] == pytest.approx(np.mean(inside.value) / 5, abs=2e-6)
    largest = done.verdict("charge.end_voltage")
    assert largest["value"] <= np.max(voltage.value) / 5 + 1e-9
    assert largest["value"] == pytest.approx(np.max(voltage.value) / 5, abs=1e-4)
    cutoff = done.verdict("charge.cutoff")
    last_A = current.value[current.time_s <= cutoff["evidence"][1]][-1]
    assert cutoff["value"] == pytest.approx(last_A, abs=cutoff["k"] * cutoff["u"])


def test_every_quantity_has_a_budget_that_is_its_u(rehearse: Callable[..., Any]) -> None:
    done = rehearse(spec="lantern", changes={"start": "3.95 V", "after": "20 s"})
    budgets = json.loads((done.judged.folder / "budgets.json").read_text("utf-8"))
    for verdict in done.judged.document["verdicts"]:
        if verdict["kind"] == "quantity" and verdict["verdict"] not in ("not applicable", "not run"):
            budget = budgets[verdict["limit"]]
            assert verdict["u"] == pytest.approx(budget["u"])
            root_sum = np.sqrt(sum(line["contribution"] ** 2 for line in budget["contributions"]))
            assert budget["u"] == pytest.approx(root_sum)  # GUM 5.1.2, uncorrelated
            assert all(line["source"] for line in budget["contributions"])
    names = {line["name"] for line in budgets["charge.stage1.current"]["contributions"]}
    assert {"shunt", "meter_shunt", "thermal EMF"} <= names


def test_a_stage_is_missing_only_where_the_shape_is_clear(rehearse: Callable[..., Any]) -> None:
    evidence = open_evidence(rehearse(changes=QUICK).record)
    window = evidence.window("charge")
    assert window is not None
    step = ChargeStep(evidence, window)
    step.reading = replace(step.reading, plateaus=(), regulation_V=None)
    for name in ("charge.stage1.current", "charge.voltage"):
        assert step.findings()[name].none is not None
    step.classification = replace(step.classification, confidence=0.89)
    for name in ("charge.stage1.current", "charge.voltage"):
        found = step.findings()[name]
        assert found.none is None
        assert found.trouble is not None
        assert "probability of 0.89" in found.trouble


def test_a_short_overshoot_is_said_though_no_limit_speaks_of_it(rehearse: Callable[..., Any]) -> None:
    done = rehearse(charger={"overshoot": "{current: 5 A, time: 1 s}"}, changes=QUICK)
    why = done.verdict("charge.stage1.current")["why"]
    told = re.search(r"the largest single reading was ([\d.]+) A", why)
    assert told is not None, why
    assert float(told[1]) == pytest.approx(5.0, rel=2e-3)
    assert "largest single reading" not in rehearse(changes=QUICK).verdict("charge.stage1.current")["why"]


def test_the_stand_ins_lag_makes_a_threshold_inconclusive(rehearse: Callable[..., Any], tmp_path: Any) -> None:
    """A third of the charger's response time is the most that it may lag."""
    from sequencer.engine.inputs import FOLDERS

    text = (FOLDERS["specification"] / "lantern.yaml").read_text("utf-8").replace("response: 1 s", "response: 0.1 s")
    (tmp_path / "lantern.yaml").write_text(text, "utf-8")
    done = rehearse(spec=str(tmp_path / "lantern.yaml"), charger={"response": "0.1 s"}, changes={"start": "3.95 V"})
    assert done.verdicts["charge.stage1.threshold"] == "inconclusive"
    assert "lags" in done.verdict("charge.stage1.threshold")["why"]
    assert done.verdicts["charge.stage1.current"] == "pass"
