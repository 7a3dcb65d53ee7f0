"""What is done on the bench, as plain functions that read like lab instructions.

A method never sleeps and never talks to an instrument by name: all waiting is `loop.observe`, so the guard is
never off duty, and every wait has an end.
"""

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
from sequencer.engine.standin import StandIn
from sequencer.model.pack import Pack
from sequencer.model.procedure import FullCharge, Insert
from sequencer.model.specification import Specification

LOAD_SHARE = 1.25  # of the largest current that the charger can physically deliver
SUPPLY_SHARE = 1.1  # of the load's current: the supply alone must carry the load
SHORTEST_WATCH_s = 15.0
START_DELAYS = 3.0
SETTLE_s = 2.0
MEAN_s = 2.0
FIRST_CURRENT = 0.1  # of the lowest declared current: the charger has begun
CHARGES = 0.5  # of the lowest declared current: it charges
ENDED = 0.05  # of the first plateau
NODE_TOLERANCE_V = 0.05
NODE_TOLERANCE = 0.005
NUDGE_V = 0.02  # per cell: the small step by which the delay of the loop is measured
LEAST_FIXTURE = 0.8  # of ballast and shunt as declared: a power resistor's tolerance and its heat
SETTLED = 0.05  # of that step


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


def insert(loop: Loop, step: Insert, pack: Pack, specification: Specification, forced_delay: int | None = None) -> bool:
    """Put the pack in and wait for the charger; returns whether it charges.

    On this wiring the charger's mains are the last contact to close.
    """
    bench = loop.bench
    stand_in = StandIn.inserted(pack, step.cell_voltage)
    load_A = load_current_A(specification)
    loop.set(Deed(bench.supply, "voltage", stand_in.node_V), Deed(bench.supply, "current_limit", SUPPLY_SHARE * load_A))
    loop.set(Deed(bench.supply, "on"))
    loop.observe(SETTLE_s)
    _verify_node(loop, stand_in.node_V)
    loop.set(Deed(bench.load, "constant_current"), Deed(bench.load, "current", load_A))
    loop.set(Deed(bench.load, "on"))
    loop.observe(SETTLE_s)
    settling_s = measure_settling(loop, stand_in.node_V, NUDGE_V * pack.cells)
    zero = Means()
    loop.observe(MEAN_s, zero)
    _verify_at_rest(loop, zero.drop_V, stand_in.node_V)
    loop.follow_at(settling_s, _declared_ohm(loop), pack.resistance, forced_delay)
    loop.stand_in = stand_in
    loop.set(Deed(bench.mains, "on"))
    charges = _wait_for_charge(loop, specification)
    if charges:
        measure_fixture(loop, zero.drop_V, settling_s, pack, forced_delay)
    return charges


def _verify_node(loop: Loop, expected_V: float) -> None:
    assert loop.last is not None
    seen = loop.last.node_V
    if not seen.good or abs(seen.value - expected_V) > NODE_TOLERANCE_V + NODE_TOLERANCE * expected_V:
        told = f"reads {si(seen.value, 'V')}, the supply was set to {si(expected_V, 'V')}: open lead, wrong wiring?"
        raise InstrumentFault(loop.bench.node_meter.name, told)


def _declared_ohm(loop: Loop) -> float:
    wiring = loop.bench.file.bench.wiring.node
    return wiring.ballast + wiring.current.shunt_ohm


def _verify_at_rest(loop: Loop, drop_V: float, node_V: float) -> None:
    """With no current the charger's contacts stand at the node's voltage; before the mains are on."""
    if not abs(drop_V) <= NODE_TOLERANCE_V + NODE_TOLERANCE * node_V:
        told = f"reads {si(drop_V, 'V')} more than the node with no current flowing: open lead, wrong wiring?"
        raise InstrumentFault(loop.bench.charger_meter.name, told)


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


