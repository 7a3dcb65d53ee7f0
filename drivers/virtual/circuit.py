"""One circuit: charger, contacts, leads, ballast and shunt to the node; supply and load at the node.

Only the supply's own voltage has a time constant, so between two events every signal is a constant plus one
exponential. The circuit goes from event to event; the moment of a crossing is a logarithm, never a step.
There is no capacitance at the node: what is faster than the supply happens at once. With the power contacts open
the node is supply and load alone, and the charger's contacts keep what the charger drives, or fade.
"""

from __future__ import annotations

import heapq
import math
from collections.abc import Callable
from dataclasses import dataclass, field

from drivers.virtual.charger import Charger, Watch
from drivers.virtual.node import ApartLaw, Drive, NodeLaw, Path
from drivers.virtual.terminals import OPEN
from drivers.virtual.trace import CHARGER, LOAD_CURRENT, NODE, SHUNT, SUPPLY_CURRENT, Apart, Stretch, Trace

SETTLED_TAUS = 40.0  # e^-40 of 60 V is below the last digit of a float
MOST_EVENTS = 10_000  # in one advance without time passing: the circuit would be going round in circles
SIGNALS = (NODE, CHARGER, SHUNT, SUPPLY_CURRENT, LOAD_CURRENT)


@dataclass(frozen=True)
class Constants:
    """What is soldered: resistances in Ω, times in s."""

    leads_ohm: float
    ballast_ohm: float
    shunt_ohm: float
    delay_s: float  # from a command to the supply's reaction
    settling_s: float  # its time constant
    supply_most_A: float = math.inf  # a supply that limits earlier than it is told (trouble)

    @property
    def outer_ohm(self) -> float:
        return self.leads_ohm + self.ballast_ohm + self.shunt_ohm


@dataclass
class SupplyStage:
    """The supply's output stage: what it was told, and its protections."""

    voltage_V: float = 0.0
    limit_A: float = 0.0
    on: bool = False
    overvoltage_V: float = math.inf
    overcurrent_A: float = math.inf
    tripped: set[str] = field(default_factory=set)  # of "voltage", "current"

    @property
    def target_V(self) -> float:
        return self.voltage_V if self.on and not self.tripped else 0.0


@dataclass
class LoadStage:
    """The load's input stage and its protections."""

    current_A: float = 0.0
    on: bool = False
    overcurrent_A: float = math.inf
    overvoltage_V: float = math.inf
    overpower_W: float = math.inf
    tripped: set[str] = field(default_factory=set)  # of "voltage", "current", "power"

    @property
    def active_A(self) -> float:
        return self.current_A if self.on and not self.tripped else 0.0


