"""The part of a charger file that says what becomes of a discharged pack: refused, probed, precharged. Optional."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar

from pydantic import Field, model_validator
from pydantic.json_schema import JsonSchemaValue

from drivers.text.measures import PositiveAmperes, PositiveSeconds, PositiveVolts, refuse
from drivers.virtual.charger_features import Part, Read
from drivers.virtual.charger_plan import LowStart, Precharge, Probe

MOST_PULSES = 100


class _Count(Read):
    """Reads how many pulses."""

    schema: ClassVar[JsonSchemaValue] = {"type": "integer", "minimum": 1, "maximum": MOST_PULSES}

    def read(self, value: Any) -> int:
        text = str(value)
        if not text.isdecimal() or not 1 <= int(text) <= MOST_PULSES:
            raise refuse(f'"{text}": expected a number of pulses from 1 to {MOST_PULSES}')
        return int(text)


class _Looked(Read):
    """Reads "all", or a list of cells counted from B-; nothing: no cell is looked at by itself."""

    schema: ClassVar[JsonSchemaValue] = {
        "anyOf": [
            {"const": "all"},
            {"type": "null"},
            {"type": "array", "items": {"type": "integer", "minimum": 1}, "minItems": 1},
        ]
    }

    def read(self, value: Any) -> str | tuple[int, ...]:
        if value is None:
            return ()
        if value == "all" or isinstance(value, tuple):
            return value  # type: ignore[no-any-return]
        if isinstance(value, list) and value and all(str(item).isdecimal() and int(item) > 0 for item in value):
            return tuple(sorted({int(item) for item in value}))
        raise refuse('expected "all", or a list of cells such as [1, 2], counted from B-')


class ProbeText(Part):
    """Pulses that try whether a pack below `refuse_below` is one at all."""

    current: PositiveAmperes
    time: PositiveSeconds
    pause: PositiveSeconds = 1.0
    count: Annotated[int, _Count()] = 1


class PrechargeText(Part):
    """A small current below a voltage per cell, for at most `timeout`."""

    below: PositiveVolts
    current: PositiveAmperes
    timeout: PositiveSeconds | None = None


class LowStartText(Part):
    """What it does with a pack, or (by its taps) with one cell, that stands low when it is put in."""

    refuse_below: PositiveVolts | None = None
    probe: ProbeText | None = None
    precharge: PrechargeText | None = None
    cells: Annotated[str | tuple[int, ...], _Looked()] = Field((), description="looked at one by one; else the pack's")

    @model_validator(mode="after")
    def _fits(self) -> LowStartText:
        if self.refuse_below is None and self.precharge is None:
            raise refuse("low_start needs 'refuse_below' or 'precharge'; without either leave it out")
        if self.probe is not None and self.refuse_below is None:
            raise refuse("'probe' belongs to 'refuse_below': it tries a pack that is too low")
        if self.precharge and self.refuse_below and self.precharge.below <= self.refuse_below:
            raise refuse("'precharge.below' must lie above 'refuse_below'; nothing would ever be precharged")
        return self

    def low_start(self, count: int) -> LowStart:
        """In numbers, for a pack of `count` cells."""
        probe, precharge = self.probe, self.precharge
        return LowStart(
            self.refuse_below or 0.0,
            Probe(probe.current, probe.time, probe.pause, probe.count) if probe else None,
            Precharge(precharge.below, precharge.current, precharge.timeout) if precharge else None,
            tuple(range(1, count + 1)) if isinstance(self.cells, str) else self.cells,
        )
