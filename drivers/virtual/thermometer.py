"""The virtual thermometer in the air at the charger's inlet."""

from __future__ import annotations

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Drift, Imperfect, Span, generator
from drivers.virtual.instrument import COMMON, Instrument, nr3
from drivers.virtual.scpi import Command, Tree

SPAN = Span(100.0, 0.0, 0.003, 0.01)  # ±0.3 K: class B near room temperature (IEC 60751), from memory
ROOM_C = 0.2  # standard deviation of the room's own wander; common practice, no source


class Thermometer(Instrument):
    family = "thermometer"

    def __init__(self, name: str, circuit: Circuit, ambient_C: float, seed: int, scale: float) -> None:
        super().__init__(name, circuit)
        self._ambient_C = ambient_C
        self._room = Drift(generator(seed, name, "room"), ROOM_C * min(scale, 1.0))
        self._sensor = Imperfect((SPAN,), seed, name, "temperature", scale)

    def _measure(self) -> str:
        now_s = self.circuit.now_s
        return nr3(self._sensor.read(self._ambient_C + self._room.at(now_s), now_s))


Thermometer.tree = Tree(
    (*COMMON, Command("MEASure[:SCALar]:TEMPerature", "temperature in degrees Celsius", ask=Thermometer._measure))
)
