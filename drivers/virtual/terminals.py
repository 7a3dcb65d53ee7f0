"""The pack's contacts, as the bench plays them and the charger sees them: power, ID, thermistor, cell taps.

Everything here is constant between two events of the circuit. An open contact is a resistance of infinity.
Contacts are named b_plus, b_minus, precharge, id, thermistor, and tap1, tap2, ... from the lowest junction up.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field

from drivers.virtual.charger_plan import Pin
from drivers.virtual.history import ALWAYS, Pulses, Steps

OPEN = math.inf
MOST_TAP_V = 6.5  # what a charger's input clamp holds a cell at that nothing absorbs


@dataclass
class Signal:
    """A programmable resistor behind its contact; `pin` is the charger's side of it, None where it has none."""

    resistor_ohm: float = OPEN
    pin: Pin | None = None
    sense: Steps = field(default_factory=Steps)  # V at the bench's side of the contact, in full excitation

    @property
    def pulses(self) -> Pulses:
        return Pulses(self.pin.every_s, self.pin.on_s) if self.pin else ALWAYS

    def sense_V(self, contact_ohm: float) -> float:
        """A divider: the reference over pull-up, contact and resistor (Ohm's law)."""
        if self.pin is None or contact_ohm == OPEN:
            return 0.0
        if self.resistor_ohm == OPEN:
            return self.pin.reference_V
        total_ohm = self.pin.pull_up_ohm + contact_ohm + self.resistor_ohm
        return self.pin.reference_V * self.resistor_ohm / total_ohm if total_ohm else 0.0

    def met_ohm(self, contact_ohm: float, test_A: float, *, excited: bool) -> float:
        """What an ohmmeter on the bench's side finds with its test current: the resistor, and a pin beside it."""
        if self.pin is None or contact_ohm == OPEN:
            return self.resistor_ohm
        aside_ohm = self.pin.pull_up_ohm + contact_ohm
        foreign_A = self.pin.reference_V / aside_ohm if excited else 0.0
        return _parallel(self.resistor_ohm, aside_ohm) * (test_A + foreign_A) / test_A


@dataclass
class Cell:
    """One isolated supply channel that plays a cell."""

    voltage_V: float = 0.0
    on: bool = False
    source_A: float = 0.0  # its current limit
    sink_A: float = 0.0  # what it can absorb

    def standing_V(self, out_A: float) -> float:
        """Its voltage while `out_A` is drawn (negative: pushed in); beyond its limits it gives way."""
        if not self.on:
            return 0.0
        if out_A > self.source_A:
            return 0.0
        return self.voltage_V if -out_A <= self.sink_A else MOST_TAP_V


@dataclass
class Tap:
    """One cell junction: the cell below it, its resistances, and its shunt's voltage over time."""

    cell: Cell
    shunt_ohm: float
    source_ohm: float
    shunt: Steps = field(default_factory=Steps)  # of what always flows
    moved: Steps = field(default_factory=Steps)  # of what is moved between cells, while it is


