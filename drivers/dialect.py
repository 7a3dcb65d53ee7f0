"""Dialects: how one family of instruments is spoken to, as data.

A new family takes a YAML file and no Python. What each role must be able to do stands in NEEDS.
"""

from __future__ import annotations

import string
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from drivers.text.binding import Written
from drivers.text.measures import Flag, Measure, PositiveAmperes, PositiveSeconds, PositiveVolts, Ratio, refuse

Role = Literal["supply", "load", "meter", "mains switch"]

# role -> (settings, readings -> fields) that a dialect of the role must have.
NEEDS: dict[str, tuple[frozenset[str], dict[str, frozenset[str]]]] = {
    "supply": (
        frozenset({"clear", "voltage", "current_limit", "overvoltage", "on", "off"}),
        {"state": frozenset({"voltage", "current", "output", "status"})},
    ),
    "load": (
        frozenset({"clear", "constant_current", "current", "overcurrent", "on", "off"}),
        {"state": frozenset({"voltage", "current", "input", "status"})},
    ),
    "meter": (frozenset({"clear", "range", "integration"}), {"volts": frozenset({"volts"})}),
    "mains switch": (frozenset({"clear", "on", "off"}), {"state": frozenset({"output"})}),
}
STATUS = {
    "supply": frozenset({"constant_voltage", "constant_current"}),
    "load": frozenset({"tripped"}),
    "meter": frozenset[str](),
    "mains switch": frozenset[str](),
}

# Settings of any role that take a value; all others take none.
VALUED = frozenset({"voltage", "current_limit", "overvoltage", "current", "overcurrent", "range", "integration"})


def _is_query(value: str) -> str:
    if "?" not in value:
        raise refuse(f'"{value}" asks nothing: a query has a question mark (IEEE 488.2, 7.3.3)')
    return value


Query = Annotated[str, AfterValidator(_is_query)]


class Setting(BaseModel):
    """One setting: the text sent, with {value}; the query that reads it back, and the words that prove it.

    Without `expect` the readback must be the number that was set.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)
    send: str
    back: Query | None = None
    expect: tuple[str, ...] = ()

    @model_validator(mode="after")
    def _only_value(self) -> Setting:
        try:
            names = {name for _, name, _, _ in string.Formatter().parse(self.send) if name is not None}
        except ValueError as reason:
            raise refuse(f'"{self.send}": {reason}') from reason
        if names - {"value"}:
            raise refuse(f'"{self.send}": only {{value}} may stand in a command text')
        try:
            self.send.format(value=1.0)
        except (ValueError, LookupError) as reason:
            raise refuse(f'"{self.send}": a number cannot be written so ({reason})') from reason
        return self

    @model_validator(mode="after")
    def _provable(self) -> Setting:
        if self.expect and self.back is None:
            raise refuse(f'"{self.send}": `expect` needs a `back` to be held against')
        if self.back is not None and not self.expect and not self.takes_value:
            raise refuse(f'"{self.send}" sets no value: its `back` needs an `expect`')
        return self

    @property
    def takes_value(self) -> bool:
        return any(name == "value" for _, name, _, _ in string.Formatter().parse(self.send))


def _setting(value: Any) -> Any:
    return {"send": value} if isinstance(value, str) else value


class Reading(BaseModel):
    """One reading: a query, and the names of the fields of its answer, in order."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    ask: Query
    fields: tuple[str, ...] = Field(min_length=1)

    @model_validator(mode="after")
    def _named_once(self) -> Reading:
        twice = sorted({name for name in self.fields if self.fields.count(name) > 1})
        if twice:
            raise refuse(f'"{self.ask}": each field has a name of its own; {", ".join(twice)} stands there twice')
        return self


class VoltageSpan(BaseModel):
    """Accuracy in one voltage range: ±(reading + of_range), half widths of a rectangular distribution."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    range: PositiveVolts
    reading: Ratio
    of_range: Ratio
    resolution: PositiveVolts | None = None


class CurrentSpan(BaseModel):
    """Accuracy in one current range: ±(reading + of_range), half widths of a rectangular distribution."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    range: PositiveAmperes
    reading: Ratio
    of_range: Ratio
    resolution: PositiveAmperes | None = None


class Accuracy(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)
    voltage: tuple[VoltageSpan, ...] = ()
    current: tuple[CurrentSpan, ...] = ()


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
    settings: dict[str, Annotated[Setting, BeforeValidator(_setting)]]
    readings: dict[str, Reading]
    status: dict[str, Annotated[int, Field(gt=0)]] = Field(default_factory=dict)
    accuracy: Accuracy = Accuracy()
    settable: dict[str, Annotated[float, BeforeValidator(lambda value: _largest(value))]] = Field(default_factory=dict)

    @model_validator(mode="after")
    def _complete(self) -> Dialect:
        settings, readings = NEEDS[self.role]
        lacking = [f"settings.{name}" for name in sorted(settings - set(self.settings))]
        for name, fields in readings.items():
            have = set(self.readings[name].fields) if name in self.readings else set()
            lacking += [f"readings.{name}.{field}" for field in sorted(fields - have)]
        lacking += [f"status.{name}" for name in sorted(STATUS[self.role] - set(self.status))]
        if lacking:
            raise refuse(f"a dialect of role '{self.role}' also needs {', '.join(lacking)}")
        return self

    @model_validator(mode="after")
    def _values(self) -> Dialect:
        """A voltage that never reaches the instrument, or an "on" that waits for a value, would show too late."""
        for name, setting in self.settings.items():
            if setting.takes_value is not (name in VALUED) and name in NEEDS[self.role][0]:
                wanted = "must hold {value}" if name in VALUED else "takes no {value}"
                raise refuse(f'settings.{name}: "{setting.send}" {wanted}')
        return self

    @property
    def end(self) -> str:
        """The characters that close a message."""
        return {"LF": "\n", "CR": "\r", "CRLF": "\r\n"}[self.terminator]


def _largest(value: Any) -> float:
    """A largest settable value, of a voltage or a current."""
    text = str(value)
    return Measure("current" if text.rstrip().endswith("A") else "voltage", above=0).read(text)
