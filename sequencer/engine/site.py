"""What the methods share while a run goes on: the loop, the files, and what was measured on the way."""

from __future__ import annotations

import math
from dataclasses import dataclass

from drivers.open_bench import OpenBench
from sequencer.engine.loop import Loop
from sequencer.model.curves import Curve
from sequencer.model.pack import Pack
from sequencer.model.preferred import nominal_in
from sequencer.model.specification import Specification

Setpoint = float | str  # Ω, or "open" or "short"
NOMINAL_C = 25.0


@dataclass(frozen=True)
class Situation:
    """What the charger shall see at the pack's contacts; None: the bench does not play it."""

    cell_V: float
    id: Setpoint | None = None
    thermistor: Setpoint | None = None
    offsets_V: tuple[float, ...] = ()  # of each cell against the mean, lowest first; they sum to zero
    held: bool = False  # the pack's open-circuit voltage stands where it was set, whatever is charged


@dataclass
class Site:
    """One bench with one charger, one pack to play, one specification."""

    loop: Loop
    pack: Pack
    specification: Specification
    curve: Curve | None = None
    forced_delay: int | None = None
    settling_s: float | None = None
    fixture_ohm: float | None = None
    zero_V: float = 0.0
    control_A: float | None = None  # of the first control; later ones must charge within 5 % of it
    control_cell_V: float | None = None  # at which it was charged so
    situation: Situation | None = None
    vouched: bool = True  # nothing was refused since a nominal pack was last charged, or all of it has its control

    @property
    def bench(self) -> OpenBench:
        return self.loop.bench

    def hold_controls_against(self, current_A: float) -> None:
        """The pack that is in was charged with this current: later controls must be, at the same voltage."""
        self.control_A = current_A
        self.control_cell_V = None if self.situation is None else self.situation.cell_V

    def forget_fixture(self) -> None:
        """What lies between charger and node is measured anew at the next insertion, as at the first."""
        self.settling_s, self.fixture_ohm, self.zero_V = None, None, 0.0

    def nominal(self, cell_V: float, temperature_C: float = NOMINAL_C) -> Situation:
        """A pack that must be charged, as far as this bench plays it."""
        signals = self.bench.signals
        return Situation(
            cell_V,
            None if signals.id is None else self.nominal_id,
            None if signals.thermistor is None else self.ohm_at(temperature_C),
            (0.0,) * self.pack.cells if signals.taps else (),
        )

    @property
    def nominal_id(self) -> Setpoint:
        return nominal_id(self.specification, self.pack)

    def ohm_at(self, celsius: float) -> Setpoint:
        return "open" if self.curve is None else self.curve.ohm_at(celsius)

    def nominal_current(self) -> tuple[float, float]:
        """Low and high of the current that a nominal pack is declared to get, A."""
        return nominal_current(self.specification, self.pack)

    def declared_currents(self) -> list[tuple[float, float]]:
        """(low, high) of each current that an ID can select; the nominal one where none are declared."""
        bands = [(band.current.low, band.current.high) for band in self.specification.id_bands]
        known = [(low, high) for low, high in bands if low is not None and high is not None and low > 0]
        return known or [self.nominal_current()]


def nominal_id(specification: Specification, pack: Pack) -> Setpoint:
    """The ID resistance of a pack that must be charged, Ω; "open" where none is declared."""
    if pack.id is not None:
        return pack.id
    bands = specification.id_bands
    return nominal_in(bands[0].low_ohm, bands[0].high_ohm) if bands else "open"


def nominal_current(specification: Specification, pack: Pack) -> tuple[float, float]:
    """Low and high of the current that a nominal pack is declared to get, A."""
    stage, ohm = specification.charge.stages[0].current, nominal_id(specification, pack)
    for band in specification.id_bands:
        if isinstance(ohm, float) and band.low_ohm <= ohm <= band.high_ohm:
            stage = band.current
    low = stage.low if stage.low is not None and stage.low > 0 else (stage.high or 0.0)
    return low, stage.high or math.inf
