"""A virtual charger as a state machine: its output stage in each state, and what it watches there.

Every watch has a filter time: its condition must hold without a break for that long. The circuit finds the exact
moment. States: off (no mains, or dead), waiting (for a pack), surge, charging, ended.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

from drivers.virtual.node import Drive, NodeLaw

PACK_PRESENT_V = 0.5  # per cell: below this a charger sees no pack; common practice, no source
IDLE_DRAIN_A = 0.2e-3  # what the divider of an idle charger takes from a full pack; common practice, no source


@dataclass(frozen=True)
class Stage:
    """One current stage; `until_V` is the pack voltage at the regulation point that ends it (None: cc-cv)."""

    current_A: float
    until_V: float | None = None


@dataclass(frozen=True)
class ChargerPlan:
    """What a charger does, in numbers; voltages are of the whole pack. No defaults: the file model has them."""

    name: str
    cells: int
    stages: tuple[Stage, ...]
    limit_V: float  # regulation voltage of a cc-cv charger, ceiling of another
    cutoff_A: float | None  # cc-cv: the charge ends below this current
    ends: bool
    start_delay_s: float
    response_s: float
    source_ohm: float
    works: bool
    surge_A: float = 0.0  # current at the start, for `surge_s`
    surge_s: float = 0.0

    @property
    def drain_S(self) -> float:
        return IDLE_DRAIN_A / (4.2 * self.cells)


class Watch(NamedTuple):
    """Acts when the node has stood at `node_V` or above (`above`) or below it (not `above`) for `dwell_s`."""

    key: object  # the same condition keeps its key; its time runs on when other things on the bench change
    node_V: float
    above: bool
    dwell_s: float
    act: Callable[[], None]

    def holds(self, v: float) -> bool:
        return (v >= self.node_V) is self.above


class Charger:
    """The state of one charger. The circuit calls `mains`, reads `drive` and `watches`, and runs what is due."""

    def __init__(self, plan: ChargerPlan) -> None:
        self.plan = plan
        self.state = "off"
        self.stage = 0
        self._entered = 0  # counts transitions, so that no filter's time survives one

    def mains(self, on: bool) -> None:
        """Connect or disconnect the mains; on again after off starts anew."""
        if not on:
            self._enter("off")
        elif self.state == "off" and self.plan.works:
            self._enter("waiting")

    def drive(self) -> Drive | None:
        """The output stage as it stands; None where nothing is driven."""
        if self.state == "surge":
            return Drive(self.plan.surge_A, self.plan.limit_V)
        if self.state == "charging":
            return Drive(self.plan.stages[self.stage].current_A, self.plan.limit_V)
        return None

    def watches(self, law: NodeLaw) -> list[Watch]:
        """What the charger waits for in its state."""
        present_V = law.node_at_contacts(PACK_PRESENT_V * self.plan.cells)
        response_s = self.plan.response_s
        if self.state == "off":
            return []
        if self.state == "waiting":
            return [self._watch("pack", present_V, True, self.plan.start_delay_s, self._start)]
        found = [self._watch("no pack", present_V, False, response_s, self._lost)]
        if self.state == "surge":
            found.append(self._watch("surge", -math.inf, True, self.plan.surge_s, self._charge))
        elif self.state == "charging" and not (self._is_last() and not self.plan.ends):
            found.append(self._watch("stage", self._stage_ends_at(law), True, response_s, self._next_stage))
        return found

    def _watch(self, what: str, node_V: float, above: bool, dwell_s: float, act: Callable[[], None]) -> Watch:
        return Watch((what, self._entered), node_V, above, dwell_s, act)

    def _stage_ends_at(self, law: NodeLaw) -> float:
        until_V = self.plan.stages[self.stage].until_V
        if until_V is not None:
            return law.node_at_regulation(until_V)
        assert self.plan.cutoff_A is not None
        return law.node_at_current_below(self.plan.cutoff_A)

    def _is_last(self) -> bool:
        return self.stage == len(self.plan.stages) - 1

    def _enter(self, state: str) -> None:
        self.state = state
        self._entered += 1

    def _start(self) -> None:
        self.stage = 0
        self._enter("surge" if self.plan.surge_s > 0 else "charging")

    def _charge(self) -> None:
        self._enter("charging")

    def _lost(self) -> None:
        self._enter("waiting")

    def _next_stage(self) -> None:
        if self._is_last():
            self._enter("ended")
        else:
            self.stage += 1
            self._enter("charging")
