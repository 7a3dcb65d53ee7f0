"""Dialects: how one family of instruments is spoken to, as data.

A new family takes a YAML file and no Python. What each role must be able to do stands in NEEDS.
"""

from __future__ import annotations

import string
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, WithJsonSchema, model_validator

from drivers.needs import NEEDS, Role
from drivers.text.binding import Written
from drivers.text.measures import (
    Flag,
    Measure,
    PositiveAmperes,
    PositiveOhms,
    PositiveSeconds,
    PositiveVolts,
    Ratio,
    refuse,
)

PLACES = frozenset({"value", "channel"})  # what may stand in braces in a command text


def _is_query(value: str) -> str:
    if "?" not in value:
        raise refuse(f'"{value}" asks nothing: a query has a question mark (IEEE 488.2, 7.3.3)')
    return value


Query = Annotated[str, AfterValidator(_is_query)]


def _braces(text: str) -> set[str]:
    """The names in braces in a command text. Refuses what cannot be filled in."""
    try:
        names = {name for _, name, _, _ in string.Formatter().parse(text) if name is not None}
    except ValueError as reason:
        raise refuse(f'"{text}": {reason}') from reason
    if names - PLACES:
        raise refuse(f'"{text}": only {{value}} and {{channel}} may stand in a command text')
    try:
        text.format(value=1.0, channel="1")
    except (ValueError, LookupError) as reason:
        raise refuse(f'"{text}": a number cannot be written so ({reason})') from reason
    return names


def _texts(value: Any) -> Any:
    return (value,) if isinstance(value, str) else tuple(value) if isinstance(value, list) else value


_TEXTS_SCHEMA: dict[str, Any] = {
    "anyOf": [{"type": "string"}, {"type": "array", "items": {"type": "string"}, "minItems": 1}]
}
Texts = Annotated[tuple[str, ...], BeforeValidator(_texts), Field(min_length=1), WithJsonSchema(_TEXTS_SCHEMA)]


class Setting(BaseModel):
    """One setting: the texts sent, in order, with {value} and {channel}; the query that reads it back; its proof.

    Without `expect` the readback must be the number that was set.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)
    send: Texts
    back: Query | None = None
    expect: tuple[str, ...] = ()

    @model_validator(mode="after")
    def _fits(self) -> Setting:
        for text in (*self.send, self.back or ""):
            _braces(text)
        if self.expect and self.back is None:
            raise refuse(f'"{self.words}": `expect` needs a `back` to be held against')
        if self.back is not None and not self.expect and not self.takes_value:
            raise refuse(f'"{self.words}" sets no value: its `back` needs an `expect`')
        return self

    @property
    def words(self) -> str:
        return "; ".join(self.send)

    @property
    def takes_value(self) -> bool:
        return any("value" in _braces(text) for text in self.send)

    @property
    def takes_channel(self) -> bool:
        return any("channel" in _braces(text) for text in self.send)


def _setting(value: Any) -> Any:
    return {"send": value} if isinstance(value, (str, list)) else value


_SETTING_SCHEMA: dict[str, Any] = {
    "anyOf": [
        *_TEXTS_SCHEMA["anyOf"],
        {
            "type": "object",
            "properties": {
                "send": _TEXTS_SCHEMA,
                "back": {"type": "string"},
                "expect": {"type": "array", "items": {"type": ["string", "number", "boolean"]}},
            },
            "required": ["send"],
            "additionalProperties": False,
        },
    ]
}
SettingText = Annotated[Setting, BeforeValidator(_setting), WithJsonSchema(_SETTING_SCHEMA)]


class Reading(BaseModel):
    """One reading: its queries, in order, and the names of the fields of all answers together, in order.

    A reading of {channel} gives one field a channel; `between` is what parts them in the answer to a list of channels.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)
    ask: Texts
    fields: tuple[str, ...] = Field(min_length=1)
    between: str | None = Field(None, description="one query for a whole list of channels, its values parted by this")

    @model_validator(mode="after")
    def _fits(self) -> Reading:
        for text in self.ask:
            if "value" in _braces(text):
                raise refuse(f'"{text}": a reading takes no {{value}}')
        if "?" not in self.ask[-1]:
            _is_query(self.ask[-1])
        twice = sorted({name for name in self.fields if self.fields.count(name) > 1})
        if twice:
            words = "; ".join(self.ask)
            raise refuse(f'"{words}": each field has a name of its own; {", ".join(twice)} stands there twice')
        return self

    @property
    def takes_channel(self) -> bool:
        return any("channel" in _braces(text) for text in self.ask)


class Bits(BaseModel):
    """A state in a status value: any bit of `mask` set, or, where the family says it the other way, clear."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    mask: Annotated[int, Field(gt=0)]
    when: Literal["set", "clear"] = "set"

    def hold(self, status: int) -> bool:
        return bool(status & self.mask) is (self.when == "set")


def _bits(value: Any) -> Any:
    return {"mask": value} if isinstance(value, (str, int)) else value


class _MeasuredSpan(BaseModel):
    """Accuracy in one range: ±(reading + of_range), half widths of a rectangular distribution."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    reading: Ratio
    of_range: Ratio


class VoltageSpan(_MeasuredSpan):
    """In one voltage range."""

    range: PositiveVolts
    resolution: PositiveVolts | None = None


