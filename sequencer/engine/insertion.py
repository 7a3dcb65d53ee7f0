"""Putting a pack in and taking it out, as a hand would: signals first, B+ last and through a resistor; then reverse.

On a bench without contacts the charger's mains are the only contact.
"""

from __future__ import annotations

from dataclasses import dataclass

from drivers.roles import Deed
from drivers.signal_roles import Contact
from drivers.text.si import si
from drivers.trouble import InstrumentFault
from sequencer.analysis.classes import Seen, class_of
from sequencer.engine import fixture, resistors
from sequencer.engine.scan import Scan
from sequencer.engine.site import Site, Situation
from sequencer.engine.standin import StandIn, tap_volts

PRECHARGE_s = 0.3
SIGNALS_s = 0.2  # from the signal contacts to the first power contact
SETTLE_s = 2.0
MEAN_s = 2.0
SHORTEST_WATCH_s = 15.0
START_DELAYS = 3.0
FIRST_CURRENT = 0.1  # of the lowest declared current: the charger has begun
OPEN_V = 0.5  # an open B+ lets the charger's contacts stand so far from the node, or they do not follow it
PROOF_V = 0.3
PROOF_s = 1.0
SENSE_V = 0.005  # an open signal contact leaves no more than this on the bench's side
TAP_LIMIT_A = 0.1
TAP_TOLERANCE_V = 0.05  # a tap supply that stands further from what it was set to does not play its cell
TAP_SETTLE_s = resistors.SETTLE_s
MARGIN_s = 0.5  # watched longer than must be, for the first reading comes a scan late


@dataclass(frozen=True)
class Watched:
    """What was watched after an insertion: the stretch of the run, and what it showed."""

    start_s: float
    end_s: float
    seen: Seen
    began: bool
    watch_s: float


def place(site: Site, situation: Situation) -> None:
    """Make the instruments show `situation`, prove the node, and close the contacts."""
    loop, bench = site.loop, site.bench
    stand_in = prepare(site, situation)
    first = site.settling_s is None
    if first:
        site.settling_s = fixture.measure_settling(loop, stand_in.node_V, fixture.NUDGE_V * site.pack.cells)
    if first and not _mains_are_contact(site):
        _close(site)
    if first:
        site.zero_V = fixture.measure_rest(loop, stand_in.node_V)
    site.situation = situation
    assert site.settling_s is not None
    # Until what lies between is measured nothing is added: too much would lift the charger over a threshold.
    loop.follow_at(site.settling_s, site.fixture_ohm or site.pack.resistance, site.pack.resistance, site.forced_delay)
    loop.stand_in = stand_in
    loop.tap_offsets_V = situation.offsets_V
    if first or _mains_are_contact(site):
        loop.set(Deed(bench.mains, "on"))
    else:
        _close(site)


def prepare(site: Site, situation: Situation) -> StandIn:
    """Make the instruments show `situation`, every contact as it is."""
    stand_in = StandIn.inserted(site.pack, situation.cell_V, situation.held)
    site.loop.stand_in = None
    _prepare_node(site, stand_in.node_V)
    _prepare_signals(site, situation, stand_in.node_V)
    return stand_in


def _mains_are_contact(site: Site) -> bool:
    return site.bench.signals.power is None


def _prepare_node(site: Site, node_V: float) -> None:
    loop, bench = site.loop, site.bench
    load_A = fixture.load_current_A(site.specification)
    loop.set(Deed(bench.supply, "voltage", node_V), Deed(bench.supply, "current_limit", fixture.SUPPLY_SHARE * load_A))
    loop.set(Deed(bench.supply, "on"))
    loop.observe(SETTLE_s, lambda scan: fixture.node_stands(scan, node_V))
    fixture.verify_node(loop, node_V)
    loop.set(Deed(bench.load, "constant_current"), Deed(bench.load, "current", load_A))
    loop.set(Deed(bench.load, "on"))
    loop.observe(SETTLE_s if site.settling_s is None else 2 * site.settling_s)


def _prepare_signals(site: Site, situation: Situation, node_V: float) -> None:
    """Resistors and cell taps, with every contact still open."""
    signals = site.bench.signals
    for line, setpoint in ((signals.id, situation.id), (signals.thermistor, situation.thermistor)):
        if line is not None and setpoint is not None:
            resistors.set_resistor(site, line, setpoint)
    taps = signals.taps[: site.pack.cells - 1]
    volts = tap_volts(node_V, site.pack.cells, situation.offsets_V) if taps else []
    if taps:
        deeds = [tap.limit(TAP_LIMIT_A) for tap in taps]
        deeds += [tap.volts(value_V) for tap, value_V in zip(taps, volts, strict=True)]
        site.loop.set(*deeds, *(tap.on for tap in taps))
    if signals.id is not None or signals.thermistor is not None or taps:
        site.loop.observe(TAP_SETTLE_s)
    resistors.measure(site, situation.id, situation.thermistor)
    _verify_taps(site, volts)


def _verify_taps(site: Site, volts: list[float]) -> None:
    """Raise InstrumentFault where a tap supply does not stand at what it was set to, read at its own terminals."""
    taps = site.bench.signals.taps[: len(volts)]
    for supply in {tap.supply.name: tap.supply for tap in taps}.values():
        mine = [(number, tap) for number, tap in enumerate(taps, 1) if tap.supply.name == supply.name]
        channels = [tap.channel for _, tap in mine]
        read_V = supply.answers(site.bench.hands.ask(supply.ask("volts", channels)), "volts", channels)
        for (number, tap), seen_V in zip(mine, read_V, strict=True):
            if not abs(seen_V - volts[number - 1]) <= TAP_TOLERANCE_V:
                told = f"plays cell {number} and reads {si(seen_V, 'V')}; it was set to {si(volts[number - 1], 'V')}"
                raise InstrumentFault(f"{supply.name}.{tap.channel}", told)


