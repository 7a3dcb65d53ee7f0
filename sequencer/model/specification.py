"""The specification: what this charger model is declared to do, with limits and the decision rule."""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from drivers.text.binding import Written
from drivers.text.measures import AmpereLimit, Flag, PositiveAmperes, PositiveSeconds, Rule, Seconds, VoltLimit, refuse

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

    @property
    def largest_declared_A(self) -> float:
        return max(stage.current.high or 0.0 for stage in self.charge.stages)

    @property
    def physical_current_A(self) -> float:
        """The largest current that the charger can deliver: rating plate, or 1.5 times the largest declared one."""
        return self.rating_current or 1.5 * self.largest_declared_A

    @property
    def thresholds_V(self) -> tuple[float, ...]:
        """Voltages per cell at which something is declared to happen, ascending."""
        charge = self.charge
        bands = [stage.threshold_per_cell for stage in charge.stages] + [charge.voltage_per_cell]
        middles = [_middle(band.low, band.high) for band in bands if band is not None]
        return tuple(sorted(value for value in middles if value is not None))


def _middle(low: float | None, high: float | None) -> float | None:
    if low is None or high is None:
        return low if high is None else high
    return (low + high) / 2
