"""The arithmetic that plays the pack: state of charge, relaxation, resistance, and how far time may be compressed.

Pure: currents in, the next node voltage out. Charging current is positive.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from sequencer.engine.stability import delay_scans, gain
from sequencer.model.pack import Pack
from sequencer.model.specification import Specification

NEAR_V = 0.010  # per cell around a declared band: there the pack is real; farther off no verdict hangs on it
FLAT = 0.005  # relative change of the current over LOOK_BACK_s below which it counts as constant
LOOK_BACK_s = 10.0
TAPER_SHARE = 0.02  # of the current: largest change within one response time away from the cut-off
NEAR_CUTOFF = 1.5  # times the declared cut-off's upper limit
LARGEST_STEP_V = (
    0.007  # per cell and scan: how far compressed charging may move (5 to 10 mV, common practice, no source)
)
BELOW_BOUND_V = 0.02  # per cell
LARGEST_MOVE_V = 0.010  # per cell and scan: how far any setting may move


def tap_volts(pack_V: float, cells: int, offsets_V: tuple[float, ...]) -> list[float]:
    """Voltages of the cells that supplies play, lowest first; the top cell is what is left to B+."""
    mean_V = pack_V / cells
    return [mean_V + offset_V for offset_V in offsets_V[: cells - 1]]


@dataclass(frozen=True)
class Follow:
    """How the stand-in follows the current at one pace: printed, recorded, and held against the charger's response."""

    Rp_ohm: float
    Rv_ohm: float
    delay_scans: int
    gain: float
    period_s: float

    @property
    def lag_s(self) -> float:
        return self.period_s / self.gain

    @classmethod
    def at(
        cls, pack_ohm: float, fixture_ohm: float, settling_s: float, period_s: float, forced: int | None = None
    ) -> Follow:
        """The rule of `stability`; `forced` replaces the measured delay (to show what the rule protects from)."""
        delay = delay_scans(settling_s, period_s) if forced is None else forced
        virtual_ohm = pack_ohm - fixture_ohm
        return cls(fixture_ohm, virtual_ohm, delay, gain(virtual_ohm / fixture_ohm, delay), period_s)


@dataclass(frozen=True)
class Events:
    """Where something is declared to happen, and how long the charger takes to decide."""

    bands_V: tuple[tuple[float, float], ...]  # per cell, (low, high), ascending
    cutoff_A: float | None
    response_s: float
    largest: float  # compression asked for by the procedure

    @classmethod
    def of(cls, specification: Specification, compression: float) -> Events:
        cutoff = specification.charge.cutoff
        high = None if cutoff is None else cutoff.high
        return cls(specification.events_V, high, specification.dwell.response, compression)


@dataclass
class Trail:
    """Currents of the last LOOK_BACK_s, to tell a constant current from a falling one."""

    points: list[tuple[float, float]] = field(default_factory=list)

    def add(self, time_s: float, current_A: float) -> None:
        self.points.append((time_s, current_A))
        while len(self.points) > 2 and self.points[1][0] <= time_s - LOOK_BACK_s:
            self.points.pop(0)

    @property
    def falling(self) -> bool:
        """Whether the current has come down over the last LOOK_BACK_s."""
        if len(self.points) < 3 or self.points[-1][0] - self.points[0][0] < 0.9 * LOOK_BACK_s:
            return False
        return self.points[-1][1] < self.points[0][1] * (1 - FLAT)


@dataclass
class StandIn:
    """The pack as it stands: `node_V` is what the supply is set to.

    held : its open-circuit voltage stands where it was set, whatever is charged.
    """

    pack: Pack
    soc: float
    node_V: float
    relaxation_V: float = 0.0
    compression: float = 1.0
    trail: Trail = field(default_factory=Trail)
    held: bool = False

    @classmethod
    def inserted(cls, pack: Pack, cell_V: float, held: bool = False) -> StandIn:
        soc = pack.soc_at(cell_V)
        return cls(pack, soc, pack.ocv_V(soc), held=held)

    def stand_at(self, cell_V: float) -> None:
        """Another open-circuit voltage per cell; the node goes there in steps of LARGEST_MOVE_V, scan by scan."""
        self.soc = self.pack.soc_at(cell_V)

    @property
    def ocv_V(self) -> float:
        return self.pack.ocv_V(self.soc)

    def move(self, dt_s: float, current_A: float, follow: Follow) -> float:
        """Let `current_A` flow for `dt_s`; returns the next node voltage to set."""
        if dt_s > 0:
            charge_Ah = current_A * dt_s * self.compression / 3600.0
            self.soc += 0.0 if self.held else charge_Ah / self.pack.capacity
            self._relax(dt_s, current_A)
        target_V = self.ocv_V + self.relaxation_V + current_A * follow.Rv_ohm
        step_V = follow.gain * (target_V - self.node_V)
        most_V = LARGEST_MOVE_V * self.pack.cells
        self.node_V = min(self.node_V + min(max(step_V, -most_V), most_V), self.highest_V)
        return self.node_V

    @property
    def highest_V(self) -> float:
        """The node is never played up to the guard's own bound: what passes that is not the stand-in's doing."""
        return self.pack.cells * (self.pack.cell_bound_V - BELOW_BOUND_V)

    def _relax(self, dt_s: float, current_A: float) -> None:
        branch = self.pack.relaxation
        if branch is None:
            return
        decay = math.exp(-dt_s / branch.time)
        self.relaxation_V = self.relaxation_V * decay + current_A * branch.resistance * (1 - decay)

    def choose_compression(self, time_s: float, charger_V: float, current_A: float, events: Events) -> float:
        """How many times faster the state of charge may move now; kept as `compression`."""
        self.trail.add(time_s, current_A)
        cell_V = charger_V / self.pack.cells
        if current_A <= 0:
            allowed = 1.0
        elif self.trail.falling:
            allowed = self._in_taper(current_A, events)
        else:
            allowed = self._in_plateau(cell_V, current_A, events)
        self.compression = max(1.0, min(allowed, events.largest))
        return self.compression

    def _in_taper(self, current_A: float, events: Events) -> float:
        """A tapering current may change by TAPER_SHARE within one response; near the cut-off the pack is real."""
        if events.cutoff_A is None or current_A < NEAR_CUTOFF * events.cutoff_A:
            return 1.0
        farads_h = self.pack.capacity / self.pack.slope_V(self.soc)
        time_constant_s = 3600.0 * farads_h * self.pack.resistance
        return TAPER_SHARE * time_constant_s / events.response_s

    def _in_plateau(self, cell_V: float, current_A: float, events: Events) -> float:
        """In and near a declared band the pack is real; elsewhere one scan moves a cell by LARGEST_STEP_V at most."""
        bands = [(low - NEAR_V, high + NEAR_V) for low, high in events.bands_V]
        above_all = bool(bands) and cell_V > bands[-1][0]
        if above_all or any(low < cell_V < high for low, high in bands):
            return 1.0
        real_rate_V = current_A * self.pack.slope_V(self.soc) / (3600.0 * self.pack.capacity)
        ahead = [low - cell_V for low, _ in bands if low > cell_V]
        room_V = min([LARGEST_STEP_V, *(gap / 2 for gap in ahead)])  # never run through a band between two scans
        return room_V * self.pack.cells / max(real_rate_V, 1e-9)
