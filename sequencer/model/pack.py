"""The pack that the instruments stand in for: what the charger believes it sees."""

from __future__ import annotations

from bisect import bisect_right
from itertools import pairwise
from typing import Annotated

from pydantic import AfterValidator, BaseModel, ConfigDict, Field

from drivers.text.binding import Written
from drivers.text.measures import (
    AmpereHours,
    PositiveAmperes,
    PositiveOhms,
    PositiveSeconds,
    PositiveVolts,
    Ratio,
    refuse,
)

CELL_MARGIN_V = 0.15  # above the full cell's OCV: still seen as the charger's, not yet a bench in danger


class Relaxation(BaseModel):
    """One RC branch of the pack."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    resistance: PositiveOhms
    time: PositiveSeconds


def _rising(value: tuple[tuple[float, float], ...]) -> tuple[tuple[float, float], ...]:
    if len(value) < 2:
        raise refuse("an open-circuit voltage table needs two points at least: [[0 %, 3.0 V], [100 %, 4.2 V]]")
    for (soc_a, volt_a), (soc_b, volt_b) in pairwise(value):
        if soc_b <= soc_a or volt_b <= volt_a:
            raise refuse(f"must rise: [{soc_b * 100:g} %, {volt_b:g} V] follows [{soc_a * 100:g} %, {volt_a:g} V]")
    if value[0][0] != 0.0 or value[-1][0] != 1.0:
        raise refuse("must reach from 0 % to 100 %")
    return value


OcvTable = Annotated[tuple[tuple[Ratio, PositiveVolts], ...], AfterValidator(_rising)]


class Pack(Written):
    """Cells in series with an open-circuit voltage table per cell, a resistance, a capacity."""

    name: str
    cells: int = Field(ge=1, le=20)
    capacity: AmpereHours
    ocv: OcvTable
    resistance: PositiveOhms = Field(description="of the whole pack, its contacts included")
    relaxation: Relaxation | None = None
    rated_current: PositiveAmperes = Field(description="largest charging current that the pack's maker allows")
    id: PositiveOhms | None = Field(None, description="ID resistor; default: the middle of the first declared band")
    thermistor: str | None = Field(None, description="its curve; default: the one that the specification declares")
    cell_voltage_max: PositiveVolts | None = Field(None, description="guard bound per cell; default: full OCV + 150 mV")

    @property
    def cell_bound_V(self) -> float:
        return self.cell_voltage_max or self.ocv[-1][1] + CELL_MARGIN_V

    def ocv_V(self, soc: float) -> float:
        """Open-circuit voltage of the pack at a state of charge (0..1; extrapolated by the last slope outside)."""
        left = self._segment([point[0] for point in self.ocv], soc)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return self.cells * (volt_a + (volt_b - volt_a) * (soc - soc_a) / (soc_b - soc_a))

    def slope_V(self, soc: float) -> float:
        """d OCV / d SoC of the pack, in V per 1."""
        left = self._segment([point[0] for point in self.ocv], soc)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return self.cells * (volt_b - volt_a) / (soc_b - soc_a)

    def soc_at(self, cell_V: float) -> float:
        """State of charge at which a cell has this open-circuit voltage, held to 0..1."""
        left = self._segment([point[1] for point in self.ocv], cell_V)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return min(max(soc_a + (soc_b - soc_a) * (cell_V - volt_a) / (volt_b - volt_a), 0.0), 1.0)

    @staticmethod
    def _segment(knots: list[float], value: float) -> int:
        return min(max(bisect_right(knots, value) - 1, 0), len(knots) - 2)
