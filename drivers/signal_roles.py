"""The pack's contacts in the bench's words: resistors, relays, cell taps, scanner channels, thermometer."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from drivers.exchange import Job, Reply
from drivers.roles import Deed, Speaker, number
from drivers.trouble import ReplyFault


class Resistor(Speaker):
    """A programmable two-terminal resistor."""

    def to(self, ohm: float | str) -> Deed:
        """The deed that sets a resistance in Ω, or "open" or "short"."""
        return Deed(self, ohm) if isinstance(ohm, str) else Deed(self, "resistance", ohm)


class Lists(Speaker):
    """An instrument that reads one quantity on several channels."""

    def ask(self, what: str, channels: Sequence[str]) -> Job:
        """One question for all channels where the family can do that, else one after the other."""
        reading = self.dialect.readings[what]
        if reading.between is not None:
            texts = tuple(text.format(channel=",".join(channels)) for text in reading.ask)
            return Job(self.name, self._joined(texts), 1)
        messages: list[str] = []
        for channel in channels:
            messages += self._joined(tuple(text.format(channel=channel) for text in reading.ask))
        return Job(self.name, tuple(messages), len(channels) * len(reading.fields))

    def _joined(self, texts: tuple[str, ...]) -> tuple[str, ...]:
        return (self.dialect.joint.join(texts),) if self.dialect.compound else texts

    def answers(self, reply: Reply, what: str, channels: Sequence[str]) -> list[float]:
        """One number a channel, nan for overload. Raises what the reply carries, or ReplyFault."""
        if reply.fault is not None:
            raise reply.fault
        between = self.dialect.readings[what].between
        texts = reply.fields if between is None else tuple(reply.fields[0].split(between))
        if len(texts) != len(channels):
            raise ReplyFault(self.name, f"{len(channels)} channels were asked, {len(texts)} values came: {texts}")
        return [number(self.name, text.strip()) for text in texts]


class Thermometer(Speaker):
    def read(self, reply: Reply) -> float:
        """°C; nan for overload."""
        return self.values(reply, "celsius")["celsius"]


@dataclass(frozen=True)
class Contact:
    """One relay contact of the pack."""

    relay: Speaker
    channel: str

    @property
    def close(self) -> Deed:
        return Deed(self.relay, "close", channel=self.channel)

    @property
    def open(self) -> Deed:
        return Deed(self.relay, "open", channel=self.channel)


@dataclass(frozen=True)
class SignalLine:
    """A resistor at one of the pack's small contacts, and the scanner channel that sees it."""

    resistor: Resistor
    contact: Contact
    scanner: Lists
    sense: str


@dataclass(frozen=True)
class TapLine:
    """One cell junction: the supply channel that plays the cell below it, its shunt, its contact."""

    supply: Lists
    channel: str
    scanner: Lists
    sense: str
    shunt_ohm: float
    contact: Contact

    def volts(self, value_V: float) -> Deed:
        return Deed(self.supply, "voltage", value_V, channel=self.channel)

    def limit(self, value_A: float) -> Deed:
        return Deed(self.supply, "current_limit", value_A, channel=self.channel)

    @property
    def on(self) -> Deed:
        return Deed(self.supply, "on", channel=self.channel)

    @property
    def off(self) -> Deed:
        return Deed(self.supply, "off", channel=self.channel)


@dataclass(frozen=True)
class PowerContacts:
    """B+ and B-; B+ closes through the pre-charge resistor first."""

    b_plus: Contact
    b_minus: Contact
    precharge: Contact


@dataclass(frozen=True)
class Signals:
    """All of the pack's contacts that this bench has."""

    power: PowerContacts | None = None
    id: SignalLine | None = None
    thermistor: SignalLine | None = None
    taps: tuple[TapLine, ...] = ()
    thermometer: Thermometer | None = None

    @property
    def contacts(self) -> list[Contact]:
        """Every contact, in the order in which a removal opens them: power first."""
        power = [] if self.power is None else [self.power.b_plus, self.power.precharge]
        lines = [line.contact for line in (self.id, self.thermistor) if line is not None]
        taps = [tap.contact for tap in self.taps]
        return power + lines + taps + ([] if self.power is None else [self.power.b_minus])

    @property
    def speakers(self) -> list[Speaker]:
        """Every instrument behind them, each once."""
        found: list[Speaker] = [contact.relay for contact in self.contacts]
        for line in (self.id, self.thermistor):
            found += [] if line is None else [line.resistor, line.scanner]
        for tap in self.taps:
            found += [tap.supply, tap.scanner]
        found += [] if self.thermometer is None else [self.thermometer]
        return list({speaker.name: speaker for speaker in found}.values())
