"""Two ways to measure the charger's current, held against each other: shunt, and load minus supply."""

from __future__ import annotations

import numpy as np

from drivers.text.si import si
from sequencer.analysis.charge import current_agreement
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence


def currents_differ(evidence: Evidence, accuracy: Accuracy, start_s: float, end_s: float) -> str | None:
    """Why the two do not agree within their uncertainty on a window; None where they do, or nothing can be said."""
    shunt = evidence.trace("charger.current").within(start_s, end_s)
    load_A = evidence.trace("load.current").at(shunt.time_s)
    supply_A = evidence.trace("supply.current").at(shunt.time_s)
    if np.count_nonzero(np.isfinite(load_A + supply_A)) < 2:
        return None
    gap = current_agreement(shunt.time_s, shunt.value, load_A, supply_A, start_s=start_s, end_s=end_s)
    lines = [
        *accuracy.current(float(np.mean(shunt.value))),
        *accuracy.readback("node.load", float(np.nanmean(load_A))),
        *accuracy.readback("node.supply", float(np.nanmean(supply_A))),
    ]
    allowed_A = Budget(gap.value, "A", (*lines, Contribution("readings", gap.u))).U
    if abs(gap.value) <= allowed_A:
        return None
    told = f"shunt, and load minus supply, differ by {si(gap.value, 'A')}"
    return f"{told}; their uncertainty is {si(allowed_A, 'A')}"