class CurrentSpan(_MeasuredSpan):
    """In one current range."""

    range: PositiveAmperes
    resolution: PositiveAmperes | None = None


class OhmmeterSpan(_MeasuredSpan):
    """In one range of a resistance that is measured."""

    range: PositiveOhms
    resolution: PositiveOhms | None = None


class OhmSpan(BaseModel):
    """Accuracy of a programmable resistor up to a resistance: ±(set + residual), half widths, rectangular."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    range: PositiveOhms
    set: Ratio
    residual: PositiveOhms


class Accuracy(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)
    voltage: tuple[VoltageSpan, ...] = ()
    current: tuple[CurrentSpan, ...] = ()
    resistance: tuple[OhmSpan, ...] = Field(
        (), description="of a programmable resistor: how far it is from its setting"
    )
    ohmmeter: tuple[OhmmeterSpan, ...] = Field((), description="of the reading 'ohms'")


_BITS_SCHEMA: dict[str, Any] = {
    "anyOf": [
        {"type": "integer", "minimum": 1},
        {
            "type": "object",
            "properties": {"mask": {"type": "integer", "minimum": 1}, "when": {"enum": ["set", "clear"]}},
            "required": ["mask"],
            "additionalProperties": False,
        },
    ]
}
_SETTABLE_SCHEMA = WithJsonSchema({"type": "string", "examples": ["60 V", "15 A", "1 MΩ"]})


class Dialect(Written):
    """How one family of instruments is spoken to."""

    name: str
    role: Role
    terminator: Literal["LF", "CR", "CRLF"] = "LF"
    identity: Query = "*IDN?"
    confirm: Query | None = Field("SYST:ERR?", description="asked after each setting, in the same message if compound")
    no_error: str = Field("0", description="first field of the answer to `confirm` when all is well")
    compound: Flag = True
    joint: str = Field(";:", description="what joins commands in one message")
    sessions: Literal["one", "several"] = "one"
    timeout: PositiveSeconds = 3.0
    settings: dict[str, SettingText]
    readings: dict[str, Reading]
    status: dict[str, Annotated[Bits, BeforeValidator(_bits), WithJsonSchema(_BITS_SCHEMA)]] = Field(
        default_factory=dict
    )
    accuracy: Accuracy = Accuracy()
    settable: dict[str, Annotated[float, BeforeValidator(lambda value: _largest(value)), _SETTABLE_SCHEMA]] = Field(
        default_factory=dict
    )
    least: dict[str, Annotated[float, BeforeValidator(lambda value: _largest(value)), _SETTABLE_SCHEMA]] = Field(
        default_factory=dict,
        description="smallest voltage: a load no longer sinks its current, a tap supply plays no cell",
    )
    sinks: PositiveAmperes | None = Field(
        None, description="tap supply: current that one channel absorbs; nothing, unless said"
    )

    @model_validator(mode="after")
    def _complete(self) -> Dialect:
        need = NEEDS[self.role]
        lacking = [f"settings.{name}" for name in sorted(need.settings - set(self.settings))]
        there = {name: fields for name, fields in need.may.items() if name in self.readings}
        for name, fields in (need.readings | there).items():
            have = set(self.readings[name].fields) if name in self.readings else set()
            lacking += [f"readings.{name}.{field}" for field in sorted(fields - have)]
        lacking += [f"status.{name}" for name in sorted(need.states - set(self.status))]
        if lacking:
            raise refuse(f"a dialect of role '{self.role}' also needs {', '.join(lacking)}")
        if "ohms" in self.readings and not self.accuracy.ohmmeter:
            raise refuse("readings.ohms: what it reads is uncertain by how much? 'accuracy.ohmmeter' is missing")
        return self

    @model_validator(mode="after")
    def _absorbs(self) -> Dialect:
        if self.sinks is not None and self.role != "tap supply":
            raise refuse(f"'sinks' belongs to a tap supply; this is a dialect of role '{self.role}'")
        return self

    @model_validator(mode="after")
    def _values(self) -> Dialect:
        """A voltage that never reaches the instrument, or an "on" that waits for a value, would show too late."""
        need = NEEDS[self.role]
        for name in sorted(need.settings & set(self.settings)):
            setting = self.settings[name]
            if setting.takes_value is not (name in need.valued):
                wanted = "must hold {value}" if name in need.valued else "takes no {value}"
                raise refuse(f'settings.{name}: "{setting.words}" {wanted}')
            if setting.takes_channel is not (name in need.channelled) and name in need.channelled:
                raise refuse(f'settings.{name}: "{setting.words}" must hold {{channel}}')
        for name in sorted(need.channelled & set(self.readings)):
            if not self.readings[name].takes_channel:
                raise refuse(f"readings.{name}: must hold {{channel}}")
        return self

    @property
    def end(self) -> str:
        """The characters that close a message."""
        return {"LF": "\n", "CR": "\r", "CRLF": "\r\n"}[self.terminator]


def _largest(value: Any) -> float:
    """A largest or smallest value, of a voltage, a current or a resistance."""
    text = str(value).rstrip()
    dimension = "current" if text.endswith("A") else "voltage" if text.endswith("V") else "resistance"
    return Measure(dimension, above=0).read(text)
