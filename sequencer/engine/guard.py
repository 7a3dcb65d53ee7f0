"""The guard: bounds from bench and pack, and whose doing it was when one is passed. Pure.

No procedure and no command line option reaches a bound. A trip is put down to the charger only where every
output stood as set in the scan before and two independent readings agree on what tripped; unknown is the bench's.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

from drivers.bench import Limits
from drivers.roles import LoadMode, SupplyMode
from drivers.text.si import si
from drivers.trouble import BenchFault
from sequencer.engine.scan import Scan, Seen
from sequencer.model.pack import Pack

Cause = Literal["charger", "bench"]
CURRENT_SHARE = 2.0  # of the pack's rated current: beyond it a real pack would be in danger
REVERSE_A = 0.25  # more than this out of the pack is no charger's doing
AGREE_V = 0.05  # two voltage readings of one node, beyond what the current drops between them
AGREE_DROP = 0.25  # of that drop: leads before they are measured, a warm ballast after
APART_READINGS = 3
AGREE_SHARE = 0.02  # of the load current: ordinary readback of supply and load (0.1 % + 0.05 % of range each)
AGREE_FLOOR_A = 0.06
LIFTS_A = 0.05  # less than this does not lift a node that the supply holds
NEARLY_ALL = 0.85  # of the load's current: so much at least a charger delivers that takes the node from the supply
STALE_PERIODS = 3.0
CONDITION_PATIENCE_s = 2.0  # the current is still read so long after the node's voltage is no longer the supply's
LOST_READINGS = 3
MOVED_V = 0.02  # the node was moved by so much, and its meter must have seen it


@dataclass(frozen=True)
class Bounds:
    """What must not be passed."""

    node_V: float
    charger_V: float
    current_A: float
    charge_Ah: float
    time_s: float
    equal_readings: int

    @classmethod
    def of(cls, limits: Limits, pack: Pack) -> Bounds:
        highest_V = pack.cells * pack.cell_bound_V
        return cls(
            node_V=min(limits.node, highest_V),
            charger_V=min(limits.node, highest_V),
            current_A=min(limits.current, CURRENT_SHARE * pack.rated_current),
            charge_Ah=limits.charge,
            time_s=limits.time,
            equal_readings=limits.equal_readings,
        )


class Trip(Exception):
    """The guard ends the run: whose doing, which quantity, its value, the bound, and why that is so."""

    def __init__(self, cause: Cause, quantity: str, value: float, unit: str, bound: float, why: str) -> None:
        self.cause, self.quantity, self.value, self.unit, self.bound, self.why = (
            cause,
            quantity,
            value,
            unit,
            bound,
            why,
        )
        reading = quantity if math.isnan(value) else f"{quantity} {si(value, unit, 5)}"
        passed = "" if math.isnan(bound) else f" passed its bound {si(bound, unit, 5)}"
        super().__init__(f"{reading}{passed}: {why}")

    def as_dict(self) -> dict[str, object]:
        names = ("cause", "quantity", "value", "unit", "bound", "why")
        return {name: getattr(self, name) for name in names}


class LinkLost(Trip):
    """A link that is lost: the one trip from which a run may recover."""

    def __init__(self, quantity: str, fault: BenchFault) -> None:
        self.fault = fault
        super().__init__("bench", quantity, math.nan, "", math.nan, f"lost: {fault}")


@dataclass
class Guard:
    """Looks at every scan; raises Trip. Holds what it must remember: charge, equal readings, lost links."""

    bounds: Bounds
    ballast_ohm: float
    fixture_ohm: float | None = None  # all between contacts and node, once it has been measured
    connected: bool = True  # charger and node: False while B+ is open, when their meters may show anything
    held_s: float = 0.0  # since the scan before, by instruments that were waited for: no computer that slept
    charge_Ah: float = 0.0
    _before: Scan | None = None
    _equal: dict[str, tuple[float, int, float]] = field(default_factory=dict)
    _lost: dict[str, int] = field(default_factory=dict)
    _condition_lost_s: float | None = None
    _apart: int = 0
    _drawn_A: float | None = None  # what the load draws since it came on

    def check(self, scan: Scan, period_s: float, set_V: float | None = None) -> None:
        """Raise Trip where `scan` passes a bound; otherwise remember it. `set_V` is what the supply is set to."""
        self._check_links(scan)
        self._check_clock(scan, period_s)
        self._check_dead_meters(scan, set_V or 0.0)
        self._check_voltages(scan)
        self._check_current(scan)
        self._check_agreement(scan)
        self._check_outputs(scan)
        self._count(scan)
        self._learn_load(scan)
        self._before = scan

    def forget(self, connected: bool) -> None:
        """After the safe state, from which all begins anew; what has flowed and the run's time still count."""
        self.connected, self.fixture_ohm = connected, None
        self._before = self._condition_lost_s = self._drawn_A = None
        self._apart = 0
        self._equal.clear()
        self._lost.clear()

    def _learn_load(self, scan: Scan) -> None:
        """A load in constant current draws the same from its second scan on; later it is held against that."""
        if scan.load.mode != LoadMode.ON or scan.load_seen.fault is not None:
            self._drawn_A = self._drawn_A if scan.load_seen.fault is not None else None
        elif self._drawn_A is None and self._before is not None and self._before.load.mode == LoadMode.ON:
            self._drawn_A = scan.load.current_A

    def _check_links(self, scan: Scan) -> None:
        """One late answer is forgiven, LOST_READINGS in a row are a lost link; not a number trips at once."""
        named = (
            ("node voltage", scan.node_V),
            ("charger voltage", scan.charger_V),
            ("charger current", scan.current_A),
            ("supply state", scan.supply_seen),
            ("load state", scan.load_seen),
        )
        for name, seen in named:
            if seen.fault is not None:
                self._lost[name] = self._lost.get(name, 0) + 1
                if self._lost[name] >= LOST_READINGS or "link is closed" in seen.fault.what:
                    raise LinkLost(name, seen.fault)
            elif math.isnan(seen.value):
                raise Trip("bench", name, math.nan, "", math.nan, "its instrument answered overload or not a number")
            else:
                self._lost[name] = 0

    def _check_clock(self, scan: Scan, period_s: float) -> None:
        if self._before is None:
            return
        gap_s = scan.time_s - self._before.time_s
        if gap_s > max(STALE_PERIODS * period_s, 1.0) + period_s + self.held_s:
            raise Trip(
                "bench", "time between scans", gap_s, "s", STALE_PERIODS * period_s, "the computer slept or hung"
            )
        if scan.time_s > self.bounds.time_s:
            raise Trip("bench", "run time", scan.time_s, "s", self.bounds.time_s, "the bench's longest time has passed")

    def _check_dead_meters(self, scan: Scan, set_V: float) -> None:
        """A meter whose last digit stands still is dead; the node's only if the node was moved meanwhile.

        A quiet supply on a meter's high range may well repeat a reading to its last digit; a shunt's noise does not.
        """
        if not self.bounds.equal_readings:
            return
        self._check_dead("node voltage", "V", scan.node_V, set_V, MOVED_V)
        self._check_dead("charger current", "A", scan.current_A, 0.0, 0.0)

    def _check_dead(self, name: str, unit: str, seen: Seen, set_V: float, moved_V: float) -> None:
        if not seen.good:
            return
        value, count, first_set_V = self._equal.get(name, (math.nan, 0, set_V))
        same = seen.value == value
        count, first_set_V = (count + 1, first_set_V) if same else (1, set_V)
        self._equal[name] = (seen.value, count, first_set_V)
        if count >= self.bounds.equal_readings and abs(set_V - first_set_V) >= moved_V:
            why = f"{count} readings equal to the last digit: the meter does not measure"
            raise Trip("bench", name, seen.value, unit, math.nan, why)

    def _check_voltages(self, scan: Scan) -> None:
        for name, seen, bound in (
            ("charger voltage", scan.charger_V, self.bounds.charger_V),
            ("node voltage", scan.node_V, self.bounds.node_V),
        ):
            if name == "charger voltage" and not self.connected:
                continue  # what a charger shows at open contacts lifts no pack
            if seen.good and seen.value > bound:
                cause, why = self._voltage_cause(scan)
                raise Trip(cause, name, seen.value, "V", bound, why)

    def _check_current(self, scan: Scan) -> None:
        seen = scan.current_A
        if not seen.good:
            return
        if seen.value > self.bounds.current_A:
            cause, why = self._current_cause(scan)
            raise Trip(cause, "charger current", seen.value, "A", self.bounds.current_A, why)
        if seen.value < -REVERSE_A:
            why = "current flows out of the pack: the shunt is reversed or something else feeds the charger"
            raise Trip("bench", "charger current", seen.value, "A", -REVERSE_A, why)

    def _check_agreement(self, scan: Scan) -> None:
        """Without it a charger's meter that stands still would be a charger that regulates wrong."""
        if (
            not self.connected
            or self.fixture_ohm is None
            or not (scan.node_V.good and scan.charger_V.good and scan.current_A.good)
        ):
            return
        apart_V = self._apart_V(scan)
        self._apart = 0 if apart_V is None else self._apart + 1
        if apart_V is not None and self._apart >= APART_READINGS:
            why = "charger's and node's meter differ by so much more than the current drops between them"
            raise Trip("bench", "voltage between the meters", apart_V, "V", math.nan, why)

    def _apart_V(self, scan: Scan) -> float | None:
        """By how much the two voltage meters disagree, None where they agree."""
        between_V = scan.current_A.value * (self.fixture_ohm or self.ballast_ohm)
        gap_V = abs(scan.charger_V.value - scan.node_V.value - between_V)
        return gap_V if gap_V > AGREE_V + AGREE_DROP * abs(between_V) else None

    def _check_outputs(self, scan: Scan) -> None:
        if scan.load.mode == LoadMode.TRIPPED:
            raise Trip(
                "bench", "load state", scan.load.current_A, "A", math.nan, "the load tripped and let go of the node"
            )
        if scan.supply_seen.fault is not None or scan.load_seen.fault is not None or scan.voltage_condition:
            self._condition_lost_s = None
            return
        if scan.supply.mode == SupplyMode.OFF and scan.load.mode == LoadMode.OFF:
            return  # nothing is energised yet, or no longer
        if self._condition_lost_s is None:
            self._condition_lost_s = scan.time_s
        elif scan.time_s - self._condition_lost_s >= CONDITION_PATIENCE_s:
            cause, why = self._condition_cause(scan)
            raise Trip(cause, "supply current", scan.supply.current_A, "A", 0.05 * scan.load.current_A, why)

    def _count(self, scan: Scan) -> None:
        if self._before is not None and scan.current_A.good:
            self.charge_Ah += max(scan.current_A.value, 0.0) * (scan.time_s - self._before.time_s) / 3600.0
        if self.charge_Ah > self.bounds.charge_Ah:
            why = "more charge than the bench file allows in one run"
            raise Trip("charger", "charge", self.charge_Ah, "Ah", self.bounds.charge_Ah, why)

    # whose doing

    def _stood(self) -> str | None:
        """What was wrong with the outputs in the scan before, or None."""
        before = self._before
        if before is None:
            return "there was no scan before it"
        if before.supply.mode == SupplyMode.CONSTANT_CURRENT:
            return "the supply was in current limit in the scan before"
        if before.load.mode != LoadMode.ON:
            return "the load was not on in the scan before"
        if before.faults:
            return f"a reading was missing in the scan before ({before.faults[0]})"
        return None if self._draws(before) else "the load did not draw what it drew at first"

    def _draws(self, scan: Scan) -> bool:
        margin_A = AGREE_FLOOR_A + AGREE_SHARE * (self._drawn_A or 0.0)
        return self._drawn_A is not None and abs(scan.load.current_A - self._drawn_A) <= margin_A

    def _voltage_cause(self, scan: Scan) -> tuple[Cause, str]:
        wrong = self._stood()
        if wrong is not None:
            return "bench", wrong
        apart_V = self._apart_V(scan)
        if apart_V is not None:
            told = f"the two voltage meters differ by {si(apart_V, 'V')} more than the current drops between them"
            return "bench", told
        if abs(scan.supply.voltage_V - scan.node_V.value) > AGREE_V + 0.01 * scan.node_V.value:
            return "bench", "the node's meter and the supply's readback differ"
        if not self._agree_A(scan):
            return "bench", self._currents_differ(scan)
        if scan.current_A.value < LIFTS_A:
            return "bench", "no charging current flows: it is not the charger that lifts the node"
        return "charger", "outputs stood as set, and two independent readings agree"

    def unseen_A(self, scan: Scan) -> float | None:
        """What load minus supply shows of a charging current and the shunt does not; None where the two agree."""
        if not (scan.current_A.good and self.connected) or scan.supply_seen.fault or scan.load_seen.fault:
            return None
        return scan.difference_A if scan.difference_A > scan.current_A.value and not self._agree_A(scan) else None

    def _agree_A(self, scan: Scan) -> bool:
        margin_A = AGREE_FLOOR_A + AGREE_SHARE * abs(scan.load.current_A)
        return abs(scan.current_A.value - scan.difference_A) <= margin_A

    def _current_cause(self, scan: Scan) -> tuple[Cause, str]:
        wrong = self._stood()
        if wrong is not None:
            return "bench", wrong
        if not self._agree_A(scan):
            return "bench", self._currents_differ(scan)
        return "charger", "outputs stood as set, and shunt and load minus supply agree"

    @staticmethod
    def _currents_differ(scan: Scan) -> str:
        told = f"shunt {si(scan.current_A.value, 'A')}, load minus supply {si(scan.difference_A, 'A')}"
        return f"the two ways to measure the current differ ({told})"

    def _condition_cause(self, scan: Scan) -> tuple[Cause, str]:
        if scan.supply.mode == SupplyMode.CONSTANT_CURRENT:
            return "bench", "the supply is in current limit and no longer holds the node"
        if scan.supply.mode == SupplyMode.OFF or scan.load.mode != LoadMode.ON:
            return "bench", "supply or load is not on"
        if not self._agree_A(scan):
            return "bench", f"the supply no longer sources, and {self._currents_differ(scan)}"
        if not self._draws(scan):
            return "bench", "the load no longer draws what it drew at first"
        if scan.current_A.value < NEARLY_ALL * scan.load.current_A:
            return "bench", "the supply no longer sources, and the charger does not deliver what the load draws"
        return "charger", "the charger delivers nearly all that the load draws, and shunt and load minus supply agree"
