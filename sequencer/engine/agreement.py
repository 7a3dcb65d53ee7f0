"""Two ways to measure, held against each other: current by shunt and as load minus supply; voltage by two meters."""

from __future__ import annotations

import math

import numpy as np

from drivers.text.si import si
from sequencer.analysis.charge import current_agreement
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence

FIXTURE_SHARE = 0.05  # of the drop between contacts and node: a ballast that has warmed since it was measured


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


def voltages_differ(evidence: Evidence, accuracy: Accuracy, start_s: float, end_s: float) -> str | None:
    """Why the charger's meter is not what node, current and fixture say; None where it is, or nothing can be said."""
    standin = evidence.manifest.get("standin") or {}
    voltage, fixture_ohm = evidence.trace("charger.voltage").within(start_s, end_s), standin.get("Rp_ohm")
    node_V = evidence.trace("node.voltage").at(voltage.time_s)
    drop_V = evidence.trace("charger.current").at(voltage.time_s) * (fixture_ohm or math.nan)
    gaps_V = voltage.value - node_V - drop_V
    if not np.any(np.isfinite(gaps_V)):
        return None
    gap_V, largest_V = float(np.nanmean(gaps_V)), float(np.nanmax(np.abs(drop_V)))
    lines = [
        *accuracy.volts("node.charger_voltage", float(np.mean(voltage.value))),
        *accuracy.volts("node.voltage", float(np.nanmean(node_V))),
        Contribution.from_half_width("fixture", FIXTURE_SHARE * largest_V, source="a warm ballast"),
    ]
    allowed_V = Budget(gap_V, "V", tuple(lines)).U
    if abs(gap_V) <= allowed_V:
        return None
    told = f"charger's meter, and node's with the drop between them, differ by {si(gap_V, 'V')}"
    return f"{told}; their uncertainty is {si(allowed_V, 'V')}"
