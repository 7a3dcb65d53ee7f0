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

# Below the table's 0 % the cell's voltage goes on along a steep line, 50 V per 1: 1 V within 2 % of the capacity.
# A steep line of small capacity is common practice; published tables of a 4.2 Ah and a 4.0 Ah cell fall by 26 and 62 V
# per 1 at their low end (2.898 V at 1.51 % and 2.808 V at 0.50 % to 2.506 V and 2.500 V). Where a start voltage is
# shown it is held, so no verdict hangs on this.
EMPTY_SLOPE_V = 50.0
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
        """Open-circuit voltage of the pack; above 1 by the last slope, below 0 by EMPTY_SLOPE_V."""
        if soc < 0.0:
            return self.cells * (self.ocv[0][1] + EMPTY_SLOPE_V * soc)
        left = self._segment([point[0] for point in self.ocv], soc)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return self.cells * (volt_a + (volt_b - volt_a) * (soc - soc_a) / (soc_b - soc_a))

    def slope_V(self, soc: float) -> float:
        """d OCV / d SoC of the pack, in V per 1."""
        if soc < 0.0:
            return self.cells * EMPTY_SLOPE_V
        left = self._segment([point[0] for point in self.ocv], soc)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return self.cells * (volt_b - volt_a) / (soc_b - soc_a)

    def soc_at(self, cell_V: float) -> float:
        """State of charge at which a cell has this open-circuit voltage, at most 1; below 0 for a discharged cell."""
        if cell_V < self.ocv[0][1]:
            return (cell_V - self.ocv[0][1]) / EMPTY_SLOPE_V
        left = self._segment([point[1] for point in self.ocv], cell_V)
        (soc_a, volt_a), (soc_b, volt_b) = self.ocv[left], self.ocv[left + 1]
        return min(max(soc_a + (soc_b - soc_a) * (cell_V - volt_a) / (volt_b - volt_a), 0.0), 1.0)

    @staticmethod
    def _segment(knots: list[float], value: float) -> int:
        return min(max(bisect_right(knots, value) - 1, 0), len(knots) - 2)