def _close(site: Site) -> None:
    """B- and the signals, then B+ through its resistor, then B+."""
    loop, power = site.loop, site.bench.signals.power
    assert power is not None
    signals = site.bench.signals
    lines = [line.contact for line in (signals.thermistor, signals.id) if line is not None]
    taps = [tap.contact for tap in signals.taps[: site.pack.cells - 1]]
    for contact in (power.b_minus, *lines, *taps):
        loop.set(contact.close)
    loop.observe(SIGNALS_s)
    loop.set(power.precharge.close)
    loop.observe(PRECHARGE_s)
    loop.set(power.b_plus.close)
    loop.set(power.precharge.open)


def watch(site: Site) -> Watched:
    """Wait for the charger as long as it may take, and read what it does once it has settled."""
    loop = site.loop
    declared = site.declared_currents()
    lowest_A = min(low for low, _ in declared)
    watch_s = max(START_DELAYS * site.specification.dwell.start_delay, SHORTEST_WATCH_s)
    start_s = loop.now_s
    times_s: list[float] = []
    current_A: list[float] = []

    def note(scan: Scan) -> bool:
        if scan.current_A.good and (not times_s or scan.time_s > times_s[-1]):
            times_s.append(scan.time_s)
            current_A.append(scan.current_A.value)
        return False

    def begins(scan: Scan) -> bool:
        note(scan)
        return scan.current_A.good and scan.current_A.value > FIRST_CURRENT * lowest_A

    began = loop.observe(watch_s + MARGIN_s, begins)
    if began:
        loop.observe(SETTLE_s, note)
        loop.look_closely()
        loop.observe(MEAN_s, note)
    seen = class_of(times_s, current_A, declared_A=declared, watched_s=watch_s)
    return Watched(start_s, loop.now_s, seen, began, watch_s)


def prove_shunt(site: Site) -> None:
    """Before anyone calls a charger dead: raise InstrumentFault where a current flows that the shunt does not show."""
    last = site.loop.last
    unseen_A = None if last is None else site.loop.guard.unseen_A(last)
    if last is not None and unseen_A is not None:
        told = f"reads {si(last.current_A.value, 'A')} where load less supply is {si(unseen_A, 'A')}"
        raise InstrumentFault(site.bench.shunt_meter.name, f"{told}: a wrong shunt, or a lead of its meter is off?")


def take_out(site: Site) -> None:
    """Reverse: B+ first, then the signals; the dwell in which the charger forgets; every contact proven open.

    B- opens last, half of the dwell later: with it open nothing else could be proven to be.
    """
    loop, bench = site.loop, site.bench
    clear_s = site.specification.dwell.clear
    if _mains_are_contact(site):
        loop.set(Deed(bench.mains, "off"))
        loop.stand_in, loop.follow = None, {}
        loop.observe(2 * clear_s)
        _prove_quiet(site, bench.mains.name, "the mains are off")
        return
    *others, b_minus = bench.signals.contacts
    for contact in others:
        loop.set(contact.open)
    loop.stand_in, loop.follow = None, {}
    loop.observe(clear_s)
    _prove_quiet(site, _named(others[0]), "B+ is open")
    _prove_power_open(site)
    _prove_signals_open(site)
    loop.set(b_minus.open)
    loop.observe(clear_s)


def _prove_quiet(site: Site, instrument: str, what: str) -> None:
    last = site.loop.last
    if last is None or not abs(last.current_A.value) < 0.05:
        raise InstrumentFault(instrument, f"{what}, and the charger's current still flows: a welded contact?")


def _prove_power_open(site: Site) -> None:
    """The charger's contacts stand away from the node, or do not follow it when it is moved up."""
    loop, power = site.loop, site.bench.signals.power
    assert power is not None
    assert loop.last is not None
    if abs(loop.last.charger_V.value - loop.last.node_V.value) > OPEN_V:
        return
    node_V = loop.last.node_V.value
    if node_V + 2 * PROOF_V > loop.guard.bounds.node_V:  # no room above: first down, then up again
        node_V -= 2 * PROOF_V
        loop.set(Deed(site.bench.supply, "voltage", node_V))
        loop.observe(PROOF_s)
    before_V = loop.last.charger_V.value
    loop.set(Deed(site.bench.supply, "voltage", node_V + PROOF_V))
    loop.observe(PROOF_s)
    if not loop.last.charger_V.value - before_V < PROOF_V / 2:
        told = "B+ does not open: the charger's contacts follow the node"
        told += f"; a welded contact, this or pre-charge ({_named(power.precharge)})?"
        raise InstrumentFault(_named(power.b_plus), told)


def _prove_signals_open(site: Site) -> None:
    """The charger's excitation no longer reaches the bench's side. Nothing is proven of a resistor that is a short."""
    signals = site.bench.signals
    for line, name in ((signals.id, "ID"), (signals.thermistor, "thermistor")):
        if line is None:
            continue
        reply = site.bench.hands.ask(line.scanner.ask("volts", [line.sense]))
        volts = line.scanner.answers(reply, "volts", [line.sense])[0]
        if not abs(volts) < SENSE_V:
            told = f"the {name} contact does not open: {si(volts, 'V')} stand on the bench's side; a welded contact?"
            raise InstrumentFault(_named(line.contact), told)


def _named(contact: Contact) -> str:
    return f"{contact.relay.name}.{contact.channel}"
