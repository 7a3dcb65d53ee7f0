"""The safe state: energy source away first, absorber and voltage holder kept until the current is proven gone.

Order: 1 mains off. 2 two witnesses say that the charger no longer delivers, and none that it does. 3 if not, mains
off once more. 4 if still not, load and supply stay as they are and an alarm is raised. 5 cell taps down together.
6 supply to zero while the load drains the node, then load off, supply off. 7 contacts open, each checked.
Only what readback and meter both show is called safe. Safe means de-energised, not isolated.

A witness that sees the charger deliver is not outvoted: shunt and ballast lie in one path, and a charger wired past
both is seen by load less supply alone. Only a meter that stands still to its last digit, or that hangs behind contacts
proven open, is no witness.

All witnesses are asked in one exchange, so that any number of silent instruments costs one wait. A lost link is
opened anew on the way, and who answers is proven before anything is said to it. Every wait has an end.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import TypeVar

from drivers.exchange import Reply
from drivers.open_bench import OpenBench
from drivers.roles import Deed, LoadMode, LoadReading, SupplyMode, SupplyReading
from drivers.trouble import BenchFault

T = TypeVar("T")
QUIET_CURRENT_A = 0.050
PATIENCE_s = 2.0  # for the charging current to go after each try
BALLAST_A = 0.2  # two meters on their high range: 10 mV each over 0.1 Ω, well above their accuracy statements
READBACK_A, READBACK = 0.06, 0.02  # of supply and load: as the guard allows them, the share of the load's current
STILL_LOOKS = 10  # so many equal readings to the last digit: a meter that does not measure
BACKWARDS_A = -1.0  # more than this into a charger that is off is a wire off a meter, not a current
QUIET_FOR_s = 0.3  # several looks: a charger may pulse; the whole PATIENCE_s where the mains are not proven off
DRAIN_A = 0.080
SAFE_VOLTAGE_V = 2.0
DRAIN_PATIENCE_s = 10.0
LOOK_EVERY_s = 0.1
LOOK_PATIENCE_s = 1.0  # a meter that nobody has set up may integrate for 0.4 s
DEED_PATIENCE_s = 2.0
LAST_LOOKS = 3
BY_HAND = "press the emergency stop, unplug the mains"
ALARM = f"charger still sources: {BY_HAND}"
ALARM_UNKNOWN = f"nobody can say whether the charger still sources: {BY_HAND}"


@dataclass
class SafeState:
    """What was done on the way, and whether the end was proven by readback and meter."""

    verified: bool = False
    words: list[str] = field(default_factory=list)
    troubles: list[str] = field(default_factory=list)
    alarm: bool = False


@dataclass(frozen=True)
class Look:
    """One look at everything; nan and None where an instrument cannot say. Currents out of the charger positive."""

    shunt_A: float
    ballast_A: float
    node_V: float
    mains_on: bool | None
    supply: SupplyReading | None
    load: LoadReading | None
    charger_V: float = math.nan

    @property
    def difference_A(self) -> float:
        """The charger's current by a third way: what the load takes less what the supply gives."""
        if self.supply is None or self.load is None:
            return math.nan
        return self.load.current_A - self.supply.current_A

    @property
    def witnesses_A(self) -> tuple[float, float, float]:
        """nan where a witness says nothing, or what cannot be: a meter behind an open contact reads 0 V."""
        seen = self.shunt_A, self.ballast_A, self.difference_A
        return tuple(current_A if current_A > BACKWARDS_A else math.nan for current_A in seen)  # type: ignore[return-value]

    @property
    def quiet(self) -> bool:
        """Two see less than QUIET_CURRENT_A out of the charger (a drain is allowed), and none sees it deliver."""
        return self.mostly_quiet and not self.delivering

    @property
    def mostly_quiet(self) -> bool:
        return sum(current_A < QUIET_CURRENT_A for current_A in self.witnesses_A) >= 2

    @property
    def delivering(self) -> set[str]:
        """Who sees the charger deliver, by more than a tolerance explains."""
        shunt_A, ballast_A, difference_A = self.witnesses_A
        drawn_A = 0.0 if self.load is None else abs(self.load.current_A)
        clear = (
            ("shunt", shunt_A, QUIET_CURRENT_A),
            ("ballast", ballast_A, BALLAST_A),
            ("load less supply", difference_A, READBACK_A + READBACK * drawn_A),
        )
        return {name for name, current_A, least_A in clear if current_A >= least_A}

    @property
    def sourcing(self) -> bool:
        """Whether anyone sees the charger deliver."""
        return any(current_A >= QUIET_CURRENT_A for current_A in self.witnesses_A)

    @property
    def low(self) -> bool:
        return abs(self.node_V) < SAFE_VOLTAGE_V


