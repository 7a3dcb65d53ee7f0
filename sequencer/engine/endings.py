"""Whether what ended a charge, or kept it from beginning, may have been the mains rather than the charger.

A switch that reads closed proves no mains behind it. A charger that charges again when they are cycled does, and so
does one that feeds its signal contacts.
"""

from __future__ import annotations

import numpy as np

from sequencer.engine.evidence import Evidence, Window

EXCITED_V = 0.005  # at the bench's side of a contact: the charger's own excitation, as `insertion.SENSE_V`


def mains_known(evidence: Evidence, start_s: float, end_s: float) -> str:
    """What this bench shows of a charger's mains while it delivers nothing."""
    known = {channel.name for channel in evidence.record.channels}
    for name, contact in (("id.sense", "ID"), ("thermistor.sense", "thermistor")):
        if name in known and np.any(evidence.trace(name).within(start_s, end_s).value > EXCITED_V):
            return f"it feeds its {contact} contact, so it had its mains"
    read = "mains.state" in known and np.any(evidence.trace("mains.state").within(start_s, end_s).value == 1)
    switch = "read closed" if read else "was closed"
    return f"the mains switch {switch}; whether there were mains behind it, nothing here shows"


def resumed_s(window: Window) -> float | None:
    """When a current began to flow again after the end, by itself; None where it did not, or nobody watched."""
    told: float | None = window.event.get("resumed_s")
    return told


def mains_witness(evidence: Evidence, window: Window) -> bool | None:
    """Whether the charger charged again once its mains were cycled; None where that was not tried."""
    tried = (event for event in evidence.events("mains-witness") if event["t"] >= window.end_s)
    return next((bool(event["charges"]) for event in tried), None)


def mains_doubt(evidence: Evidence, window: Window, ended_s: float | None) -> str | None:
    """Why a charge may have been ended by the loss of its mains; None where it was not, or nobody asked."""
    if window.event.get("as_declared", True):
        return None
    told = f"the charge broke off at {ended_s or window.end_s:.1f} s, not as declared"
    again_s = resumed_s(window)
    if again_s is not None:
        told += f", and began again by itself at {again_s:.1f} s"
        return f"{told}: a charger that restarts, or mains that were gone for a while; this bench cannot tell"
    witness = mains_witness(evidence, window)
    if witness is None:
        return f"{told}, and the run ended before it was seen whether the charger still had its mains"
    if witness:
        return None
    return f"{told}, and it did not charge again when its mains were cycled: no mains behind the switch, or it died"
