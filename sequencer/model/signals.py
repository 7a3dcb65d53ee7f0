"""Declared behaviour at the pack's small contacts: ID resistor bands, temperature windows, cell-tap trip."""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    GetJsonSchemaHandler,
    model_validator,
)
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.text.measures import (
    AmpereLimit,
    Band,
    Limit,
    PositiveAmperes,
    Rule,
    SecondLimit,
    VoltLimit,
    refuse,
)
from drivers.text.si import si

Declared = Literal["no charge", "charges"]
CelsiusLimit = Annotated[Band, Limit("temperature")]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _closed(value: Band) -> Band:
    if value.low is None or value.high is None or value.low <= 0:
        raise refuse(f'"{value.text}": both ends of the band are needed, above 0 Ω: [0.90 kΩ, 1.10 kΩ]')
    return value


OhmBand = Annotated[Band, Limit("resistance"), AfterValidator(_closed)]


class IdBand(_Part):
    """ID resistances that select one current; `lower_edge` and `upper_edge`: where the charger may change its mind."""

    id: OhmBand
    current: AmpereLimit
    lower_edge: Annotated[Band, Limit("resistance")] | None = None
    upper_edge: Annotated[Band, Limit("resistance")] | None = None

    @property
    def low_ohm(self) -> float:
        assert self.id.low is not None
        return self.id.low

    @property
    def high_ohm(self) -> float:
        assert self.id.high is not None
        return self.id.high

    @property
    def middle_ohm(self) -> float:
        """Geometric middle: tolerances of resistors are ratios."""
        return math.sqrt(self.low_ohm * self.high_ohm)


class _Pair:
    """Reads [low limit, high limit], each a limit on a temperature."""

    def read(self, value: Any) -> tuple[Band, Band]:
        if isinstance(value, tuple):
            return value
        if not isinstance(value, list) or len(value) != 2:
            raise refuse("expected a limit for each end: [3 °C ± 2 °C, 45 °C ± 2 °C]")
        low, high = (Limit("temperature").read(item) for item in value)
        if low.nominal is not None and high.nominal is not None and low.nominal >= high.nominal:
            raise refuse(f'the low end "{low.text}" does not lie below the high end "{high.text}"')
        return low, high

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "array", "minItems": 2, "maxItems": 2, "examples": [["3 °C ± 2 °C", "45 °C ± 2 °C"]]}


Ends = Annotated[tuple[Band, Band], _Pair()]


class TemperatureWindow(_Part):
    """In which temperatures a charge may start, and go on; what an open and a shorted thermistor do."""

    curve: str = Field(description="name of a shipped thermistor curve, or path of a curve file")
    start: Ends | None = None
    run: Ends | None = None
    release: Ends | None = Field(None, description="where a charge that stopped goes on by itself, on the way back")
    open: Declared | None = None
    short: Declared | None = None
    rule: Rule | None = None


class TapTrip(_Part):
    """At which voltage of one cell the charge stops, how fast, and whether it goes on once the cell is low again."""

    voltage: VoltLimit
    stop_time: SecondLimit | None = None
    release: Literal["resumes", "stays off"] | None = None
    rule: Rule | None = None


class Balancing(_Part):
    """What a cell may exchange through the taps because it stands high or low: nothing above a current, or how much."""

    none_above: PositiveAmperes | None = Field(None, description="no balancing current above this")
    current: AmpereLimit | None = Field(None, description="what each cell gives when it stands high, or takes when low")
    rule: Rule | None = None

    @model_validator(mode="after")
    def _one_of_both(self) -> Balancing:
        if (self.none_above is None) is (self.current is None):
            raise refuse("declared is 'none_above' a current, or the 'current' of a cell; one of them")
        if self.current is not None and (self.current.low is None or self.current.low <= 0):
            raise refuse(f'"{self.current.text}": a balancing current has a lower end above 0 A: 4 mA ± 20 %')
        return self

    @property
    def most(self) -> Band | None:
        """'none_above' as a limit; None where a current is declared."""
        if self.none_above is None:
            return None
        return Band(None, self.none_above, None, self.rule, f"none above {si(self.none_above, 'A')}")


class IdElsewhere(_Part):
    """What the charger does where no band is declared."""

    outside: Declared | None = None
    open: Declared | None = None
    short: Declared | None = None
