"""One look at the bench: a question to each instrument, side by side, and what came back."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TypeVar

from drivers.exchange import Job, Reply
from drivers.open_bench import OpenBench
from drivers.roles import LoadMode, LoadReading, SupplyMode, SupplyReading
from drivers.trouble import BenchFault

R = TypeVar("R", SupplyReading, LoadReading)
SOURCING_SHARE = 0.05  # of the load current that the supply must source for the node's voltage to be its own


@dataclass(frozen=True, slots=True)
class Seen:
    """One quantity: value, run time of its reading, and what was wrong if its instrument did not answer."""

    value: float
    time_s: float
    fault: BenchFault | None = None

    @property
    def good(self) -> bool:
        return self.fault is None and not math.isnan(self.value)


@dataclass(frozen=True, slots=True)
class Scan:
    """All of the fast group at one scan; charging current positive."""

    time_s: float
    node_V: Seen
    charger_V: Seen
    current_A: Seen
    supply: SupplyReading
    supply_seen: Seen
    load: LoadReading
    load_seen: Seen

    @property
    def faults(self) -> list[BenchFault]:
        seen = (self.node_V, self.charger_V, self.current_A, self.supply_seen, self.load_seen)
        return [one.fault for one in seen if one.fault is not None]

    @property
    def difference_A(self) -> float:
        """The charger's current by the second way: what the load takes less what the supply gives."""
        return self.load.current_A - self.supply.current_A

    @property
    def voltage_condition(self) -> bool:
        """Whether the supply holds the node: constant voltage, and sourcing a share of the load's current."""
        if self.load.mode != LoadMode.ON:
            return self.supply.mode == SupplyMode.CONSTANT_VOLTAGE
        sourcing = self.supply.current_A >= SOURCING_SHARE * self.load.current_A
        return self.supply.mode == SupplyMode.CONSTANT_VOLTAGE and sourcing


_NO_SUPPLY = SupplyReading(math.nan, math.nan, SupplyMode.OFF)
_NO_LOAD = LoadReading(math.nan, math.nan, LoadMode.OFF)


class Scanner:
    """Asks the fast group; one question an instrument and scan."""

    def __init__(self, bench: OpenBench) -> None:
        self._bench = bench
        self._jobs: list[Job] = [
            bench.node_meter.reading("volts"),
            bench.charger_meter.reading("volts"),
            bench.shunt_meter.reading("volts"),
            bench.supply.reading("state"),
            bench.load.reading("state"),
        ]

    def scan(self, wait_s: float) -> Scan:
        """Never raises for an instrument: a fault stands beside its quantity."""
        bench = self._bench
        node, charger, shunt, supply, load = bench.exchange(self._jobs, wait_s)
        supply_reading, supply_seen = _state(supply, bench.supply.read, _NO_SUPPLY)
        load_reading, load_seen = _state(load, bench.load.read, _NO_LOAD)
        shunt_V = _value(shunt, bench.shunt_meter.read)
        return Scan(
            bench.clock.now(),
            _value(node, bench.node_meter.read),
            _value(charger, bench.charger_meter.read),
            replace(shunt_V, value=shunt_V.value / bench.shunt_ohm),
            supply_reading,
            supply_seen,
            load_reading,
            load_seen,
        )


def _value(reply: Reply, read: Callable[[Reply], float]) -> Seen:
    try:
        return Seen(read(reply), reply.time_s)
    except BenchFault as fault:
        return Seen(math.nan, reply.time_s, fault)


def _state(reply: Reply, read: Callable[[Reply], R], none: R) -> tuple[R, Seen]:
    try:
        reading = read(reply)
    except BenchFault as fault:
        return none, Seen(math.nan, reply.time_s, fault)
    return reading, Seen(reading.voltage_V, reply.time_s)
