"""The file of a virtual charger: what people write, checked, and turned into numbers for the circuit."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from drivers.shipped import locate
from drivers.text.binding import Bound, Written, bind
from drivers.text.document import Document, read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.measures import (
    Flag,
    Measure,
    Ohms,
    PositiveAmperes,
    PositiveSeconds,
    PositiveVolts,
    Seconds,
    refuse,
)
from drivers.virtual.charger import ChargerPlan, Stage

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
    cells: Annotated[int, _Cells("ratio")]
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
        return self

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
