"""Every finding of deep-discharge starts, by the name of its limit."""

from __future__ import annotations

from sequencer.engine import low_measured
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence
from sequencer.engine.found import Found
from sequencer.engine.low_points import LowStarts
from sequencer.engine.swept import given_up
from sequencer.model.low_start import LowStart


def low_start_findings(evidence: Evidence, accuracy: Accuracy) -> dict[str, Found]:
    """Every finding of deep-discharge starts, by limit name; none where no such step was begun."""
    if not (evidence.events("low-start") or given_up(evidence, "low_start")):
        return {}
    starts, declared = LowStarts.of(evidence, accuracy), evidence.specification.low_start or LowStart()
    precharge = declared.precharge
    found = {
        "low_start.precharge_current": low_measured.precharge_current(starts, precharge.current if precharge else None),
        "low_start.threshold": low_measured.threshold(starts),
        "low_start.precharge_time": low_measured.precharge_time(starts, precharge.time if precharge else None),
        "low_start.probe_current": low_measured.probe_current(starts),
        "low_start.probe_time": low_measured.probe_time(starts),
    }
    for number, one in enumerate(declared.starts, 1):
        inside = [point for point in starts.starts if one.holds(point.cell_V)]
        missing = f"no start voltage of the procedure lies within {one.cell_voltage.text}"
        found[f"low_start.start{number}.response"] = starts.state(inside, one.response, missing)
    for cell in range(1, evidence.pack.cells + 1):
        weak = [point for point in starts.points if point.cell == cell]
        missing = f"no pack with cell {cell} weak was shown"
        found[f"low_start.cell{cell}.weak_cell"] = starts.state(weak, declared.weak_cell, missing)
    return found
