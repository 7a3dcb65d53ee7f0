"""The virtual cell supply: isolated low-power channels, 6 V / 0.5 A each, in series as the cells of the pack."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Imperfect, Span
from drivers.virtual.instrument import COMMON, Instrument, nr3
from drivers.virtual.parameters import Boolean, Channels, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.terminals import Cell

VOLTAGE = Number(0.0, 6.0, "V", default=0.0)
CURRENT = Number(0.0, 0.5, "A", default=0.1)
SPAN = Span(6.0, 0.0003, 0.0003, 0.001)
SINK_A = 0.05  # what a channel absorbs by its bleeder; common practice, no source


@dataclass
class Output:
    """One channel: what it was told, its cell, how wrong its meter and its programming are."""

    cell: Cell
    meter: Imperfect
    dac: Imperfect
    voltage: float = 0.0
    current: float = 0.1
    on: bool = False


class TapSupply(Instrument):
    family = "tap supply"

    def __init__(self, name: str, circuit: Circuit, cells: Mapping[int, Cell], seed: int, scale: float) -> None:
        """`cells`: what each channel plays."""
        super().__init__(name, circuit)
        self._outputs = {
            channel: Output(
                cell,
                Imperfect((SPAN,), seed, name, f"voltage {channel}", scale),
                Imperfect((SPAN,), seed, name, f"set voltage {channel}", scale),
            )
            for channel, cell in sorted(cells.items())
        }
        for output in self._outputs.values():
            output.cell.sink_A = SINK_A
        self.tree = Tree((*COMMON, *_commands(Channels(tuple(self._outputs)))))
        self.reset()

    def reset(self) -> None:
        channels = tuple(self._outputs)
        self._switch(False, channels)
        self._set_voltage(0.0, channels)
        self._set_current(CURRENT.default or 0.0, channels)

    def _set_voltage(self, value: float, channels: tuple[int, ...]) -> None:
        for output in self._of(channels):
            output.voltage = value
            self._later(output.cell, "voltage_V", max(output.dac.programmed(value), 0.0))

    def _set_current(self, value: float, channels: tuple[int, ...]) -> None:
        for output in self._of(channels):
            output.current = value
            self._later(output.cell, "source_A", value)

    def _switch(self, on: bool, channels: tuple[int, ...]) -> None:
        for output in self._of(channels):
            output.on = on
            self._later(output.cell, "on", on)

    def _of(self, channels: tuple[int, ...]) -> list[Output]:
        return [self._outputs[channel] for channel in channels]

    def _later(self, cell: Cell, what: str, value: float) -> None:
        self.circuit.command(partial(setattr, cell, what, value))

    def _measured(self, channels: tuple[int, ...]) -> str:
        self.circuit.catch_up()
        return ",".join(nr3(self._measure(output)) for output in self._of(channels))

    def _measure(self, output: Output) -> float:
        true_V = self.circuit.terminals.standing_V(output.cell)
        return output.meter.read(true_V, self.circuit.now_s)

    def _answer(self, what: str, channels: tuple[int, ...]) -> str:
        return ",".join(nr3(getattr(output, what)) for output in self._of(channels))

    def _states(self, channels: tuple[int, ...]) -> str:
        return ",".join(str(int(output.on)) for output in self._of(channels))


def _commands(channels: Channels) -> tuple[Command, ...]:
    one = (channels,)
    return (
        Command(
            "[SOURce:]VOLTage[:LEVel][:IMMediate][:AMPLitude]",
            "output voltage of channels",
            do=TapSupply._set_voltage,
            takes=(VOLTAGE, channels),
            ask=lambda self, which: self._answer("voltage", which),
            asks=one,
        ),
        Command(
            "[SOURce:]CURRent[:LEVel][:IMMediate][:AMPLitude]",
            "current limit of channels",
            do=TapSupply._set_current,
            takes=(CURRENT, channels),
            ask=lambda self, which: self._answer("current", which),
            asks=one,
        ),
        Command(
            "OUTPut[:STATe]",
            "channels on or off",
            do=TapSupply._switch,
            takes=(Boolean(), channels),
            ask=TapSupply._states,
            asks=one,
        ),
        Command(
            "MEASure[:SCALar]:VOLTage[:DC]",
            "voltage of channels, in the order of the list",
            ask=TapSupply._measured,
            asks=one,
        ),
    )
