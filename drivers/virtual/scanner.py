"""The virtual scanner: a DC voltmeter behind a multiplexer, which reads a list of channels one after the other."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TypeAlias

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Drift, Imperfect, Span, generator
from drivers.virtual.instrument import COMMON, Instrument, nr3
from drivers.virtual.meter import OVER_RANGE, OVERLOAD
from drivers.virtual.parameters import Channels
from drivers.virtual.scpi import Command, Tree

SPANS = (
    Span(0.1, 0.000050, 0.000040, 1e-7),
    Span(1.0, 0.000050, 0.000010, 1e-6),
    Span(10.0, 0.000050, 0.000010, 1e-5),
)
THERMAL_V = 1e-6  # standard deviation of the thermal EMF of a multiplexer's relays; common practice, no source
CYCLES = 1.0  # its aperture, in power line cycles

Source: TypeAlias = Callable[[float, float], float]  # mean voltage between two moments


@dataclass(frozen=True)
class _Input:
    source: Source
    thermal: Drift


class Scanner(Instrument):
    family = "scanner"

    def __init__(
        self, name: str, circuit: Circuit, sources: Mapping[int, Source], seed: int, scale: float, line_Hz: float
    ) -> None:
        """`sources`: what the leads of each channel are on."""
        super().__init__(name, circuit)
        self._aperture_s = CYCLES / line_Hz
        self._adc = Imperfect(SPANS, seed, name, "voltage", scale)
        self._inputs = {
            channel: _Input(source, Drift(generator(seed, name, f"thermal EMF {channel}"), THERMAL_V * scale))
            for channel, source in sorted(sources.items())
        }
        self.tree = Tree((*COMMON, *_commands(Channels(tuple(self._inputs)))))

    def _measure(self, channels: tuple[int, ...]) -> str:
        self.circuit.catch_up()
        return ",".join(nr3(self._read(self._inputs[channel])) for channel in channels)

    def _read(self, place: _Input) -> float:
        """Time stands still between two advances: all channels of a list are read over the same aperture."""
        now_s = self.circuit.now_s
        true_V = place.source(now_s - self._aperture_s, now_s) + place.thermal.at(now_s)
        index = next((i for i, span in enumerate(SPANS) if abs(true_V) <= OVER_RANGE * span.range), None)
        if index is None:
            return OVERLOAD if true_V > 0 else -OVERLOAD
        return self._adc.read(true_V, now_s, index, CYCLES)


def _commands(channels: Channels) -> tuple[Command, ...]:
    return (
        Command(
            "MEASure:VOLTage[:DC]",
            "read channels in their best range, in the order of the list",
            ask=Scanner._measure,
            asks=(channels,),
        ),
    )