def _wait_for_charge(loop: Loop, specification: Specification) -> bool:
    stage = specification.charge.stages[0].current
    lowest_A = stage.low if stage.low is not None and stage.low > 0 else (stage.high or 0.0)
    watch_s = max(START_DELAYS * specification.dwell.start_delay, SHORTEST_WATCH_s)
    begun_s = loop.now_s

    def begins(scan: Scan) -> bool:
        return scan.current_A.good and scan.current_A.value > FIRST_CURRENT * lowest_A

    began = loop.observe(watch_s, begins)
    if began:
        loop.observe(SETTLE_s)
    loop.look_closely()
    window_s = loop.now_s
    means = Means()
    loop.observe(MEAN_s, means)
    charges = means.mean_A > CHARGES * lowest_A
    loop.event(
        "finding-window",
        finding="charges",
        start_s=window_s,
        end_s=loop.now_s,
        mains_s=begun_s,
        began=began,
        watched_s=watch_s,
    )
    return charges


def measure_fixture(loop: Loop, zero_V: float, settling_s: float, pack: Pack, forced_delay: int | None = None) -> float:
    """Resistance between the charger's contacts and the node: its voltage at the first plateau, less that at rest."""
    means = Means()
    loop.observe(MEAN_s, means)
    fixture_ohm = (means.drop_V - zero_V) / means.mean_A
    if not LEAST_FIXTURE * _declared_ohm(loop) < fixture_ohm < 10:
        told = f"{si(means.drop_V - zero_V, 'V')} lie between charger and node at {si(means.mean_A, 'A')}"
        told += f", over {si(_declared_ohm(loop), 'Ω')} of ballast and shunt: is the meter at the charger's contacts?"
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


def charge(loop: Loop, step: FullCharge, specification: Specification) -> str:
    """Charge until the charger ends it, its current has faded without an end, or time is up; then watch on."""
    plateau_A = loop.last.current_A.value if loop.last is not None else 0.0
    floor_A = ENDED * plateau_A
    cutoff = specification.charge.cutoff
    if cutoff is not None and cutoff.low is not None:
        floor_A = min(floor_A, 0.5 * cutoff.low)
    hold_s = max(3.0, 3.0 * specification.dwell.response)
    faded = _Faded(floor_A, hold_s)
    begun_s = loop.now_s
    came = loop.observe(step.longest, faded)
    loop.observe(step.after)
    loop.event(
        "finding-window",
        finding="charge",
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        ended="faded" if came else "time was up",
        floor_A=round(floor_A, 4),
    )
    return "the current has gone" if came else "the longest time has passed"


@dataclass
class _Faded:
    """True once the current has stayed below the floor for `hold_s`."""

    floor_A: float
    hold_s: float
    since_s: float | None = None

    def __call__(self, scan: Scan) -> bool:
        if not scan.current_A.good or scan.current_A.value >= self.floor_A:
            self.since_s = None
            return False
        if self.since_s is None:
            self.since_s = scan.time_s
        return scan.time_s - self.since_s >= self.hold_s


def remove(loop: Loop, specification: Specification) -> None:
    """Take the pack out: mains off, then the dwell in which the charger forgets."""
    loop.set(Deed(loop.bench.mains, "off"))
    loop.stand_in = None
    loop.follow = {}
    loop.observe(2 * specification.dwell.clear)
    quiet = loop.last is not None and abs(loop.last.current_A.value) < 0.05
    if not quiet:
        raise InstrumentFault(loop.bench.mains.name, "the mains are off, and the charger's current still flows")


def prepare(bench: OpenBench, pack: Pack, specification: Specification) -> None:
    """Fix ranges and integration, arm protections and read them back, with every output off."""
    limits, wiring = bench.file.bench.limits, bench.file.bench.wiring.node
    load_A = load_current_A(specification)
    highest_V = min(limits.node, pack.cells * pack.cell_bound_V)
    drop_V = limits.current * (wiring.ballast + 2 * wiring.current.shunt_ohm)
    deeds = [Deed(speaker, "clear") for speaker in bench.speakers]
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
