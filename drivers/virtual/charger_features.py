"""The parts of a charger file that belong to the pack's small contacts: ID, thermistor, cell taps. All optional.

Every threshold here is the true one, at which this charger switches; what its maker declares is another matter.
"""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Any, ClassVar

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    GetJsonSchemaHandler,
    model_validator,
)
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.text.measures import Flag, PositiveAmperes, PositiveOhms, PositiveSeconds, PositiveVolts, Seconds, refuse
from drivers.text.quantity import QuantityFault, parse
from drivers.virtual.charger_plan import Balancer, IdBand, Pin, TapMonitor, Temperature, Window


class Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True)


def _two(value: Any) -> Any:
    """A list of two as a tuple of two."""
    if not isinstance(value, (list, tuple)) or len(value) != 2:
        raise refuse('two resistances were expected, such as ["2.45 kΩ", "3.70 kΩ"]')
    return tuple(value)


def _rises(value: tuple[float, float]) -> tuple[float, float]:
    if not value[0] < value[1]:
        raise refuse(f"{value[0]:g} Ω does not lie below {value[1]:g} Ω; a band is written [low, high]")
    return value


def _falls(value: tuple[float, float]) -> tuple[float, float]:
    if not value[0] > value[1]:
        words = "a thermistor has its higher resistance at the cold end; a window is written [cold end, hot end]"
        raise refuse(f"{value[0]:g} Ω does not lie above {value[1]:g} Ω; {words}")
    return value


_Pair = Annotated[tuple[PositiveOhms, PositiveOhms], BeforeValidator(_two)]
RisingOhms = Annotated[_Pair, AfterValidator(_rises)]
FallingOhms = Annotated[_Pair, AfterValidator(_falls)]


class Sampled(Part):
    """The pin is excited for a short time every so often; without this key, always."""

    every: PositiveSeconds
    time: PositiveSeconds = Field(alias="for")

    @model_validator(mode="after")
    def _fits(self) -> Sampled:
        if self.time >= self.every:
            raise refuse(f"excited for {self.time:g} s every {self.every:g} s: 'for' must be shorter than 'every'")
        return self


class PinText(Part):
    """How a resistor is read: a pull-up to a reference; a change shorter than `filter` is not seen."""

    pull_up: PositiveOhms = 10e3
    reference: PositiveVolts = 3.3
    filter: Seconds = 0.05
    sampled: Sampled | None = None

    def pin(self) -> Pin:
        sampled = self.sampled
        every_s, on_s = (sampled.every, sampled.time) if sampled else (0.0, 0.0)
        return Pin(self.pull_up, self.reference, self.filter, every_s, on_s)


class IdBandText(Part):
    """Between its edges the charger takes the pack for one that is charged with `current` in the first stage."""

    id: RisingOhms
    current: PositiveAmperes

    def band(self) -> IdBand:
        return IdBand(*self.id, self.current)


class Read:
    """A type that reads what people write by `read`, and says in the JSON Schema what that is."""

    schema: ClassVar[JsonSchemaValue]

    def read(self, value: Any) -> Any:
        raise NotImplementedError

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return dict(self.schema)


class _Hysteresis(Read):
    """Reads a share of the resistance, or ohms, into (share, ohms)."""

    schema: ClassVar[JsonSchemaValue] = {"type": "string", "examples": ["5 %", "300 Ω"]}

    def read(self, value: Any) -> tuple[float, float]:
        if isinstance(value, tuple):
            return value
        text = str(value)
        try:
            ohms = text.rstrip().endswith(("Ω", "ohm"))
            found = (0.0, parse(text, "resistance")) if ohms else (parse(text, "ratio"), 0.0)
        except QuantityFault as fault:
            raise refuse(f'{fault}; a hysteresis is a share such as "5 %", or a resistance such as "300 Ω"') from fault
        if min(found) < 0 or found[0] >= 1:
            raise refuse(f'"{text}": a hysteresis lies between 0 and 100 %, or is a resistance')
        return found


class _Cells(Read):
    """Reads "all" (None) or a list of cells, counted from B-."""

    schema: ClassVar[JsonSchemaValue] = {
        "anyOf": [{"const": "all"}, {"type": "array", "items": {"type": "integer", "minimum": 1}, "minItems": 1}]
    }

    def read(self, value: Any) -> tuple[int, ...] | None:
        if value is None or value == "all":
            return None
        if isinstance(value, list) and value and all(str(item).isdecimal() and int(item) > 0 for item in value):
            return tuple(sorted({int(item) for item in value}))
        raise refuse('expected "all", or a list of cells such as [1, 2], counted from B-')


