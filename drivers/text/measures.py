"""Types of the models: quantities, flags and limits that read the text people write.

A field annotated `Volts` reads "4.2 V" into 4.2; what it cannot read becomes a fault with line and column.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from drivers.text.nearest import unknown
from drivers.text.quantity import EXAMPLES, UNIT_IN_CODE, QuantityFault, parse, parse_tolerance
from drivers.text.si import interval

Rule = Literal["simple", "guarded"]
LIMIT_KEYS = ("within", "below", "above", "rule")


def refuse(message: str) -> PydanticCustomError:
    """The error of a validator whose sentence shall reach the person unchanged."""
    return PydanticCustomError("fault", "{words}", {"words": message})


@dataclass(frozen=True)
class Band:
    """A limit: low and high in the unit used in code (None: open), the text as written, and its own rule if any."""

    low: float | None
    high: float | None
    nominal: float | None = None
    rule: Rule | None = None
    text: str = ""

    def words(self, unit: str) -> str:
        return interval(self.low, self.high, unit)


@dataclass(frozen=True)
class Measure:
    """Reads one quantity of `dimension`; `above` and `below` are exclusive bounds in the unit used in code."""

    dimension: str
    above: float | None = None
    least: float | None = None

    def read(self, value: Any) -> float:
        if isinstance(value, float):  # already typed: models built in code
            return value
        if not isinstance(value, str):
            raise refuse(f'{_shown(value)} is not a quantity; expected such as "{EXAMPLES[self.dimension]}"')
        try:
            number = parse(value, self.dimension)
        except QuantityFault as fault:
            raise refuse(str(fault)) from fault
        if self.above is not None and not number > self.above:
            raise refuse(f'"{value}" must be above {self.above:g} {UNIT_IN_CODE[self.dimension]}')
        if self.least is not None and not number >= self.least:
            raise refuse(f'"{value}" must not be below {self.least:g} {UNIT_IN_CODE[self.dimension]}')
        return number

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "string", "description": self.dimension, "examples": [EXAMPLES[self.dimension]]}


@dataclass(frozen=True)
class Limit:
    """Reads a limit: "3 A ± 5 %", [2.9 A, 3.1 A], {below: 2 s}, or {within: ..., rule: simple}."""

    dimension: str

    def read(self, value: Any) -> Band:
        if isinstance(value, Band):
            return value
        try:
            return self._read(value, None)
        except QuantityFault as fault:
            raise refuse(str(fault)) from fault

    def _read(self, value: Any, rule: Rule | None) -> Band:
        if isinstance(value, str):
            nominal, half = parse_tolerance(value, self.dimension)
            return Band(nominal - half, nominal + half, nominal, rule, value)
        if isinstance(value, list):
            return self._pair(value, rule)
        if isinstance(value, dict):
            return self._mapping(value)
        raise refuse(f'{_shown(value)} is not a limit; expected such as "{EXAMPLES[self.dimension]} ± 5 %"')

    def _pair(self, value: list[Any], rule: Rule | None) -> Band:
        if len(value) != 2 or not all(isinstance(item, str) for item in value):
            raise refuse("a limit written as a list has two quantities: [low, high]")
        low, high = (parse(item, self.dimension) for item in value)
        if low > high:
            raise refuse(f'low limit "{value[0]}" lies above high limit "{value[1]}"; nothing can meet it')
        return Band(low, high, None, rule, f"{value[0]} to {value[1]}")

    def _mapping(self, value: dict[str, Any]) -> Band:
        for key in value:
            if key not in LIMIT_KEYS:
                raise refuse(unknown(key, LIMIT_KEYS))
        rule = value.get("rule")
        if rule not in (None, "simple", "guarded"):
            raise refuse(f"rule {_shown(rule)}: expected 'simple' or 'guarded'")
        if "within" in value:
            if "below" in value or "above" in value:
                raise refuse("'within' stands for both sides; leave out 'below' and 'above'")
            return self._read(value["within"], rule)
        return self._sides(value, rule)

    def _sides(self, value: dict[str, Any], rule: Rule | None) -> Band:
        low, high = (parse(str(value[key]), self.dimension) if key in value else None for key in ("above", "below"))
        if low is None and high is None:
            raise refuse("a limit needs 'within', 'below' or 'above'")
        if low is not None and high is not None and low > high:
            raise refuse(f"'above: {value['above']}' lies above 'below: {value['below']}'; nothing can meet it")
        text = " and ".join(f"{key} {value[key]}" for key in ("above", "below") if key in value)
        return Band(low, high, None, rule, text)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        example = EXAMPLES[self.dimension]
        text: JsonSchemaValue = {"type": "string", "examples": [f"{example} ± 5 %"]}
        pair = {"type": "array", "items": {"type": "string"}, "minItems": 2, "maxItems": 2}
        sides = {"type": "object", "properties": {key: {} for key in LIMIT_KEYS}, "additionalProperties": False}
        return {"description": f"limit on a {self.dimension}", "anyOf": [text, pair, sides]}


class _Flag:
    """Reads `true` and `false`, nothing else: `no`, `off` and `0` mean different things to different readers."""

    @staticmethod
    def read(value: Any) -> bool:
        if isinstance(value, bool):
            return value
        if value in ("true", "false"):
            return bool(value == "true")
        raise refuse(f"{_shown(value)}: expected true or false")

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "boolean"}


def _shown(value: Any) -> str:
    return "nothing" if value is None else f'"{value}"' if isinstance(value, str) else f"a {_kind(value)}"


def _kind(value: Any) -> str:
    return "list" if isinstance(value, list) else "mapping" if isinstance(value, dict) else type(value).__name__


Volts = Annotated[float, Measure("voltage")]
PositiveVolts = Annotated[float, Measure("voltage", above=0)]
Amperes = Annotated[float, Measure("current")]
PositiveAmperes = Annotated[float, Measure("current", above=0)]
Ohms = Annotated[float, Measure("resistance", least=0)]
PositiveOhms = Annotated[float, Measure("resistance", above=0)]
Seconds = Annotated[float, Measure("time", least=0)]
PositiveSeconds = Annotated[float, Measure("time", above=0)]
AmpereHours = Annotated[float, Measure("charge", above=0)]
Watts = Annotated[float, Measure("power", above=0)]
Celsius = Annotated[float, Measure("temperature")]
Ratio = Annotated[float, Measure("ratio")]
VoltsPerSecond = Annotated[float, Measure("voltage rate")]
VoltLimit = Annotated[Band, Limit("voltage")]
AmpereLimit = Annotated[Band, Limit("current")]
SecondLimit = Annotated[Band, Limit("time")]
ResistanceTolerance = Annotated[Band, Limit("resistance")]
Flag = Annotated[bool, _Flag()]
