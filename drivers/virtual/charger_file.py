"""The file of a virtual charger: what people write, checked, and turned into numbers for the circuit."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, WithJsonSchema, model_validator

from drivers.shipped import locate
from drivers.text.binding import Bound, Written, bind
from drivers.text.document import Document, read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.measures import (
    Amperes,
    Flag,
    Measure,
    Ohms,
    PositiveAmperes,
    PositiveSeconds,
    PositiveVolts,
    Seconds,
    refuse,
)
from drivers.virtual.charger_features import (
    BleedText,
    IdBandText,
    PinText,
    TapChargeText,
    TapMonitorText,
    TemperatureText,
    bands_fit,
)
from drivers.virtual.charger_low_start import LowStartText
from drivers.virtual.charger_plan import TAP_DRAIN_A, ChargerPlan, FaultLatch, Stage

CHARGERS = Path(__file__).parent / "chargers"
CEILING_ABOVE_V = 0.05  # per cell, above the highest threshold, where the file says nothing
Algorithm = Literal["cc-cv", "stepped-cc", "cc-only"]


def _whole(value: object) -> int:
    text = str(value)
    if not text.isdigit() or not 1 <= int(text) <= 20:
        raise refuse(f'"{text}": expected a number of cells from 1 to 20')
    return int(text)


class _Cells(Measure):
    def read(self, value: object) -> int:  # a count, not a quantity
        return value if isinstance(value, int) else _whole(value)


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _tuple(value: Any) -> Any:
    return tuple(value) if isinstance(value, list) else value


class StageText(_Part):
    """One current; `until` is the voltage per cell at the regulation point that ends it."""

    current: PositiveAmperes
    until: PositiveVolts | None = None


class Surge(_Part):
    """Another current for a time at the start of a charge."""

    current: PositiveAmperes
    time: PositiveSeconds


class ChargerFile(Written):
    """A virtual charger. Without termination (`ends: false`) it stays at its voltage limit for ever."""

    name: str
    cells: Annotated[int, _Cells("ratio"), WithJsonSchema({"type": "integer", "minimum": 1, "maximum": 20})]
    algorithm: Algorithm
    stages: Annotated[tuple[StageText, ...], Field(min_length=1)]
    voltage_per_cell: PositiveVolts | None = Field(None, description="cc-cv: regulation")
    cutoff: PositiveAmperes | None = Field(None, description="cc-cv: the charge ends below this current")
    ceiling: PositiveVolts | None = Field(None, description="others: voltage limit per cell; default 50 mV above")
    ends: Flag = True
    start_delay: Seconds = 1.5
    response: PositiveSeconds = 1.0
    source_resistance: Ohms = 0.0
    works: Flag = True
    overshoot: Surge | None = None
    id: PinText | None = Field(None, description="how the ID resistor is read; default with 'id_bands'")
    id_bands: Annotated[tuple[IdBandText, ...], BeforeValidator(_tuple)] = ()
    temperature: TemperatureText | None = None
    tap_monitor: TapMonitorText | None = None
    low_start: LowStartText | None = Field(None, description="what becomes of a discharged pack; default: full current")
    tap_current: Amperes = Field(TAP_DRAIN_A, description="into each cell tap; negative: out of it")
    bleed: BleedText | None = Field(None, description="while charging and after the end, out of high cells")
    tap_charge: TapChargeText | None = Field(None, description="while charging and after the end, into low cells")
    fault_latch: FaultLatch = Field(
        "none", description="what clears a fault: nothing has to, removal, the mains; for good: nothing"
    )
    clear: PositiveSeconds | None = Field(None, description="how long the pack must be gone; default: response")

    @model_validator(mode="after")
    def _fits_its_algorithm(self) -> ChargerFile:
        regulated = self.algorithm == "cc-cv"
        for key in ("voltage_per_cell", "cutoff"):
            if regulated and getattr(self, key) is None:
                raise refuse(f"a cc-cv charger needs '{key}'")
            if not regulated and getattr(self, key) is not None:
                raise refuse(
                    f"'{key}' belongs to a cc-cv charger; a {self.algorithm} charger ends its stages by 'until'"
                )
        if regulated and self.ceiling is not None:
            raise refuse("the ceiling of a cc-cv charger is its 'voltage_per_cell'")
        self._stages_fit(regulated)
        self._features_fit()
        return self

    def _features_fit(self) -> None:
        if self.id is not None and not self.id_bands:
            raise refuse("'id' says how the ID resistor is read; 'id_bands' are missing, nothing would ever charge")
        bands_fit(self.id_bands)
        highest = max((self.tap_monitor.cells or (0,)) if self.tap_monitor else (0,))
        if highest > self.cells:
            raise refuse(f"the tap monitor looks at cell {highest}; the pack has {self.cells}")
        looked_at = max(self.low_start.low_start(self.cells).cells, default=0) if self.low_start else 0
        if looked_at > self.cells:
            raise refuse(f"low_start looks at cell {looked_at}; the pack has {self.cells}")
        if self.bleed is not None and self.tap_charge is not None:
            raise refuse("'bleed' and 'tap_charge' stand side by side; a charger balances in one way")
        moved = max((self._moving.cells or (0,)) if self._moving else (0,))
        if moved > self.cells:
            raise refuse(f"cell {moved} is balanced; the pack has {self.cells}")

    @property
    def _moving(self) -> BleedText | TapChargeText | None:
        return self.bleed or self.tap_charge

    def _stages_fit(self, regulated: bool) -> None:
        count = len(self.stages)
        if self.algorithm == "stepped-cc" and count < 2:
            raise refuse("a stepped-cc charger needs two stages or more")
        if self.algorithm != "stepped-cc" and count != 1:
            raise refuse(f"a {self.algorithm} charger has one stage; {count} were given")
        for stage in self.stages:
            if regulated is not (stage.until is None):
                raise refuse("stages of a cc-cv charger have no 'until'" if regulated else "each stage needs 'until'")
        if not regulated and self.limit_per_cell <= max(stage.until or 0.0 for stage in self.stages):
            raise refuse("'ceiling' must lie above every 'until'; the threshold would never be reached")

    @property
    def limit_per_cell(self) -> float:
        """The voltage per cell that the output stage never passes."""
        if self.voltage_per_cell is not None:
            return self.voltage_per_cell
        return self.ceiling or max(stage.until or 0.0 for stage in self.stages) + CEILING_ABOVE_V

    def plan(self) -> ChargerPlan:
        """The charger in numbers, for the circuit."""
        surge = self.overshoot
        return ChargerPlan(
            name=self.name,
            cells=self.cells,
            stages=tuple(Stage(s.current, None if s.until is None else s.until * self.cells) for s in self.stages),
            limit_V=self.limit_per_cell * self.cells,
            cutoff_A=self.cutoff,
            ends=self.ends,
            start_delay_s=self.start_delay,
            response_s=self.response,
            source_ohm=self.source_resistance,
            works=self.works,
            surge_A=surge.current if surge else 0.0,
            surge_s=surge.time if surge else 0.0,
            id_pin=(self.id or PinText()).pin() if self.id_bands else None,
            id_bands=tuple(band.band() for band in self.id_bands),
            temperature=self.temperature.temperature() if self.temperature else None,
            tap_monitor=self.tap_monitor.monitor(self.cells) if self.tap_monitor else None,
            low_start=self.low_start.low_start(self.cells) if self.low_start else None,
            tap_drain_A=self.tap_current,
            fault_latch=self.fault_latch,
            clear_s=self.clear,
            balancer=self._moving.balancer(self.cells) if self._moving else None,
        )


def read_charger(document: Document, faults: Faults) -> Bound[ChargerFile] | None:
    """Check a composed document as a charger file; None, and faults added, where it is none."""
    return bind(ChargerFile, document, "charger", faults)


def load_charger(
    name_or_path: str, faults: Faults, *, place: Place | None = None, beside: Path | None = None
) -> Bound[ChargerFile] | None:
    """A charger by the bare name of a shipped one, or by path; its bytes are in `.document`. Faults are added."""
    path = locate(name_or_path, CHARGERS, "charger", place or Place(name_or_path), faults, beside=beside)
    if path is None:
        return None
    try:
        return read_charger(read(path), faults)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None
