"""A whole virtual bench: one circuit, one charger, all instruments, one time."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import TYPE_CHECKING

from drivers.virtual.charger import Charger
from drivers.virtual.circuit import Circuit, Constants
from drivers.virtual.plan import Plan, plan_of
from drivers.virtual.terminals import Terminals
from drivers.virtual.troubles import arrange
from drivers.virtual.wire import Wirer, drawn_ohm, made_taps, wired_signals

if TYPE_CHECKING:
    from drivers.bench import Bench
    from drivers.virtual.charger_file import ChargerFile

TICKS_PER_s = 1_000_000_000  # time is counted in whole nanoseconds: ten steps of 0.1 s are one second exactly


def _no_stopwatch() -> float:
    return 0.0


class World:
    """The virtual bench. `advance` moves its time; between two advances time stands still."""

    def __init__(self, plan: Plan, seed: int, stopwatch: Callable[[], float] = _no_stopwatch) -> None:
        """`stopwatch`: seconds of some wall clock, to find how long the circuit itself works."""
        self.plan = plan
        self.seed = seed
        self.busy_s = 0.0
        self._ticks = 0
        self._stopwatch = stopwatch
        taps = made_taps(plan, seed)
        terminals = Terminals(plan.precharge_ohm, wired_signals(plan), taps[: plan.charger.cells - 1])
        self.charger = Charger(plan.charger, terminals)
        self.circuit = Circuit(_constants(plan, seed), self.charger)
        self.instruments = Wirer(plan, seed, self.circuit, taps).instruments()
        arrange(plan.troubles, self.circuit, self.instruments)
        self.circuit.catch_up()

    @classmethod
    def build(
        cls, bench: Bench, charger: ChargerFile, seed: int, stopwatch: Callable[[], float] = _no_stopwatch
    ) -> World:
        """The world of a virtual bench. Raises ValueError for a bench without a 'virtual' section."""
        return cls(plan_of(bench, charger), seed, stopwatch)

    @property
    def now(self) -> float:
        """Seconds since the world was made."""
        return self._ticks / TICKS_PER_s

    @property
    def exchanges(self) -> int:
        """Messages that the instruments have heard."""
        return sum(instrument.messages for instrument in self.instruments.values())

    def advance(self, dt_s: float) -> float:
        """Let `dt_s` seconds pass (rounded to a nanosecond) and return the new time. Raises ValueError below 0."""
        ticks = round(dt_s * TICKS_PER_s) if math.isfinite(dt_s) else -1
        if ticks < 0:
            raise ValueError(f"time cannot be advanced by {dt_s} s; expected a finite number of 0 or more")
        begun_s = self._stopwatch()
        self._ticks += ticks
        self.circuit.advance_to(self.now)
        self.busy_s += self._stopwatch() - begun_s
        return self.now


def _constants(plan: Plan, seed: int) -> Constants:
    """What is soldered; the shunt as this individual bench has it."""
    shunt_ohm = drawn_ohm(plan, seed, "shunt", plan.shunt_ohm, plan.shunt_tolerance) * plan.shunt_factor
    return Constants(
        leads_ohm=plan.leads_ohm,
        ballast_ohm=plan.ballast_ohm,
        shunt_ohm=shunt_ohm,
        delay_s=plan.delay_s,
        settling_s=plan.settling_s,
        supply_most_A=math.inf if plan.supply_most_A is None else plan.supply_most_A,
    )
