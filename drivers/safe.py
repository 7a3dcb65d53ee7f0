"""The safe state: energy source away first, absorber and voltage holder kept until the current is proven gone.

Order: 1 mains off. 2 two independent witnesses say that the charger no longer delivers. 3 if not, mains off once
more. 4 if still not, load and supply stay as they are and an alarm is raised. 5 (cell taps: none on this wiring).
6 supply to zero while the load drains the node, then load off, supply off. 7 (contacts: none on this wiring).
Only what readback and meter both show is called safe. Safe means de-energised, not isolated.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from drivers.open_bench import OpenBench
from drivers.roles import Deed, LoadMode, SupplyMode
from drivers.trouble import BenchFault

QUIET_CURRENT_A = 0.050
PATIENCE_s = 2.0
DRAIN_A = 0.080
SAFE_VOLTAGE_V = 2.0
DRAIN_PATIENCE_s = 10.0
LOOK_EVERY_s = 0.1
ALARM = "charger still sources: press the emergency stop, unplug the mains"


@dataclass
class SafeState:
    """What was done on the way, and whether the end was proven by readback and meter."""

    verified: bool = False
    words: list[str] = field(default_factory=list)
    troubles: list[str] = field(default_factory=list)
    alarm: bool = False


@dataclass(frozen=True)
class _Witnesses:
    """Charging current as three independent means see it; nan where one cannot say."""

    shunt_A: float
    ballast_A: float
    difference_A: float

    @property
    def agree_quiet(self) -> bool:
        """Two of three see less than QUIET_CURRENT_A flowing out of the charger (a drain from the node is allowed)."""
        seen = (self.shunt_A, self.ballast_A, self.difference_A)
        return sum(1 for current_A in seen if current_A < QUIET_CURRENT_A) >= 2


def to_safe_state(bench: OpenBench, alarm: Callable[[str], None] = lambda words: None) -> SafeState:
    """Walk the order; never raises for an instrument. `alarm` is called once if the charger still sources."""
    state = SafeState()
    if not _source_away(bench, state):
        state.alarm = True
        state.words.append(f"NOT SAFE, load and supply left as they are: {ALARM}")
        alarm(ALARM)
        return state
    _drain(bench, state)
    state.verified = _verify(bench, state)
    state.words.append("safe: de-energised, not isolated" if state.verified else "NOT SAFE: not all outputs proven off")
    return state


def _try(state: SafeState, bench: OpenBench, deeds: Sequence[Deed]) -> bool:
    done = True
    for deed in deeds:  # one by one: a lost link must not keep the next from being done
        try:
            bench.hands.do([deed])
        except BenchFault as fault:
            state.troubles.append(str(fault))
            done = False
    return done


def _source_away(bench: OpenBench, state: SafeState) -> bool:
    for attempt in ("mains off", "mains off once more"):
        _try(state, bench, [Deed(bench.mains, "off")])
        state.words.append(attempt)
        until_s = bench.clock.now() + PATIENCE_s
        while True:
            seen = _witnesses(bench, state)
            if seen.agree_quiet:
                state.words.append(f"charger quiet: shunt {seen.shunt_A:.3f} A, ballast {seen.ballast_A:.3f} A")
                return True
            if bench.clock.now() >= until_s:
                break
            bench.clock.wait_until(bench.clock.now() + LOOK_EVERY_s)
    return False


def _read(bench: OpenBench, state: SafeState, what: str) -> float:
    """One quantity, nan where its instrument cannot say."""
    try:
        match what:
            case "node":
                return bench.node_meter.read(bench.hands.ask(bench.node_meter.reading("volts")))
            case "charger":
                return bench.charger_meter.read(bench.hands.ask(bench.charger_meter.reading("volts")))
            case "shunt":
                return bench.shunt_meter.read(bench.hands.ask(bench.shunt_meter.reading("volts"))) / bench.shunt_ohm
            case "load":
                return bench.load.read(bench.hands.ask(bench.load.reading("state"))).current_A
        return bench.supply.read(bench.hands.ask(bench.supply.reading("state"))).current_A
    except BenchFault as fault:
        if str(fault) not in state.troubles:
            state.troubles.append(str(fault))
        return math.nan


def _witnesses(bench: OpenBench, state: SafeState) -> _Witnesses:
    drop_V = _read(bench, state, "charger") - _read(bench, state, "node")
    ballast_ohm = bench.file.bench.wiring.node.ballast
    return _Witnesses(
        _read(bench, state, "shunt"),
        drop_V / ballast_ohm if ballast_ohm > 0 else math.nan,
        _read(bench, state, "load") - _read(bench, state, "supply"),
    )


def _drain(bench: OpenBench, state: SafeState) -> None:
    """Supply to zero while the load keeps a small current, until the node is low by meter; then both off."""
    lowest = [Deed(bench.load, "current", DRAIN_A), Deed(bench.supply, "voltage", 0.0)]
    _try(state, bench, lowest)
    until_s = bench.clock.now() + DRAIN_PATIENCE_s
    while not (node_V := _read(bench, state, "node")) < SAFE_VOLTAGE_V and bench.clock.now() < until_s:
        bench.clock.wait_until(bench.clock.now() + LOOK_EVERY_s)
    state.words.append(f"node at {node_V:.2f} V by meter")
    _try(state, bench, [Deed(bench.load, "off"), Deed(bench.supply, "off")])


def _verify(bench: OpenBench, state: SafeState) -> bool:
    """Readback of each output, and the node by meter."""
    try:
        mains_on = bench.mains.read(bench.hands.ask(bench.mains.reading("state")))
        supply = bench.supply.read(bench.hands.ask(bench.supply.reading("state")))
        load = bench.load.read(bench.hands.ask(bench.load.reading("state")))
    except BenchFault as fault:
        state.troubles.append(str(fault))
        return False
    node_V = _read(bench, state, "node")
    quiet = not mains_on and supply.mode == SupplyMode.OFF and load.mode != LoadMode.ON
    return quiet and abs(node_V) < SAFE_VOLTAGE_V
