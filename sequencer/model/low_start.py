"""What a charger is declared to do with a discharged pack, or with one discharged cell in a normal one."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Any, ClassVar

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic import model_validator as validator
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.text.measures import AmpereLimit, Band, Rule, SecondLimit, VoltLimit, refuse
from drivers.text.nearest import unknown

# In the order of what they do to a cell that is too low: the last one may destroy it.
RESPONSES = ("refuses", "probes and refuses", "precharges", "full current")
OR = " or "


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class _Responses:
    """Reads one response, or a list of those that are allowed, into one text with "or" between them."""

    schema: ClassVar[JsonSchemaValue] = {
        "anyOf": [{"enum": list(RESPONSES)}, {"type": "array", "items": {"enum": list(RESPONSES)}, "minItems": 1}]
    }

    @staticmethod
    def read(value: Any) -> str:
        listed = value if isinstance(value, list) else str(value).split(OR)
        if not listed:
            raise refuse(f"a response was expected, of {', '.join(RESPONSES)}")
        for one in listed:
            if one not in RESPONSES:
                raise refuse(unknown(str(one), RESPONSES, "response"))
        return OR.join(listed)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return dict(self.schema)


Responses = Annotated[str, _Responses()]


def _upper(value: Band) -> Band:
    if value.high is None:
        raise refuse(f'"{value.text}": the upper end is needed, as in [1.5 V, 2.9 V] or {{below: 2 V}}')
    return value


class Start(_Part):
    """Open-circuit voltages per cell at which a pack is put in, and what the charger may do with it."""

    cell_voltage: Annotated[VoltLimit, AfterValidator(_upper)]
    response: Responses

    def holds(self, cell_V: float) -> bool:
        """Whether this is what is declared for a pack at this voltage per cell."""
        band = self.cell_voltage
        assert band.high is not None
        return (band.low or 0.0) - 1e-9 <= cell_V <= band.high + 1e-9


class Precharging(_Part):
    """The small current, the voltage per cell at which full current follows, and how long it may take."""

    current: AmpereLimit
    threshold_per_cell: VoltLimit | None = Field(None, description="charger-side, where it goes over to full current")
    time: SecondLimit | None = Field(None, description="after which it gives up")


class Probing(_Part):
    """Pulses by which a charger tries a pack before it refuses it: the largest, the longest."""

    current: AmpereLimit | None = None
    time: SecondLimit | None = None


class LowStart(_Part):
    """Deep-discharge starts. What is left out is not judged."""

    starts: tuple[Start, ...] = Field((), description="by voltage per cell, rising; the ranges must not overlap")
    precharge: Precharging | None = None
    probe: Probing | None = None
    weak_cell: Responses | None = Field(None, description="one cell low, the others normal")
    rule: Rule | None = None

    @validator(mode="after")
    def _rise(self) -> LowStart:
        for lower, upper in pairwise(self.starts):
            if (upper.cell_voltage.low or 0.0) < (lower.cell_voltage.high or 0.0):
                told = f"starts: {upper.cell_voltage.text} does not follow {lower.cell_voltage.text}"
                raise refuse(f"{told}; ranges rise, and a voltage lies in one of them")
        return self