def to_safe_state(bench: OpenBench, alarm: Callable[[str], None] = lambda words: None) -> SafeState:
    """Walk the order; never raises for an instrument. `alarm` is called once if a person must act."""
    walk = _Walk(bench)
    state = walk.state
    words = walk.source_away()
    if words is None:
        walk.taps_down()
        walk.drain()
        state.verified, words = walk.outputs_off()
    else:
        state.words.append(f"NOT SAFE, load and supply left as they are: {words}")
    if words is not None:
        state.alarm = True
        alarm(words)
    return state


class _Walk:
    """The bench, and what was done and seen on the way."""

    def __init__(self, bench: OpenBench) -> None:
        self.bench = bench
        self.state = SafeState()
        self.taps_off = True
        self._looks: list[Look] = []

    def source_away(self) -> str | None:
        """Steps 1 to 4. Returns what to tell a person if the charger is not proven quiet."""
        for words in ("mains off", "mains off once more"):
            until_s = self.bench.clock.now() + PATIENCE_s
            proven = self._do(Deed(self.bench.mains, "off"))
            self.state.words.append(words if proven else f"{words}: not confirmed")
            look, quiet = self._watch(until_s, QUIET_FOR_s if proven else PATIENCE_s)
            if quiet or (proven and self._explained(look)):
                self.state.words.append(f"charger quiet: {_seen(look)}")
                return None
        self.state.words.append(f"charger not proven quiet: {_seen(look)}")
        return ALARM if look.sourcing else ALARM_UNKNOWN

    def _explained(self, look: Look) -> bool:
        """Whether the one that sees the charger deliver, against two and the mains' readback, is no witness."""
        if look.mains_on is not False or not look.mostly_quiet or len(look.delivering) != 1:
            return False
        (name,) = look.delivering
        if self._stands_still(name):
            self.state.words.append(f"the {name}'s meter stands still to its last digit: it does not measure")
            return True
        power = self.bench.signals.power
        if name == "ballast" and power is not None and self._do(power.b_plus.open, power.precharge.open):
            self.state.words.append("B+ opened: the ballast's meter hangs at open contacts")
            return True
        return False

    def _stands_still(self, name: str) -> bool:
        """Of shunt or ballast: equal readings for as long as was looked. Readbacks are too coarse to tell."""
        read = {"shunt": [one.shunt_A for one in self._looks], "ballast": [one.charger_V for one in self._looks]}
        values = read.get(name, [])
        return len(values) >= STILL_LOOKS and len(set(values)) == 1

    def _watch(self, until_s: float, hold_s: float) -> tuple[Look, bool]:
        """Look until the charger has been quiet for `hold_s`, or it is not and `until_s` has passed."""
        clock = self.bench.clock
        look, since_s = self._look(reopen=True), None
        self._looks = []
        while True:
            self._looks.append(look)
            now_s = clock.now()
            if not look.quiet:
                since_s = None
                if now_s >= until_s:
                    return look, False
            elif since_s is None:
                since_s = now_s
            elif now_s - since_s >= hold_s:
                return look, True
            clock.wait_until(now_s + LOOK_EVERY_s)
            look = self._look()

    def taps_down(self) -> None:
        """Step 5: all cell taps in one exchange."""
        self.taps_off = self._do(*(tap.off for tap in self.bench.signals.taps))

    def drain(self) -> None:
        """Step 6, first half: supply to zero while the load keeps a small current, until the node is low by meter."""
        bench, clock = self.bench, self.bench.clock
        self._do(Deed(bench.load, "current", DRAIN_A), Deed(bench.supply, "voltage", 0.0))
        begun_s, look = clock.now(), self._look()
        until_s, idle = begun_s + DRAIN_PATIENCE_s, True
        while not look.low and clock.now() < until_s:
            if idle and clock.now() - begun_s > PATIENCE_s and look.load is not None and look.load.mode == LoadMode.OFF:
                idle = False  # a charged capacitor keeps a node up for minutes when nothing draws from it
                self._do(*(Deed(bench.load, *what) for what in _TO_DRAIN))
            clock.wait_until(clock.now() + LOOK_EVERY_s)
            look = self._look()
        self.state.words.append(f"node at {look.node_V:.2f} V by meter")

    def outputs_off(self) -> tuple[bool, str | None]:
        """Step 6, second half, and the proof: whether all is proven off, and what to tell a person if it is not."""
        bench = self.bench
        off = self._do(Deed(bench.load, "off"), Deed(bench.supply, "off"))
        opened = self._do(*(contact.open for contact in bench.signals.contacts))
        for left in reversed(range(LAST_LOOKS)):  # one late answer must not spoil the proof
            bench.clock.wait_until(bench.clock.now() + LOOK_EVERY_s)
            look = self._look(reopen=True)
            on = _not_proven_off(look, off)
            on += ["cell taps not proven off"] * (not self.taps_off) + ["contacts not proven open"] * (not opened)
            if not on or not left:
                break
        self.state.words.append(f"NOT SAFE: {', '.join(on)}" if on else "safe: de-energised, not isolated")
        if math.isnan(look.node_V) or look.low:
            return not on, None
        return False, f"the node still carries {look.node_V:.1f} V: {BY_HAND}, switch supply and load off by hand"

    def _do(self, *deeds: Deed) -> bool:
        """Carry out settings side by side; returns whether all stand as set."""
        replies = self.bench.exchange([replace(deed.job, reopen=True) for deed in deeds], DEED_PATIENCE_s)
        done = True
        for deed, reply in zip(deeds, replies, strict=True):
            try:
                deed.speaker.verify(reply, deed.what, deed.value)
            except BenchFault as fault:
                self._trouble(fault)
                done = False
        return done

    def _look(self, *, reopen: bool = False) -> Look:
        bench, ballast_ohm = self.bench, self.bench.file.bench.wiring.node.ballast
        meters = (bench.node_meter, bench.charger_meter, bench.shunt_meter)
        jobs = [meter.reading("volts") for meter in meters]
        jobs += [speaker.reading("state") for speaker in (bench.supply, bench.load, bench.mains)]
        *volts, supply, load, mains = bench.exchange([replace(job, reopen=reopen) for job in jobs], LOOK_PATIENCE_s)
        seen_V = [self._read(meter.read, reply) for meter, reply in zip(meters, volts, strict=True)]
        node_V, charger_V, shunt_V = (math.nan if value is None else value for value in seen_V)
        return Look(
            shunt_V / bench.shunt_ohm,
            (charger_V - node_V) / ballast_ohm if ballast_ohm > 0 else math.nan,
            node_V,
            self._read(bench.mains.read, mains),
            self._read(bench.supply.read, supply),
            self._read(bench.load.read, load),
            charger_V,
        )

    def _read(self, read: Callable[[Reply], T], reply: Reply) -> T | None:
        try:
            return read(reply)
        except BenchFault as fault:
            self._trouble(fault)
            return None

    def _trouble(self, fault: BenchFault) -> None:
        if str(fault) not in self.state.troubles:
            self.state.troubles.append(str(fault))


_TO_DRAIN: tuple[tuple[str, float | None], ...] = (("constant_current", None), ("current", DRAIN_A), ("on", None))


def _seen(look: Look) -> str:
    named = zip(("shunt", "ballast", "load less supply"), look.witnesses_A, strict=True)
    said = (
        (name, "says nothing" if math.isnan(current_A) else f"{round(current_A, 3) + 0.0:.3f} A")
        for name, current_A in named
    )
    return ", ".join(f"{name} {words}" for name, words in said)


def _not_proven_off(look: Look, off: bool) -> list[str]:
    """What is not known to be off by readback, and the node if it is not low by meter. `off`: settings confirmed."""
    load_off = look.load is not None and (
        look.load.mode == LoadMode.OFF or (look.load.mode == LoadMode.TRIPPED and off)
    )
    supply_off = look.supply is not None and look.supply.mode == SupplyMode.OFF
    found = [("mains", look.mains_on is False), ("supply", supply_off), ("load", load_off)]
    outputs = [f"{name} not proven off" for name, good in found if not good]
    return outputs if look.low else [*outputs, "node not proven below 2 V"]
