"""How the instruments are wired: the node with its contacts, ID and thermistor resistors, cell taps, mains, ambient.

An instrument with several channels is named with one: "relays.3" is channel 3 of the instrument "relays".
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Any

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    model_validator,
)
from pydantic import GetJsonSchemaHandler as JsonHandler
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.needs import Role
from drivers.text.measures import Band, Limit, Ohms, PositiveOhms, refuse


class Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


@dataclass(frozen=True)
class Channel:
    """One channel of an instrument."""

    instrument: str
    channel: str

    def __str__(self) -> str:
        return f"{self.instrument}.{self.channel}"


class _ChannelText:
    """Reads "relays.3"."""

    def read(self, value: Any) -> Channel:
        if isinstance(value, Channel):
            return value
        instrument, dot, channel = str(value).rpartition(".")
        if not dot or not instrument or not channel.isalnum():
            raise refuse(f'"{value}": an instrument and its channel were expected, such as "relays.3"')
        return Channel(instrument, channel)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: JsonHandler) -> JsonSchemaValue:
        return {"type": "string", "pattern": r"^.+\.\w+$", "examples": ["relays.3"]}


ChannelRef = Annotated[Channel, _ChannelText()]


def _has_tolerance(value: Band) -> Band:
    if value.nominal is None or value.nominal <= 0:
        raise refuse(f'"{value.text}": a shunt needs a resistance and its tolerance, such as "10 mΩ ± 0.1 %"')
    return value


Shunt = Annotated[Band, Limit("resistance"), AfterValidator(_has_tolerance)]


class CurrentPath(Part):
    """How the charger's current is measured: a Kelvin shunt and the meter across it."""

    shunt: Shunt
    meter: str

    @property
    def shunt_ohm(self) -> float:
        assert self.shunt.nominal is not None
        return self.shunt.nominal


class NodeContacts(Part):
    """The pack's power contacts: B+ closes last, first through the pre-charge resistor."""

    b_plus: ChannelRef
    b_minus: ChannelRef
    precharge: ChannelRef
    precharge_resistor: PositiveOhms


class NodeWiring(Part):
    """The junction of charger, supply and load, and who measures there."""

    supply: str
    load: str
    voltage: str = Field(description="meter at the node")
    charger_voltage: str = Field(description="meter at the charger's own contacts (Kelvin)")
    current: CurrentPath
    ballast: Ohms = Field(description="resistor in the charger's path, at least half of the pack's resistance")
    ballast_power: Annotated[str, Field(description="its rating, such as '10 W'")] | None = None
    contacts: NodeContacts | None = Field(None, description="without them the charger's mains are the only contact")


class MainsWiring(Part):
    switch: str


class SignalWiring(Part):
    """A programmable resistor at one of the pack's small contacts; `sense` reads its voltage on the bench's side."""

    resistor: str
    contact: ChannelRef
    sense: ChannelRef


class TapWiring(Part):
    """One cell junction, from the lowest up: who plays the cell below it, its shunt and who reads that, its contact."""

    supply: ChannelRef
    shunt: Shunt
    meter: ChannelRef
    contact: ChannelRef

    @property
    def shunt_ohm(self) -> float:
        assert self.shunt.nominal is not None
        return self.shunt.nominal


def _tuple(value: Any) -> Any:
    return tuple(value) if isinstance(value, list) else value


class AmbientWiring(Part):
    thermometer: str


class Wiring(Part):
    """What is wired to what; only what a procedure needs must be there."""

    node: NodeWiring
    mains: MainsWiring
    id: SignalWiring | None = None
    thermistor: SignalWiring | None = None
    taps: Annotated[tuple[TapWiring, ...], BeforeValidator(_tuple)] = ()
    ambient: AmbientWiring | None = None

    @model_validator(mode="after")
    def _signals_have_power_contacts(self) -> Wiring:
        small = [name for name in ("id", "thermistor", "taps") if getattr(self, name)]
        if small and self.node.contacts is None:
            told = f"{', '.join(small)} close and open with the pack; 'node.contacts' is missing"
            raise refuse(f"{told}: {{b_plus: relays.1, b_minus: relays.2, precharge: relays.3, ...}}")
        return self

    def places(self) -> Iterator[tuple[str, str | Channel, Role]]:
        """(place, instrument or channel there, role that it must play), in a fixed order."""
        node = self.node
        yield "node.supply", node.supply, "supply"
        yield "node.load", node.load, "load"
        yield "node.voltage", node.voltage, "meter"
        yield "node.charger_voltage", node.charger_voltage, "meter"
        yield "node.current.meter", node.current.meter, "meter"
        yield "mains.switch", self.mains.switch, "mains switch"
        if node.contacts is not None:
            yield "node.contacts.b_plus", node.contacts.b_plus, "contacts"
            yield "node.contacts.b_minus", node.contacts.b_minus, "contacts"
            yield "node.contacts.precharge", node.contacts.precharge, "contacts"
        for name, signal in (("id", self.id), ("thermistor", self.thermistor)):
            if signal is not None:
                yield f"{name}.resistor", signal.resistor, "resistor"
                yield f"{name}.contact", signal.contact, "contacts"
                yield f"{name}.sense", signal.sense, "scanner"
        for number, tap in enumerate(self.taps):
            yield f"taps.{number}.supply", tap.supply, "tap supply"
            yield f"taps.{number}.meter", tap.meter, "scanner"
            yield f"taps.{number}.contact", tap.contact, "contacts"
        if self.ambient is not None:
            yield "ambient.thermometer", self.ambient.thermometer, "thermometer"