class TemperatureText(PinText):
    """Windows of the thermistor: `start` at insertion, `run` while charging; hysteresis: how far back it must come."""

    start: FallingOhms
    run: FallingOhms
    hysteresis: Annotated[tuple[float, float], _Hysteresis()] = (0.05, 0.0)

    @model_validator(mode="after")
    def _fits(self) -> TemperatureText:
        if self.run[0] < self.start[0] or self.run[1] > self.start[1]:
            raise refuse("the 'run' window must hold the 'start' window; a charge would stop as it starts")
        released = self._release()
        if not released.hot_ohm < released.cold_ohm:
            raise refuse("the hysteresis is wider than the 'run' window; nothing would ever resume")
        return self

    def _release(self) -> Window:
        share, ohm = self.hysteresis
        return Window(self.run[0] * (1.0 - share) - ohm, self.run[1] * (1.0 + share) + ohm)

    def temperature(self) -> Temperature:
        return Temperature(self.pin(), Window(*self.start), Window(*self.run), self._release())


class TapMonitorText(Part):
    """Any monitored cell above `threshold` for `filter` stops the charge; `latch`: until the fault is cleared."""

    threshold: PositiveVolts
    filter: Seconds = 0.5
    hysteresis: PositiveVolts = 0.05
    latch: Flag = False
    cells: Annotated[tuple[int, ...] | None, _Cells()] = None

    def monitor(self, count: int) -> TapMonitor:
        cells = self.cells or tuple(range(1, count + 1))
        return TapMonitor(self.threshold, self.filter, self.hysteresis, self.latch, cells)


class _Moving(Part):
    """How charge is moved through the taps: for how long, and of which cells. Without 'every' and 'for': always."""

    difference: PositiveVolts | None = Field(None, description="from the mean of all cells")
    every: PositiveSeconds | None = None
    time: PositiveSeconds | None = Field(None, alias="for")
    cells: Annotated[tuple[int, ...] | None, _Cells()] = None

    @model_validator(mode="after")
    def _duty_fits(self) -> _Moving:
        if (self.every is None) is not (self.time is None):
            raise refuse("'every' and 'for' belong together: {every: 4 s, for: 1 s}")
        if self.every is not None and self.time is not None and self.time >= self.every:
            raise refuse(f"on for {self.time:g} s every {self.every:g} s: 'for' must be shorter than 'every'")
        return self

    def _balancer(self, count: int, ohm: float | None, current_A: float | None, level_V: float | None) -> Balancer:
        cells = self.cells or tuple(range(1, count + 1))
        charges = isinstance(self, TapChargeText)
        duty = (self.every or 0.0, self.time or 0.0)
        return Balancer(charges, ohm, current_A, level_V, self.difference, cells, *duty)


class BleedText(_Moving):
    """Out of each cell above a voltage, or above the mean of all cells: through a resistance, or with a current."""

    resistance: PositiveOhms | None = None
    current: PositiveAmperes | None = None
    above: PositiveVolts | None = None

    @model_validator(mode="after")
    def _fits(self) -> BleedText:
        if (self.resistance is None) is (self.current is None):
            raise refuse("a bleed has a 'resistance' or a 'current'; one of them")
        if (self.above is None) is (self.difference is None):
            raise refuse("a bleed begins 'above' a cell voltage, or at a 'difference' from the mean; one of them")
        return self

    def balancer(self, count: int) -> Balancer:
        return self._balancer(count, self.resistance, self.current, self.above)


class TapChargeText(_Moving):
    """Into each cell below a voltage, or below the mean of all cells, with a current."""

    current: PositiveAmperes
    below: PositiveVolts | None = None

    @model_validator(mode="after")
    def _fits(self) -> TapChargeText:
        if (self.below is None) is (self.difference is None):
            raise refuse("a charge through taps begins 'below' a cell voltage, or at a 'difference'; one of them")
        return self

    def balancer(self, count: int) -> Balancer:
        return self._balancer(count, None, self.current, self.below)


def bands_fit(bands: tuple[IdBandText, ...]) -> None:
    """Raise where two bands overlap: the current would depend on the order in which they are written."""
    ordered = sorted(bands, key=lambda band: band.id)
    for lower, upper in pairwise(ordered):
        if upper.id[0] <= lower.id[1]:
            told = f"the band up to {lower.id[1]:g} Ω overlaps the one from {upper.id[0]:g} Ω"
            raise refuse(f"{told}; an ID would select two currents")
