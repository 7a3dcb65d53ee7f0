"""What lies between charger and node, and what the instruments must be set to: measured, verified, worked out."""

from __future__ import annotations

from dataclasses import dataclass, field

from drivers.dialect import Dialect
from drivers.open_bench import OpenBench
from drivers.roles import Deed
from drivers.text.si import si
from drivers.trouble import InstrumentFault
from sequencer.engine.loop import Loop
from sequencer.engine.pace import FAST_s, QUIET_s
from sequencer.engine.scan import Scan
from sequencer.model.pack import Pack
from sequencer.model.specification import Specification

LOAD_SHARE = 1.25  # of the largest current that the charger can physically deliver
SUPPLY_SHARE = 1.1  # of the load's current: the supply alone must carry the load
SETTLE_s = 2.0
MEAN_s = 2.0
NODE_TOLERANCE_V = 0.05
NODE_TOLERANCE = 0.005
NUDGE_V = 0.02  # per cell: the small step by which the delay of the loop is measured
SETTLED = 0.05  # of that step
LEAST_FIXTURE = 0.8  # of ballast and shunt as declared: a power resistor's tolerance and its heat


@dataclass
class Means:
    """Running means of node voltage, charger voltage and current over scans."""

    node_V: list[float] = field(default_factory=list)
    charger_V: list[float] = field(default_factory=list)
    current_A: list[float] = field(default_factory=list)

    def __call__(self, scan: Scan) -> bool:
        """To be given to `observe` as its `until`: takes the scan in and lets the observation go on."""
        if scan.node_V.good and scan.charger_V.good and scan.current_A.good:
            self.node_V.append(scan.node_V.value)
            self.charger_V.append(scan.charger_V.value)
            self.current_A.append(scan.current_A.value)
        return False

    @property
    def drop_V(self) -> float:
        return _mean(self.charger_V) - _mean(self.node_V)

    @property
    def mean_A(self) -> float:
        return _mean(self.current_A)


def _mean(values: list[float]) -> float:
    return sum(values) / len(values) if values else float("nan")


def load_current_A(specification: Specification) -> float:
    return LOAD_SHARE * specification.physical_current_A


def node_stands(scan: Scan, expected_V: float) -> bool:
    return scan.node_V.good and abs(scan.node_V.value - expected_V) <= NODE_TOLERANCE_V + NODE_TOLERANCE * expected_V


def verify_node(loop: Loop, expected_V: float) -> None:
    """Raise InstrumentFault unless the node's meter reads what the supply was set to."""
    assert loop.last is not None
    if not node_stands(loop.last, expected_V):
        seen_V = loop.last.node_V.value
        told = f"reads {si(seen_V, 'V')}, the supply was set to {si(expected_V, 'V')}: open lead, wrong wiring?"
        raise InstrumentFault(loop.bench.node_meter.name, told)


def declared_ohm(loop: Loop) -> float:
    wiring = loop.bench.file.bench.wiring.node
    return wiring.ballast + wiring.current.shunt_ohm


def measure_rest(loop: Loop, node_V: float) -> float:
    """Charger's contacts less node with no current flowing, V: the two meters against each other, and the wiring."""
    zero = Means()
    loop.observe(MEAN_s, zero)
    if not abs(zero.drop_V) <= NODE_TOLERANCE_V + NODE_TOLERANCE * node_V:
        told = f"reads {si(zero.drop_V, 'V')} more than the node with no current flowing: open lead, wrong wiring?"
        raise InstrumentFault(loop.bench.charger_meter.name, told)
    return zero.drop_V


def measure_settling(loop: Loop, node_V: float, nudge_V: float) -> float:
    """Longest time from a setting to a node that has settled on it, by nudging it up and down again; s."""
    longest_s = 0.0
    for target_V, step_V in ((node_V + nudge_V, nudge_V), (node_V, -nudge_V)):
        begun_s = loop.now_s
        before_V = loop.last.node_V.value if loop.last is not None else node_V
        loop.set(Deed(loop.bench.supply, "voltage", target_V))
        arrived_V = before_V + step_V

        def settled(scan: Scan, arrived_V: float = arrived_V) -> bool:
            return scan.node_V.good and abs(scan.node_V.value - arrived_V) <= SETTLED * nudge_V

        if not loop.observe(SETTLE_s, settled):
            told = f"the node did not follow a step of {si(step_V, 'V')} within {SETTLE_s:g} s"
            raise InstrumentFault(loop.bench.supply.name, told)
        longest_s = max(longest_s, loop.now_s - begun_s)
        loop.observe(FAST_s)
    return longest_s


def measure_fixture(loop: Loop, zero_V: float, settling_s: float, pack: Pack, forced_delay: int | None = None) -> float:
    """Resistance between the charger's contacts and the node: its voltage at the first plateau, less that at rest."""
    means = Means()
    loop.observe(MEAN_s, means)
    fixture_ohm = (means.drop_V - zero_V) / means.mean_A
    if not LEAST_FIXTURE * declared_ohm(loop) < fixture_ohm < 10:
        told = f"{si(means.drop_V - zero_V, 'V')} lie between charger and node at {si(means.mean_A, 'A')}"
        told += f", over {si(declared_ohm(loop), 'Ω')} of ballast and shunt: is the meter at the charger's contacts?"
        raise InstrumentFault(loop.bench.charger_meter.name, told)
    loop.guard.fixture_ohm = fixture_ohm
    loop.follow_at(settling_s, fixture_ohm, pack.resistance, forced_delay)
    fast, quiet = loop.follow[FAST_s], loop.follow[QUIET_s]
    loop.stand_in_words = {
        "Rp_ohm": round(fixture_ohm, 6),
        "Rv_ohm": round(fast.Rv_ohm, 6),
        "settling_s": round(settling_s, 3),
        "delay_scans": fast.delay_scans,
        "gain": round(fast.gain, 5),
        "lag_s": round(fast.lag_s, 3),
        "quiet": {"delay_scans": quiet.delay_scans, "gain": round(quiet.gain, 5), "lag_s": round(quiet.lag_s, 3)},
    }
    loop.event("standin", **loop.stand_in_words)
    return fixture_ohm


def prepare(bench: OpenBench, pack: Pack, specification: Specification) -> None:
    """Fix ranges and integration, arm protections and read them back, with every output off."""
    limits, wiring = bench.file.bench.limits, bench.file.bench.wiring.node
    load_A = load_current_A(specification)
    highest_V = min(limits.node, pack.cells * pack.cell_bound_V)
    drop_V = limits.current * (wiring.ballast + 2 * wiring.current.shunt_ohm)
    deeds = [Deed(speaker, "clear") for speaker in bench.speakers]
    deeds += [contact.open for contact in bench.signals.contacts]
    for meter, most in (
        (bench.node_meter, highest_V),
        (bench.charger_meter, highest_V + drop_V),
        (bench.shunt_meter, limits.current * bench.shunt_ohm),
    ):
        deeds += [Deed(meter, "range", range_for(meter.dialect, most)), Deed(meter, "integration", 1.0)]
    deeds += [
        Deed(bench.supply, "overvoltage", 1.05 * highest_V),
        Deed(bench.load, "overcurrent", min(1.2 * load_A, bench.load.dialect.settable.get("current", 1.2 * load_A))),
    ]
    bench.hands.do(deeds)


def range_for(dialect: Dialect, most_V: float) -> float:
    """The smallest range of a meter's dialect that holds `most_V`; ranges are fixed before a run."""
    spans = sorted(span.range for span in dialect.accuracy.voltage)
    return next((span for span in spans if span >= most_V), spans[-1])
