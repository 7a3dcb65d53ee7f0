"""The virtual programmable resistor: up to 1 MΩ, open, or a short. While its relays move it is open."""

from __future__ import annotations

import math

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import generator
from drivers.virtual.instrument import COMMON, Instrument, setting
from drivers.virtual.parameters import Choice, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.terminals import OPEN, Signal

RESISTANCE = Number(0.0, 1e6, "OHM", default=1e6)
SET_SHARE, RESIDUAL_ohm = 0.001, 0.3  # half widths of its accuracy: of the setting, and whatever is set
RELAYS_ohm = 0.05  # most that one switching of the relays differs from another; common practice, no source
MOST = 0.8  # of the half widths: what one individual has


class Resistor(Instrument):
    family = "resistor"

    def __init__(self, name: str, circuit: Circuit, signal: Signal, seed: int, scale: float, glitch_s: float) -> None:
        """`glitch_s`: how long it is open while it switches."""
        super().__init__(name, circuit)
        self._signal = signal
        self._glitch_s = glitch_s
        width = min(scale, 1.0) * MOST
        self._gain = width * SET_SHARE * float(generator(seed, name, "resistance gain").uniform(-1.0, 1.0))
        # contacts and wires of the decades: never below nothing
        self._residual_ohm = width * RESIDUAL_ohm * float(generator(seed, name, "residual").uniform(0.0, 1.0))
        self._relays = generator(seed, name, "relays")
        self._most_relays_ohm = width * RELAYS_ohm
        self._relays_ohm = 0.0  # of the last switching
        self._switched = 0
        self._standing: tuple[str, float] = ("", math.nan)
        self.reset()

    def reset(self) -> None:
        self.mode, self.resistance = "OPEN", 1e6
        self._switch()

    @property
    def true_ohm(self) -> float:
        """What stands between the terminals once the relays have moved."""
        if self.mode == "OPEN":
            return OPEN
        set_ohm = self.resistance if self.mode == "RES" else 0.0
        return set_ohm * (1.0 + self._gain) + self._residual_ohm + self._relays_ohm

    def _choose(self, mode: str) -> None:
        self.mode = mode
        self._switch()

    def _set_resistance(self, value: float) -> None:
        self.resistance = value
        self._switch()

    def _switch(self) -> None:
        """Relays move only where something changes; while they do, and then anew, the terminals are open."""
        wanted = (self.mode, self.resistance if self.mode == "RES" else 0.0)
        if wanted == self._standing:
            return
        self._standing = wanted
        self._switched += 1
        self._relays_ohm = self._most_relays_ohm * float(self._relays.uniform(0.0, 1.0))
        number, ohm = self._switched, self.true_ohm
        self.circuit.change(lambda: self._become(OPEN))
        if ohm != OPEN:
            self.circuit.later(self._glitch_s, lambda: self._settle(number, ohm))

    def _settle(self, number: int, ohm: float) -> None:
        if number == self._switched:
            self._become(ohm)

    def _become(self, ohm: float) -> None:
        self._signal.resistor_ohm = ohm


Resistor.tree = Tree(
    (
        *COMMON,
        Command(
            "OUTPut:MODE",
            "a resistance, open, or a short",
            do=Resistor._choose,
            takes=(Choice(("RESistance", "OPEN", "SHORt")),),
            ask=lambda self: self.mode,
        ),
        setting("[SOURce:]RESistance[:LEVel]", "resistance", RESISTANCE, "resistance", Resistor._set_resistance),
    )
)
