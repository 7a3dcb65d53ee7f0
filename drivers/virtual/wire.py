"""The instruments of a virtual bench, each made for the place where it stands and wired to the circuit there."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from typing import TypeVar

from drivers.virtual.circuit import Circuit
from drivers.virtual.contacts import Contacts
from drivers.virtual.imperfection import generator
from drivers.virtual.instrument import Instrument
from drivers.virtual.load import Load
from drivers.virtual.mains import MainsSwitch
from drivers.virtual.meter import Meter
from drivers.virtual.plain_power import PlainLoad, PlainSupply, PlainTapSupply
from drivers.virtual.plan import Plan
from drivers.virtual.resistor import Resistor
from drivers.virtual.scanner import Resistance, Scanner, Source
from drivers.virtual.supply import Supply
from drivers.virtual.tap_supply import TapSupply
from drivers.virtual.terminals import Cell, Signal, Tap
from drivers.virtual.thermometer import Thermometer
from drivers.virtual.trace import CHARGER, NODE, SHUNT

_LEADS_ON = {"node.voltage": NODE, "node.charger_voltage": CHARGER, "node.current.meter": SHUNT}
T = TypeVar("T")
SIGNALS = ("id", "thermistor")


def drawn_ohm(plan: Plan, seed: int, name: str, ohm: float, tolerance: float) -> float:
    """A shunt as this individual bench has it, within its tolerance."""
    drawn = float(generator(seed, name, "resistance").uniform(-1.0, 1.0))
    return ohm * (1.0 + drawn * tolerance * min(plan.errors, 1.0))


def made_taps(plan: Plan, seed: int) -> tuple[Tap, ...]:
    """All taps that the bench has, from the lowest up."""
    return tuple(
        Tap(Cell(), drawn_ohm(plan, seed, f"tap shunt {number}", tap.ohm, tap.tolerance), plan.tap_ohm)
        for number, tap in enumerate(plan.taps, 1)
    )


def wired_signals(plan: Plan) -> list[str]:
    """Which of "id" and "thermistor" the bench plays."""
    return [name for name in SIGNALS if f"{name}.resistor" in dict(plan.places)]


@dataclass(frozen=True)
class Wirer:
    """Makes the instruments of one bench."""

    plan: Plan
    seed: int
    circuit: Circuit
    taps: tuple[Tap, ...]

    def instruments(self) -> dict[str, Instrument]:
        """By name, in the order of the wiring; several places may share one."""
        first_places: dict[str, str] = {}
        for where, name in self.plan.places:
            first_places.setdefault(name, where)
        return {name: self._instrument(where, name) for name, where in first_places.items()}

    def _instrument(self, where: str, name: str) -> Instrument:
        """One virtual instrument a role and family; whatever the dialect holds must make itself understood."""
        plan, seed, circuit = self.plan, self.seed, self.circuit
        if where in _LEADS_ON:
            return Meter(name, circuit, _LEADS_ON[where], seed, plan.errors, plan.line_Hz, plan.meter_delay_s)
        match where.split(".")[-1]:
            case "supply" if where == "node.supply":
                return (PlainSupply if name in plan.plain else Supply)(
                    name, circuit, seed, plan.errors, plan.node_offset_V
                )
            case "load":
                return (PlainLoad if name in plan.plain else Load)(name, circuit, seed, plan.errors)
            case "switch":
                return MainsSwitch(name, circuit)
            case "resistor":
                signal = circuit.terminals.signals[where.split(".")[0]]
                return Resistor(name, circuit, signal, seed, plan.errors, plan.glitch_s)
            case "supply":
                cells = self._at(name, self._cell)
                return (PlainTapSupply if name in plan.plain else TapSupply)(name, circuit, cells, seed, plan.errors)
            case "meter" | "sense":
                return Scanner(name, circuit, self._at(name, self._source), seed, plan.errors, plan.line_Hz)
            case "thermometer":
                return Thermometer(name, circuit, plan.ambient_C, seed, plan.errors)
        return self._contacts(name)

    def _contacts(self, name: str) -> Contacts:
        plan = self.plan
        welded = plan.welded[1] if plan.welded and plan.welded[0] == name else None
        contacts = self._at(name, self._contact)
        return Contacts(name, self.circuit, contacts, self.seed, plan.errors, plan.contact_walk_ohm, welded)

    def _at(self, name: str, found: Callable[[str], T]) -> dict[int, T]:
        return {channel: found(where) for where, channel in self._channels(name)}

    def _channels(self, name: str) -> Iterator[tuple[str, int]]:
        names = dict(self.plan.places)
        return ((where, channel) for where, channel in self.plan.channels if names[where] == name)

    def _cell(self, where: str) -> Cell:
        return self.taps[int(where.split(".")[1])].cell

    @staticmethod
    def _contact(where: str) -> str:
        """The name of the contact at "node.contacts.b_plus", "id.contact" or "taps.0.contact"."""
        parts = where.split(".")
        if parts[0] == "taps":
            return f"tap{int(parts[1]) + 1}"
        return parts[0] if parts[0] in SIGNALS else parts[-1]

    def _source(self, where: str) -> tuple[Source, Resistance]:
        """What a scanner's channel is on: a tap's shunt, or the bench's side of a signal contact."""
        parts = where.split(".")
        if parts[0] == "taps":
            tap = self.taps[int(parts[1])]
            return partial(self.circuit.terminals.shunt_V, tap), lambda test_A: tap.shunt_ohm
        terminals = self.circuit.terminals
        return self._sense(terminals.signals[parts[0]]), lambda test_A: terminals.met_ohm(parts[0], test_A)

    @staticmethod
    def _sense(signal: Signal) -> Source:
        return lambda from_s, to_s: signal.sense.mean(from_s, to_s, signal.pulses)