class Terminals:
    """All contacts of the pack. What is not wired is soldered in for good and of no interest to the charger."""

    def __init__(
        self,
        precharge_ohm: float | None = None,
        signals: Iterable[str] = (),
        taps: Iterable[Tap] = (),
        tap_drain_A: float = 0.0,
    ) -> None:
        """`precharge_ohm`: None where there are no power contacts; `signals`: of "id", "thermistor", those wired."""
        self.precharge_ohm = precharge_ohm
        self.signals = {name: Signal() for name in signals}
        self.taps = tuple(taps)
        self.tap_drain_A = tap_drain_A
        self.contacts: dict[str, float] = {}  # by name, Ω
        self.powered = False  # whether the charger has its mains
        self.moved_A: tuple[float, ...] = ()  # out of each cell while the charger moves charge, lowest first
        self.moving = ALWAYS  # when it does
        if precharge_ohm is not None:
            self.contacts |= {"b_plus": OPEN, "b_minus": OPEN, "precharge": OPEN}
        self.contacts |= dict.fromkeys(self.signals, OPEN)
        self.contacts |= {f"tap{number}": OPEN for number in range(1, len(self.taps) + 1)}

    def touch(self, name: str, ohm: float) -> None:
        """A contact closes with a resistance, or opens (OPEN)."""
        self.contacts[name] = ohm

    @property
    def path_ohm(self) -> float:
        """What the power contacts add to the charger's path; OPEN where there is none."""
        if self.precharge_ohm is None:
            return 0.0
        plus_ohm = _parallel(self.contacts["b_plus"], self.contacts["precharge"] + self.precharge_ohm)
        return plus_ohm + self.contacts["b_minus"]

    @property
    def _grounded(self) -> bool:
        return self.precharge_ohm is None or self.contacts["b_minus"] != OPEN

    def seen_ohm(self, name: str) -> float:
        """The resistance between a signal contact and B-, as the charger sees it."""
        return self.signals[name].resistor_ohm + self.contacts[name] if self._grounded else OPEN

    def met_ohm(self, name: str, test_A: float) -> float:
        """What an ohmmeter finds on the bench's side of a signal contact."""
        contact_ohm = self.contacts[name] if self._grounded else OPEN
        return self.signals[name].met_ohm(contact_ohm, test_A, excited=self.powered)

    def tap_A(self, number: int) -> float:
        """The current that the charger takes out of a tap, with what it moves between cells while it does."""
        return self._drain_A(number) + self._moving_A(number)

    def _drain_A(self, number: int) -> float:
        return self.tap_drain_A if self.reaches(number) and self.taps[number - 1].cell.on else 0.0

    def _moving_A(self, number: int) -> float:
        """What leaves at the top of the cell below less what comes back at the bottom of the cell above."""
        return self._out_of_A(number) - self._out_of_A(number + 1)

    def _out_of_A(self, cell: int) -> float:
        """The current out of a cell; none where one of its ends does not reach the charger."""
        if cell > len(self.moved_A) or not (self.reaches(cell - 1) and self.reaches(cell)):
            return 0.0
        return self.moved_A[cell - 1]

    def reaches(self, junction: int) -> bool:
        """Whether a junction is connected to the charger; 0 is B-, the one above all taps is B+."""
        if 0 < junction <= len(self.taps):
            return self.contacts[f"tap{junction}"] != OPEN and self._grounded
        return self._grounded if junction == 0 else self.path_ohm != OPEN

    def tap_ohm(self, number: int) -> float:
        """What lies between a junction and the charger's pin."""
        tap = self.taps[number - 1]
        return tap.source_ohm + tap.shunt_ohm + self.contacts[f"tap{number}"]

    def junctions_V(self) -> list[float]:
        """The junctions on the bench's side, from the lowest up, against B-."""
        heights, height_V = [], 0.0
        for number, tap in enumerate(self.taps, 1):
            height_V += tap.cell.standing_V(self._through_A(number))
            heights.append(height_V)
        return heights

    def standing_V(self, cell: Cell) -> float:
        """The voltage of one cell's channel, with what the charger takes through it."""
        for number, tap in enumerate(self.taps, 1):
            if tap.cell is cell:
                return cell.standing_V(self._through_A(number))
        return cell.standing_V(0.0)  # its junction leads to no contact of this charger

    def _through_A(self, number: int) -> float:
        """A cell's channel carries the currents of its own tap and of all above it."""
        return sum(self.tap_A(above) for above in range(number, len(self.taps) + 1))

    def pins_V(self) -> list[float]:
        """The taps at the charger's pins while it moves nothing; one that is open sinks to the pin below it."""
        pins, below_V = [], 0.0
        for number, junction_V in enumerate(self.junctions_V(), 1):
            if self.reaches(number):
                below_V = junction_V - self._drain_A(number) * self.tap_ohm(number)
            pins.append(below_V)
        return pins

    def record(self, t_s: float) -> None:
        """Note what the scanner can see from `t_s` on."""
        excited = self.powered and self._grounded
        for name, signal in self.signals.items():
            signal.sense.set(t_s, signal.sense_V(self.contacts[name]) if excited else 0.0)
        for number, tap in enumerate(self.taps, 1):
            tap.shunt.set(t_s, self._drain_A(number) * tap.shunt_ohm)
            tap.moved.set(t_s, self._moving_A(number) * tap.shunt_ohm)

    def shunt_V(self, tap: Tap, from_s: float, to_s: float) -> float:
        """Mean voltage over a tap's shunt, exact over any aperture."""
        return tap.shunt.mean(from_s, to_s) + tap.moved.mean(from_s, to_s, self.moving)


def _parallel(one_ohm: float, other_ohm: float) -> float:
    if OPEN in (one_ohm, other_ohm):
        return min(one_ohm, other_ohm)
    total_ohm = one_ohm + other_ohm
    return one_ohm * other_ohm / total_ohm if total_ohm else 0.0