class Circuit:
    """The bench's physics at `now_s`. Instruments `command`, `change`, act `later`; meters ask `value` and `mean`."""

    def __init__(self, constants: Constants, charger: Charger) -> None:
        self.constants = constants
        self.charger = charger
        self.terminals = charger.terminals
        charger.contacts_V = lambda: self._trace.value(CHARGER, self._moment_s)
        self.supply = SupplyStage()
        self.load = LoadStage()
        self.mains_on = False
        self.mains_fed = True  # whether there is mains behind the switch
        self._supply_most_A = constants.supply_most_A
        self.now_s = 0.0
        self.events = 0  # counted for ever
        self._pending: list[tuple[float, int, Callable[[], None]]] = []  # a heap; the number keeps the order given
        self._given = 0
        self._moment_s = 0.0  # of the last event or change
        self._origin_s, self._from_V, self._to_V = 0.0, 0.0, 0.0  # the supply's own voltage, an exponential
        self._at_V = 0.0  # the supply's own voltage at _moment_s
        self._next_s = math.inf
        self._apart: Apart | None = None  # the charger's contacts while its path is open
        self._fade_s, self._fade_V = math.inf, 0.0  # when they will have faded to a level that somebody watches
        self._held_since: dict[object, float] = {}
        nothing = (0.0,) * len(SIGNALS)
        self._trace = Trace(Stretch(0.0, 0.0, 0.0, nothing, nothing))
        self._changed = True
        self._resolve()

    # -- what instruments do ------------------------------------------------------------------------------

    def command(self, act: Callable[[], None]) -> None:
        """Let the supply do something after its command delay, in the order of the commands."""
        self.later(self.constants.delay_s, act)

    def later(self, delay_s: float, act: Callable[[], None]) -> None:
        """Let something happen after a delay; what is due at the same moment happens in the order given."""
        self._given += 1
        heapq.heappush(self._pending, (self.now_s + delay_s, self._given, act))
        self._next_s = min(self._next_s, self._pending[0][0])

    def change(self, act: Callable[[], None]) -> None:
        """Do something to a stage now."""
        self._run_to(self.now_s)
        self._moment_s = self.now_s
        self._at_V = self._own_V(self.now_s)
        act()
        self._changed = True
        self._resolve()

    def set_mains(self, on: bool) -> None:
        if on != self.mains_on:
            self.mains_on = on
            self.change(lambda: self.charger.mains(on and self.mains_fed))

    # -- troubles, as acts of an event ----------------------------------------------------------------------

    def feed(self, fed: bool) -> None:
        """The mains behind the switch go, or come back; the switch does not know."""
        self.mains_fed = fed
        self.charger.mains(self.mains_on and fed)

    def limit_supply(self, most_A: float) -> None:
        """The supply limits its current at `most_A`, whatever it is told."""
        self._supply_most_A = most_A

    # -- time ---------------------------------------------------------------------------------------------

    def advance_to(self, now_s: float) -> None:
        """Move the bench's time forward; all events up to then happen, each at its own moment."""
        self._run_to(now_s)
        self.now_s = max(self.now_s, now_s)

    def catch_up(self) -> None:
        """Let everything happen that is due by now; `value`, `mean` and `supply_mode` do so by themselves."""
        if self._next_s <= self.now_s:
            self._run_to(self.now_s)

    def value(self, signal: int, t_s: float) -> float:
        """A signal (NODE, CHARGER, ... of trace.py) at a moment of the last seconds; V or A."""
        self.catch_up()
        return self._trace.value(signal, t_s)

    def mean(self, signal: int, from_s: float, to_s: float) -> float:
        """The mean of a signal over a span within the last seconds, exact; V or A."""
        self.catch_up()
        return self._trace.mean(signal, from_s, to_s)

    @property
    def supply_mode(self) -> str:
        """off, cv, cc (at its current limit), or unregulated (pushed up by the charger)."""
        self.catch_up()
        if not self.supply.on or self.supply.tripped:
            return "off"
        v = self._own_V(self.now_s)
        if v < self._pushed_V:
            return "unregulated"
        return "cc" if v > self._limited_V else "cv"

    # -- events -------------------------------------------------------------------------------------------

    def _run_to(self, end_s: float) -> None:
        left, last_s = MOST_EVENTS, self._moment_s
        while self._next_s <= end_s:
            self._event(max(self._next_s, self._moment_s))
            left = left - 1 if self._moment_s == last_s else MOST_EVENTS
            last_s = self._moment_s
            if not left:
                raise RuntimeError(f"the virtual circuit does not settle at {last_s!r} s")

    def _event(self, moment_s: float) -> None:
        """The one event that is due: a crossing, the end of settling, a command, or a filter's end."""
        self.events += 1
        self._moment_s = moment_s
        if self._cross_s <= moment_s:
            self._at_V = self._cross_V
            if self._cross_V == self._to_V:  # settled
                self._origin_s, self._from_V = moment_s, self._to_V
        else:
            self._at_V = self._own_V(moment_s)
            if self._pending and self._pending[0][0] <= moment_s:
                heapq.heappop(self._pending)[2]()
            elif self._fade_s <= moment_s:
                self._apart = Apart(moment_s, math.nextafter(self._fade_V, 0.0), fades=True)
            else:
                self._due_watch.act()
            self._changed = True
        self._resolve()

    def _own_V(self, t_s: float) -> float:
        """The voltage that the supply would hold."""
        if self._from_V == self._to_V:
            return self._to_V
        decay = math.exp(-(t_s - self._origin_s) / self.constants.settling_s)
        return self._to_V + (self._from_V - self._to_V) * decay

    # -- the state between two events -----------------------------------------------------------------------

    def _resolve(self) -> None:
        """Find what holds from `_moment_s` on, and the next event."""
        if self._changed:
            self._relearn()
        ahead_V = self._next_corner()
        middle_V = 0.5 * (self._at_V + ahead_V)
        node_V = min(max(middle_V, self._pushed_V), self._limited_V)
        self._append_stretch(node_V, follows=node_V == middle_V)
        self._find_next(node_V, ahead_V)

    def _relearn(self) -> None:
        """After a change of any stage: the node's law, its corners, and all watches."""
        self._changed = False
        if self.supply.target_V != self._to_V:
            self._origin_s, self._from_V, self._to_V = self._moment_s, self._at_V, self.supply.target_V
            if self.constants.settling_s <= 0:
                self._from_V = self._at_V = self._to_V
        self.terminals.record(self._moment_s)
        seen = self._relearn_path(self.charger.drive())
        law = self._law
        self._pushed_V = law.pushed_V()
        self._limited_V = law.limited_V(min(self.supply.limit_A, self._supply_most_A))
        self._watches = [*self.charger.watches(seen), *self._protections(law)]
        self._find_fade(seen)
        corners = {*law.corners, self._pushed_V, self._limited_V, *(watch.node_V for watch in self._watches)}
        self._corners = sorted(corner for corner in corners if math.isfinite(corner))

    def _relearn_path(self, drive: Drive | None) -> NodeLaw | ApartLaw:
        """Set the node's law and path; returns the law that the charger sees at its contacts."""
        plan, contacts_ohm = self.charger.plan, self.terminals.path_ohm
        if contacts_ohm != OPEN:
            self._apart = None
            self._outer_ohm = self.constants.outer_ohm + contacts_ohm
            self._law = NodeLaw(drive, Path(plan.source_ohm, self._outer_ohm, plan.drain_S), self.load.active_A)
            return self._law
        at_V = self._apart.value(self._moment_s) if self._apart else self._trace.value(CHARGER, self._moment_s)
        self._apart = Apart(self._moment_s, drive.limit_V if drive else at_V, fades=drive is None)
        self._outer_ohm = 0.0
        self._law = NodeLaw(None, Path(0.0, 0.0, 0.0), self.load.active_A)
        return ApartLaw(self._apart.level_V)

    def _find_fade(self, seen: NodeLaw | ApartLaw) -> None:
        """When the charger's open contacts will have faded to the next level that the charger watches."""
        self._fade_s = math.inf
        if self._apart is None or isinstance(seen, NodeLaw):
            return
        below_V = [level_V for level_V in seen.levels_V if 0.0 < level_V < self._apart.level_V]
        if below_V:
            self._fade_V = max(below_V)
            self._fade_s = self._apart.reach_s(self._fade_V)

    def _protections(self, law: NodeLaw) -> list[Watch]:
        supply, load, found = self.supply, self.load, []
        if supply.on and not supply.tripped:
            found.append(self._trip("supply", supply.tripped, "voltage", supply.overvoltage_V))
            found.append(self._trip("supply", supply.tripped, "current", law.node_at_need(supply.overcurrent_A)))
        if not load.tripped:
            found.append(self._trip("load", load.tripped, "voltage", load.overvoltage_V))
            if load.active_A > load.overcurrent_A:
                found.append(self._trip("load", load.tripped, "current", law.node_at_load(load.overcurrent_A)))
            if load.active_A > 0:
                found.append(self._trip("load", load.tripped, "power", load.overpower_W / load.active_A))
        return found

    @staticmethod
    def _trip(who: str, tripped: set[str], cause: str, node_V: float) -> Watch:
        return Watch((who, cause), node_V, True, 0.0, lambda: tripped.add(cause))

    def _next_corner(self) -> float:
        """The next voltage on the supply's way at which something changes its law; its end if there is none."""
        at_V, to_V = self._at_V, self._to_V
        if to_V > at_V:
            return next((corner for corner in self._corners if at_V < corner < to_V), to_V)
        return next((corner for corner in reversed(self._corners) if to_V < corner < at_V), to_V)

    def _append_stretch(self, node_V: float, *, follows: bool) -> None:
        """`node_V` lies within the stretch; `follows`: the node goes along with the supply's own voltage."""
        swing_V = self._from_V - self._to_V if follows else 0.0
        level_V = self._to_V if follows else node_V
        (c0, c1), (l0, l1) = self._law.charger_line(node_V), self._law.load_line(node_V)
        outer, shunt = self._outer_ohm, self.constants.shunt_ohm
        charger_A, charger_dA = c0 + c1 * level_V, c1 * swing_V
        load_A, load_dA = l0 + l1 * level_V, l1 * swing_V
        sourcing = node_V > self._pushed_V
        supply = (load_A - charger_A, load_dA - charger_dA) if sourcing else (0.0, 0.0)
        level = (level_V, level_V + charger_A * outer, charger_A * shunt, supply[0], load_A)
        swing = (swing_V, swing_V + charger_dA * outer, charger_dA * shunt, supply[1], load_dA)
        tau_s = self.constants.settling_s if swing_V else 0.0
        self._trace.append(Stretch(self._moment_s, self._origin_s, tau_s, level, swing, self._apart))

    def _find_next(self, node_V: float, ahead_V: float) -> None:
        """Set the moment and kind of the next event."""
        self._cross_V, self._cross_s = ahead_V, self._reach_s(ahead_V)
        self._next_s = min(self._cross_s, self._fade_s, self._pending[0][0] if self._pending else math.inf)
        held_since, due_s = {}, math.inf
        for watch in self._watches:
            if watch.holds(node_V):
                since_s = held_since[watch.key] = self._held_since.get(watch.key, self._moment_s)
                if since_s + watch.dwell_s < due_s:
                    due_s, self._due_watch = since_s + watch.dwell_s, watch
        self._held_since = held_since
        self._next_s = min(self._next_s, due_s)

    def _reach_s(self, v: float) -> float:
        """When the supply's own voltage reaches v on its way; inf if it stands."""
        if self._from_V == self._to_V:
            return math.inf
        tau_s = self.constants.settling_s
        settled_s = self._origin_s + SETTLED_TAUS * tau_s
        if v == self._to_V:
            return settled_s
        return min(self._origin_s + tau_s * math.log((self._from_V - self._to_V) / (v - self._to_V)), settled_s)
