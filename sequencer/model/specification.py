"""The specification: what this charger model is declared to do, with limits and the decision rule."""

from __future__ import annotations

from itertools import pairwise
from typing import Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from drivers.text.binding import Written
from drivers.text.measures import (
    AmpereLimit,
    Band,
    Flag,
    PositiveAmperes,
    PositiveSeconds,
    Rule,
    Seconds,
    VoltLimit,
    refuse,
)
from sequencer.model.low_start import LowStart
from sequencer.model.signals import Balancing, IdBand, IdElsewhere, TapTrip, TemperatureWindow

Algorithm = Literal["cc-cv", "stepped-cc", "stepped-cc-cv", "cc-only", "cv-only", "constant-power", "pulsed"]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class Stage(_Part):
    """One constant-current stage, in the order of the charge."""

    current: AmpereLimit
    threshold_per_cell: VoltLimit | None = Field(None, description="charger-side voltage at which the stage ends")


class Charge(_Part):
    """What a full charge is declared to look like. What is left out is not judged."""

    algorithm: Algorithm | None = None
    stages: tuple[Stage, ...] = ()
    voltage_per_cell: VoltLimit | None = Field(None, description="constant-voltage regulation")
    end_voltage_per_cell: VoltLimit | None = Field(None, description="largest 1 s mean at the charger's contacts")
    cutoff: AmpereLimit | None = Field(None, description="current just before the charge ends")
    ends: Flag | None = Field(None, description="whether the charger ends the charge by itself")
    current_after_end: AmpereLimit | None = None

    @model_validator(mode="after")
    def _has_a_current(self) -> Charge:
        if not self.stages:
            raise refuse("charge: 'stages' needs the declared current at least: stages: [{current: 3 A ± 5 %}]")
        for stage in self.stages:
            if stage.current.high is None or stage.current.high <= 0:
                raise refuse(f'charge.stages: "{stage.current.text}" has no upper end above 0 A')
        return self


class Dwell(_Part):
    """Times that follow from how this model behaves; all waiting is derived from them."""

    start_delay: Seconds
    clear: Seconds
    response: PositiveSeconds = Field(description="filter time of the charger's own decisions")


class Specification(Written):
    """Limits on findings, and the rule that turns a finding into a verdict."""

    model: str
    pack: str = Field(description="name of a shipped pack, or path of a pack file")
    rule: Rule = "guarded"
    dwell: Dwell
    rating_current: PositiveAmperes | None = Field(None, description="rating plate: largest current it can deliver")
    charge: Charge
    id_bands: tuple[IdBand, ...] = Field((), description="ID resistances and the current that each selects")
    id_elsewhere: IdElsewhere = IdElsewhere()
    temperature: TemperatureWindow | None = None
    tap_trip: TapTrip | None = None
    low_start: LowStart | None = None
    balancing: Balancing | None = None

    @model_validator(mode="after")
    def _bands_apart(self) -> Specification:
        ordered = sorted(self.id_bands, key=lambda band: band.low_ohm)
        for lower, upper in pairwise(ordered):
            if upper.low_ohm <= lower.high_ohm:
                raise refuse(f"id_bands: {upper.id.text} overlaps {lower.id.text}; a resistance selects one current")
        return self

    @property
    def largest_declared_A(self) -> float:
        by_id = [band.current.high or 0.0 for band in self.id_bands]
        return max([*by_id, *(stage.current.high or 0.0 for stage in self.charge.stages)])

    @property
    def physical_current_A(self) -> float:
        """The largest current that the charger can deliver: rating plate, or 1.5 times the largest declared one."""
        return self.rating_current or 1.5 * self.largest_declared_A

    @property
    def events_V(self) -> tuple[tuple[float, float], ...]:
        """Bands of voltage per cell in which something is declared to happen, (low, high), ascending."""
        charge = self.charge
        bands = [stage.threshold_per_cell for stage in charge.stages] + [charge.voltage_per_cell]
        return tuple(sorted(ends for ends in map(_ends, bands) if ends is not None))


def _ends(band: Band | None) -> tuple[float, float] | None:
    """Both ends of a band; where one is open, the other stands for it."""
    if band is None or (band.low is None and band.high is None):
        return None
    low = band.high if band.low is None else band.low
    high = band.low if band.high is None else band.high
    return (low, high) if low is not None and high is not None else None
