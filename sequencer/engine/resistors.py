"""The resistors at the pack's small contacts: set, and measured while the charger is not connected.

A decade box is set by relays: what it was told is one thing, what stands there another. Where the bench has an
ohmmeter, the resistance that a charger was shown is the one that was measured.
"""

from __future__ import annotations

import math

from drivers.signal_roles import SignalLine
from drivers.text.si import si
from drivers.trouble import InstrumentFault
from sequencer.engine.site import Setpoint, Site

SETTLE_s = 0.2  # relays have moved and stopped bouncing; 5 to 50 ms are common practice, no source
TRIES = 5  # one after the other, until it measures what it was set to
OPEN_ohm = 10e6  # an open resistor measures more, cables and boards included; common practice, no source
SHORT_ohm = 5.0  # a short measures less, leads and contacts included; common practice, no source
LEADS_ohm = 0.5  # of the ohmmeter, not nulled; common practice, no source
ASTRAY = 3.0  # times what its family states: such a resistor is broken, not inaccurate
LEAST_ASTRAY = 0.005  # of a resistance, where a family states less or nothing; common practice, no source
WRITTEN_OPEN_ohm = 1e9


def set_resistor(site: Site, line: SignalLine, setpoint: Setpoint) -> None:
    """Set a resistor at one of the pack's contacts, written down in Ω (1 GΩ for open, 0 for a short)."""
    site.loop.set(line.resistor.to(setpoint))
    ohm = {"open": WRITTEN_OPEN_ohm, "short": 0.0}[setpoint] if isinstance(setpoint, str) else setpoint
    site.loop.journal.append(f"set.{_name(site, line)}", site.loop.now_s, ohm)


def measure(site: Site, id_set: Setpoint | None, thermistor_set: Setpoint | None) -> None:
    """Measure both resistors, their contacts open. Raises InstrumentFault for one that is not what it was set to."""
    signals = site.bench.signals
    for line, setpoint in ((signals.id, id_set), (signals.thermistor, thermistor_set)):
        if line is not None and setpoint is not None and "ohms" in line.scanner.dialect.readings:
            _measure(site, line, setpoint)


def measure_again(site: Site, line: SignalLine, settings: tuple[Setpoint, ...]) -> None:
    """Set a resistor anew to what a charge ran and stopped at, and measure it: while it charged that was not to be had.

    The contact must be open.
    """
    if "ohms" not in line.scanner.dialect.readings:
        return
    for setpoint in settings:
        set_resistor(site, line, setpoint)
        site.loop.observe(SETTLE_s)
        _measure(site, line, setpoint)


def _measure(site: Site, line: SignalLine, setpoint: Setpoint) -> None:
    ohm = _read(site, line)
    for _ in range(TRIES - 1):  # slow relays are no broken ones: settling is established by measuring
        if _is_as_set(line, setpoint, ohm):
            break
        site.loop.observe(SETTLE_s)
        ohm = _read(site, line)
    if not _is_as_set(line, setpoint, ohm):
        told = "open" if math.isnan(ohm) else si(ohm, "Ω")
        wanted = setpoint if isinstance(setpoint, str) else si(setpoint, "Ω")
        raise InstrumentFault(line.resistor.name, f"was set to {wanted} and measures {told}: a relay that sticks?")
    if math.isfinite(ohm):
        site.loop.journal.append(f"{_name(site, line)}.ohm", site.loop.now_s, ohm)


def _read(site: Site, line: SignalLine) -> float:
    reply = site.bench.hands.ask(line.scanner.ask("ohms", [line.sense]))
    return line.scanner.answers(reply, "ohms", [line.sense])[0]


def _is_as_set(line: SignalLine, setpoint: Setpoint, ohm: float) -> bool:
    if setpoint == "open":
        return math.isnan(ohm) or ohm > OPEN_ohm
    if setpoint == "short":
        return ohm < SHORT_ohm
    assert isinstance(setpoint, float)
    spans = [span for span in line.resistor.dialect.accuracy.resistance if span.range >= setpoint]
    stated_ohm = min((span.set * setpoint + span.residual for span in spans), default=0.0)
    return abs(ohm - setpoint) <= max(ASTRAY * stated_ohm, LEAST_ASTRAY * setpoint + LEADS_ohm)


def _name(site: Site, line: SignalLine) -> str:
    return "id" if line is site.bench.signals.id else "thermistor"
