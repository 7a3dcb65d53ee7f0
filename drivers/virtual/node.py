"""The node as a law: what charger and load do at each node voltage, and where the supply's hold on it ends.

Charger and load are piecewise linear in the node voltage, and the current that the supply must give, `need`, never
falls when the node rises (Kirchhoff at the node: need = load - charger). So a supply that could hold any voltage
between zero and its current limit leaves the node at

    v = min(max(v_supply, pushed), limited),

`pushed` where the need is zero (above it the charger carries the load alone) and `limited` where the need is the
current limit. Everything else on the bench is a function of v.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

LOAD_MINIMUM_ohm = 0.05  # a load's transistors fully on: below current x this it cannot draw what is set


class Drive(NamedTuple):
    """A charger's output stage: constant current up to a voltage limit at its regulation point."""

    current_A: float
    limit_V: float


@dataclass(frozen=True, slots=True)
class Path:
    """The way from the charger's regulation point to the node, and what an idle charger's divider conducts."""

    source_ohm: float  # from the regulation point to the charger's contacts
    outer_ohm: float  # from the contacts to the node: leads, ballast, shunt
    drain_S: float

    @property
    def total_ohm(self) -> float:
        return self.source_ohm + self.outer_ohm


Line = tuple[float, float]  # a + b v as (a, b)


class NodeLaw:
    """Charger and load at the node, for one state of both; currents in A, voltages in V.

    The charger's current is positive into the node, the load's out of it.
    """

    def __init__(self, drive: Drive | None, path: Path, load_A: float) -> None:
        self._drive = drive
        self._path = path
        self._load_A = load_A
        self._knee_V = drive.limit_V - drive.current_A * path.total_ohm if drive else math.inf
        corners = {0.0, load_A * LOAD_MINIMUM_ohm} | ({max(self._knee_V, 0.0), drive.limit_V} if drive else set())
        self.corners = tuple(sorted(corners))

    def charger_line(self, v: float) -> Line:
        """The charger's current around the node voltage v."""
        if self._drive is None:
            return 0.0, -self._path.drain_S
        if v <= self._knee_V:
            return self._drive.current_A, 0.0
        if v < self._drive.limit_V:
            return self._drive.limit_V / self._path.total_ohm, -1.0 / self._path.total_ohm
        return 0.0, 0.0  # a rectifier: nothing flows back

    def load_line(self, v: float) -> Line:
        """The load's current around the node voltage v."""
        return (self._load_A, 0.0) if v >= self._load_A * LOAD_MINIMUM_ohm else (0.0, 1.0 / LOAD_MINIMUM_ohm)

    def need(self, v: float) -> float:
        """The current in A that the supply has to give for the node to stand at v."""
        (a, b), (c, d) = self.load_line(v), self.charger_line(v)
        return a - c + (b - d) * v

    def pushed_V(self) -> float:
        """The node voltage below which the charger gives more than the load takes."""
        return 0.0 if self.need(0.0) >= 0.0 else self._reaches(0.0)

    def limited_V(self, limit_A: float) -> float:
        """The highest node voltage at which the need stays within the supply's current limit; inf if always."""
        return self._reaches(math.nextafter(limit_A, math.inf))

    def _reaches(self, need_A: float) -> float:
        """The lowest v at which need(v) is at least `need_A`; inf if it never is."""
        left, at_left = 0.0, self.need(0.0)
        if at_left >= need_A:
            return 0.0
        for right in self.corners[1:]:
            at_right = self.need(right)
            if at_right >= need_A:
                return left + (need_A - at_left) * (right - left) / (at_right - at_left)
            left, at_left = right, at_right
        slope = self._path.drain_S if self._drive is None else 0.0
        return left + (need_A - at_left) / slope if slope > 0 else math.inf

    def node_at_contacts(self, level_V: float) -> float:
        """The lowest node voltage at which the charger's contacts stand at the level or above."""
        return self._node_at(level_V, self._path.outer_ohm)

    def node_at_regulation(self, level_V: float) -> float:
        """The lowest node voltage at which the charger's regulation point stands at the level or above."""
        return self._node_at(level_V, self._path.total_ohm)

    def _node_at(self, level_V: float, ohm: float) -> float:
        if self._drive is None:
            return level_V / (1.0 - self._path.drain_S * ohm)
        current_A, limit_V = self._drive
        if level_V - current_A * ohm <= self._knee_V:
            return level_V - current_A * ohm
        share = ohm / self._path.total_ohm  # on the regulated slope the point stands at v (1 - share) + limit share
        return (level_V - limit_V * share) / (1.0 - share) if share < 1.0 and level_V < limit_V else level_V

    def node_at_current_below(self, current_A: float) -> float:
        """The node voltage above which the charger's current lies below `current_A`."""
        if self._drive is None or self._drive.current_A < current_A:
            return -math.inf
        return self._drive.limit_V - current_A * self._path.total_ohm

    @staticmethod
    def node_at_load(current_A: float) -> float:
        """The node voltage from which the load can draw `current_A`."""
        return current_A * LOAD_MINIMUM_ohm

    def node_at_need(self, current_A: float) -> float:
        """The node voltage from which the supply gives more than `current_A`; inf if it never does."""
        return self._reaches(math.nextafter(current_A, math.inf))


class ApartLaw:
    """What a charger sees whose contacts hang on nothing: what stands there does not depend on the node.

    It answers as NodeLaw does: a node voltage that always holds, or one that never does. `levels_V`: what was asked.
    """

    def __init__(self, contacts_V: float) -> None:
        self._contacts_V = contacts_V
        self.levels_V: list[float] = []

    def node_at_contacts(self, level_V: float) -> float:
        self.levels_V.append(level_V)
        return -math.inf if self._contacts_V >= level_V else math.inf

    node_at_regulation = node_at_contacts

    @staticmethod
    def node_at_current_below(current_A: float) -> float:
        """No current flows."""
        return -math.inf
