"""Trips of cells as the charger's pins see them: what the tap currents drop is in the value, or in its uncertainty."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

Rehearse = Callable[..., Any]


def budgets(found: Any) -> Any:
    return json.loads((found.record / "judged" / "001" / "budgets.json").read_text("utf-8"))


@pytest.fixture
def heavy(rehearse_full: Rehearse) -> Any:
    """Each tap takes 8 mA: 8 mV over the shunt of 1 Ω, 4 mV over what lies between (0.5 Ω) and the charger's pin."""
    return rehearse_full("tap-offset", spec="lantern", charger={"tap_current": "8 mA"})


def test_the_true_threshold_lies_in_the_interval_of_every_cell(heavy: Any) -> None:
    for cell in (1, 2, 3):
        verdict = heavy.verdict(f"tap_trip.cell{cell}.voltage")
        low, high = verdict["interval"]
        wide = verdict["k"] * verdict["u"]
        assert low - wide <= 4.25 <= high + wide, (cell, low, high, wide)  # the charger file's threshold


def test_what_the_scanner_sees_is_corrected_and_the_rest_is_a_bound(heavy: Any) -> None:
    """1 Ω x 8 mA rectangular: u = 8 mV/√3 = 4.6 mV (JCGM 100:2008, 4.3.7); without a current there is no such line."""
    lines = {line["name"]: line["contribution"] for line in budgets(heavy)["tap_trip.cell1.voltage"]["contributions"]}
    assert lines["tap 1, leads and source"] == pytest.approx(8e-3 / 3**0.5, rel=0.02)
    assert 0.0 < lines["tap 1, shunt"] < 1e-3
    # the top cell is what is left to B+: every channel below it, and the charger's own meter
    top = {line["name"] for line in budgets(heavy)["tap_trip.cell3.voltage"]["contributions"]}
    assert {"cells, cell 1", "cells, cell 2", "meter_charger", "tap 2, leads and source"} <= top


def test_a_stop_counts_only_with_a_control_after_it(rehearse_full: Rehearse) -> None:
    """Every good walk of a whole run has one; judged again without its event it counts for nothing."""
    from sequencer.engine.accuracy import Accuracy
    from sequencer.engine.evidence import open_evidence
    from sequencer.engine.walked import walk_findings

    found = rehearse_full("tap-offset", spec="lantern")
    evidence = open_evidence(found.record)
    accuracy = Accuracy(evidence.bench, 12.9)
    assert walk_findings(evidence, accuracy)["tap_trip.cell3.voltage"].trouble is None
    last_s = max(event["t"] for event in evidence.events("control"))
    evidence.record.events[:] = [
        e for e in evidence.record.events if not (e["event"] == "control" and e["t"] == last_s)
    ]
    without = walk_findings(evidence, accuracy)
    assert without["tap_trip.cell3.voltage"].trouble is not None
    assert "no good control after the charge had stopped" in without["tap_trip.cell3.voltage"].trouble
    assert without["tap_trip.cell2.voltage"].trouble is None


def test_a_top_cell_that_stops_the_charge_at_the_next_step_at_once_has_its_voltage(rehearse_full: Rehearse) -> None:
    """The cell passed its threshold 2.2 s ago, within the step before; this step is over within a reading.

    What the cell stood at is then what the contacts read just before the step, less the cells below it.
    """
    monitor = "{threshold: 4.25 V, filter: 2.28 s, hysteresis: 50 mV, latch: false}"
    found = rehearse_full("tap-offset", spec="lantern", charger={"tap_monitor": monitor})
    stopped = [
        json.loads(line)
        for line in (found.record / "data" / "events.jsonl").read_text("utf-8").splitlines()
        if '"tap_trip"' in line and '"out"' in line and '"cell": 3' in line
    ][-1]
    assert stopped["end_s"] - stopped["start_s"] < 0.25
    low, high = found.verdict("tap_trip.cell3.voltage")["interval"]
    assert low < 4.25 < high == pytest.approx(4.26, abs=0.006)  # the meters of the cells below step by 1 mV each
