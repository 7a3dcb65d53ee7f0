"""The virtual scanner: a voltmeter and two-wire ohmmeter behind a multiplexer, which reads a list of channels."""

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
OHM_SPANS = (
    Span(1e3, 0.00010, 0.000010, 1e-3),
    Span(1e4, 0.00010, 0.000010, 1e-2),
    Span(1e5, 0.00010, 0.000010, 1e-1),
    Span(1e6, 0.00012, 0.000010, 1.0),
)
TEST_A = (1e-3, 1e-4, 1e-5, 1e-6)  # what each of them drives through the resistor; common practice, no source
LEADS_ohm = 0.08  # most that leads and relays add once they have been nulled; common practice, no source
CYCLES = 1.0  # its aperture, in power line cycles

Source: TypeAlias = Callable[[float, float], float]  # mean voltage between two moments
Resistance: TypeAlias = Callable[[float], float]  # volts per ampere that a test current finds there now


@dataclass(frozen=True)
class _Input:
    source: Source
    resistance: Resistance
    thermal: Drift
    leads_ohm: float


class Scanner(Instrument):
    family = "scanner"

    def __init__(
        self,
        name: str,
        circuit: Circuit,
        sources: Mapping[int, tuple[Source, Resistance]],
        seed: int,
        scale: float,
        line_Hz: float,
    ) -> None:
        """`sources`: what the leads of each channel are on, for a voltmeter and for an ohmmeter."""
        super().__init__(name, circuit)
        self._aperture_s = CYCLES / line_Hz
        self._adc = Imperfect(SPANS, seed, name, "voltage", scale)
        self._ohmmeter = Imperfect(OHM_SPANS, seed, name, "resistance", scale)
        self._inputs = {
            channel: _Input(
                source,
                resistance,
                Drift(generator(seed, name, f"thermal EMF {channel}"), THERMAL_V * scale),
                min(scale, 1.0) * LEADS_ohm * float(generator(seed, name, f"leads {channel}").uniform(0.0, 1.0)),
            )
            for channel, (source, resistance) in sorted(sources.items())
        }
        self.tree = Tree((*COMMON, *_commands(Channels(tuple(self._inputs)))))

    def _measure(self, channels: tuple[int, ...]) -> str:
        self.circuit.catch_up()
        return ",".join(nr3(self._read(self._inputs[channel])) for channel in channels)

    def _measure_ohms(self, channels: tuple[int, ...]) -> str:
        self.circuit.catch_up()
        return ",".join(nr3(self._read_ohm(self._inputs[channel])) for channel in channels)

    def _read_ohm(self, place: _Input) -> float:
        """In the finest range that holds it; what else drives the same leads is read as resistance too."""
        for index, (span, test_A) in enumerate(zip(OHM_SPANS, TEST_A, strict=True)):
            true_ohm = place.resistance(test_A) + place.leads_ohm
            if abs(true_ohm) <= OVER_RANGE * span.range:
                return self._ohmmeter.read(true_ohm, self.circuit.now_s, index, CYCLES)
        return OVERLOAD

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
        Command(
            "MEASure:RESistance",
            "measure resistances by two wires, in the order of the list",
            ask=Scanner._measure_ohms,
            asks=(channels,),
        ),
    )
