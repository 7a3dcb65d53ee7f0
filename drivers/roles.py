"""What an instrument does on a bench, in the bench's words; the dialect turns it into text and back.

A role makes jobs and reads replies. It holds no link and no time: `Hands` carries jobs over the seam.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from enum import IntEnum

from drivers.dialect import Dialect
from drivers.exchange import Exchange, Job, Reply
from drivers.trouble import InstrumentFault, ReplyFault

OVERLOAD = 9.0e37  # SCPI-1999 vol. 1, 7.2.1.4-5: 9.9E37 is infinity, 9.91E37 not a number
BACK_TOLERANCE = 2e-3  # of the value set: the resolution of common programming DACs, common practice, no source
BACK_FLOOR = 0.5e-3  # and half a step of 1 mV or 1 mA, for values near zero; common practice, no source
# IEEE 488.2, 8.7.2 to 8.7.4: NR1, NR2, NR3; blanks around them, and words for what is no number, are seen in the field
_NUMERIC = re.compile(
    r"\s*[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?\s*|\s*[+-]?(?:nan|inf|infinity)\s*", re.ASCII | re.I
)
_SWITCHED = frozenset({"output", "input"})  # fields of a reading that are on or off
_BOOLEAN = {"ON": "1", "OFF": "0"}  # SCPI-1999 vol. 1, 7.3: answered as 1 or 0; some instruments answer the words


class SupplyMode(IntEnum):
    OFF = 0
    CONSTANT_VOLTAGE = 1
    CONSTANT_CURRENT = 2
    UNREGULATED = 3


class LoadMode(IntEnum):
    OFF = 0
    ON = 1
    TRIPPED = 2


def number(instrument: str, text: str) -> float:
    """One value of an answer; nan where the instrument says overload or not a number. Raises ReplyFault."""
    if not _NUMERIC.fullmatch(text):
        raise ReplyFault(instrument, f"'{text}' was answered where a number was expected")
    value = float(text)
    return value if math.isfinite(value) and abs(value) < OVERLOAD else math.nan


@dataclass(frozen=True)
class Speaker:
    """One instrument and its dialect: settings that prove themselves, readings by name."""

    name: str
    dialect: Dialect

    def setting(self, what: str, value: float | None = None, channel: str | None = None) -> Job:
        """A setting, its readback where the dialect has one, and the error queue, as few messages as can be.

        Raises ValueError for a value that is missing, not wanted or not finite: none of them may reach an instrument.
        """
        setting = self.dialect.settings[what]
        if (value is not None) is not setting.takes_value or not math.isfinite(value or 0.0):
            wanted = "a finite value" if setting.takes_value else "no value"
            raise ValueError(f"{self.name}: '{what}' takes {wanted}, {value} was given")
        filled = [text.format(value=value, channel=channel) for text in setting.send]
        asked = [text.format(value=value, channel=channel) for text in (setting.back, self.dialect.confirm) if text]
        messages = (self.dialect.joint.join([*filled, *asked]),) if self.dialect.compound else (*filled, *asked)
        return Job(self.name, messages, len(asked))

    def verify(self, reply: Reply, what: str, value: float | None = None) -> None:
        """Raise what went wrong with a setting; return when it stands as set."""
        if reply.fault is not None:
            raise reply.fault
        setting, fields = self.dialect.settings[what], list(reply.fields)
        if self.dialect.confirm:
            said = fields.pop()
            if said.split(",")[0].strip().lstrip("+") != self.dialect.no_error:
                asked = what if value is None else f"{what} {value:g}"
                raise InstrumentFault(self.name, f"refused '{asked}' and said {said}")
        if setting.back:
            self._verify_back(fields[-1], what, value)

    def _verify_back(self, back: str, what: str, value: float | None) -> None:
        expected = self.dialect.settings[what].expect
        if expected:
            good = back.strip().strip('"').upper() in {word.upper() for word in expected}
        else:
            assert value is not None
            good = abs(number(self.name, back) - value) <= max(BACK_TOLERANCE * abs(value), BACK_FLOOR)
        if not good:
            raise InstrumentFault(
                self.name, f"'{what}' was set to {value if value is not None else expected[0]}, reads back {back}"
            )

    def reading(self, what: str) -> Job:
        reading = self.dialect.readings[what]
        messages = (self.dialect.joint.join(reading.ask),) if self.dialect.compound else reading.ask
        return Job(self.name, messages, len(reading.fields))

    def values(self, reply: Reply, what: str) -> dict[str, float]:
        """The fields of a reading as numbers (nan for overload). Raises what the reply carries, or ReplyFault."""
        if reply.fault is not None:
            raise reply.fault
        names = self.dialect.readings[what].fields
        return {name: self._number(name, text) for name, text in zip(names, reply.fields, strict=True)}

    def _number(self, field: str, text: str) -> float:
        return number(self.name, _BOOLEAN.get(text.strip().upper(), text) if field in _SWITCHED else text)

    def state(self, values: dict[str, float], name: str) -> bool:
        """Whether a status named in the dialect is set."""
        status = values["status"]
        return not math.isnan(status) and self.dialect.status[name].hold(int(status))


@dataclass(frozen=True, slots=True)
class SupplyReading:
    """voltage_V, current_A (positive: sourcing), mode."""

    voltage_V: float
    current_A: float
    mode: SupplyMode


@dataclass(frozen=True, slots=True)
class LoadReading:
    """voltage_V, current_A (positive: sinking), mode."""

    voltage_V: float
    current_A: float
    mode: LoadMode


class Supply(Speaker):
    def read(self, reply: Reply) -> SupplyReading:
        values = self.values(reply, "state")
        if not values["output"]:
            mode = SupplyMode.OFF
        elif self.state(values, "constant_voltage"):
            mode = SupplyMode.CONSTANT_VOLTAGE
        else:
            limited = self.state(values, "constant_current")
            mode = SupplyMode.CONSTANT_CURRENT if limited else SupplyMode.UNREGULATED
        return SupplyReading(values["voltage"], values["current"], mode)


class Load(Speaker):
    def read(self, reply: Reply) -> LoadReading:
        values = self.values(reply, "state")
        if self.state(values, "tripped"):
            mode = LoadMode.TRIPPED
        else:
            mode = LoadMode.ON if values["input"] else LoadMode.OFF
        return LoadReading(values["voltage"], values["current"], mode)


class Meter(Speaker):
    def read(self, reply: Reply) -> float:
        """Volts; nan for overload."""
        return self.values(reply, "volts")["volts"]


class MainsSwitch(Speaker):
    def read(self, reply: Reply) -> bool:
        return bool(self.values(reply, "state")["output"])


@dataclass(frozen=True)
class Deed:
    """One setting to be done: who, what, to which value."""

    speaker: Speaker
    what: str
    value: float | None = None
    channel: str | None = None

    @property
    def job(self) -> Job:
        return self.speaker.setting(self.what, self.value, self.channel)


class Hands:
    """Carries deeds and questions over the seam and raises what went wrong."""

    def __init__(self, exchange: Exchange, patience_s: float) -> None:
        self.exchange = exchange
        self.patience_s = patience_s

    def do(self, deeds: Sequence[Deed]) -> None:
        """Carry out settings, all instruments side by side. Raises the first BenchFault, after all were tried."""
        replies = self.exchange([deed.job for deed in deeds], self.patience_s)
        for deed, reply in zip(deeds, replies, strict=True):
            deed.speaker.verify(reply, deed.what, deed.value)

    def ask(self, job: Job) -> Reply:
        return self.exchange([job], self.patience_s)[0]
