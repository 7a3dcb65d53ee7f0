"""Parameters of SCPI commands: how their text is read, and which error a wrong one makes.

Data formats: IEEE 488.2, clause 7.7 (what an instrument hears); SCPI-1999, volume 1, chapter 7.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Protocol

from drivers.virtual.status import ScpiError

_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:\s*[eE]\s*([+-]?\d+))?)\s*(.*)")
_RADIX = {"H": 16, "Q": 8, "B": 2}
_INFINITE = {"INF": 9.9e37, "INFINITY": 9.9e37, "NINF": -9.9e37, "NAN": 9.91e37}
MAX_DIGITS, MAX_EXPONENT = 255, 32000  # IEEE 488.2, 7.7.2.4.1
# Multipliers before a unit; M is milli and MA is mega (IEEE 488.2, 7.7.3.4). Only what a bench needs.
_UNITS = {
    unit: {f"{prefix}{unit}": factor for prefix, factor in (("", 1.0), ("K", 1e3), ("M", 1e-3), ("U", 1e-6))}
    for unit in ("V", "A", "S")
} | {"OHM": {"OHM": 1.0, "KOHM": 1e3, "MOHM": 1e6}}  # before OHM and HZ, M is mega (IEEE 488.2, 7.7.3.4)


def short_form(mnemonic: str) -> str:
    """The short form: the capitals of a mnemonic as it stands in a table ("VOLTage" -> "VOLT")."""
    return "".join(letter for letter in mnemonic if not letter.islower())


def forms(mnemonic: str) -> tuple[str, str]:
    """Both accepted spellings, in capitals (SCPI-1999, volume 1, 6.2.1: these two and none between)."""
    return short_form(mnemonic), mnemonic.upper()


class Parameter(Protocol):
    """One place in a parameter list."""

    @property
    def optional(self) -> bool: ...

    def read(self, text: str) -> object:
        """The value of `text`; raises ScpiError."""

    def words(self) -> str:
        """The place as a help text shows it."""


def _no_data(text: str) -> ScpiError:
    """The error for a text that is no data element of the kind expected."""
    first = text[:1]
    if first.isalnum() or first in "+-.#\"'(":
        return ScpiError(-104)
    return ScpiError(-101 if first not in "@?" else -102)


def read_number(text: str, units: Mapping[str, float]) -> float:
    """A decimal or non-decimal number with an optional unit; raises ScpiError."""
    if text.startswith("#"):
        return _read_radix(text)
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise _no_data(text)
    digits, exponent, suffix = match.groups()
    if exponent is not None and abs(int(exponent)) > MAX_EXPONENT:
        raise ScpiError(-123)
    if sum(letter.isdigit() for letter in digits) > MAX_DIGITS:
        raise ScpiError(-124)
    return float("".join(digits.split())) * _factor(suffix, units)


def _factor(suffix: str, units: Mapping[str, float]) -> float:
    if not suffix:
        return 1.0
    if suffix[0] == ":" or suffix[0].isdigit():  # a message unit begins without its semicolon
        raise ScpiError(-103)
    if not suffix[0].isalpha():
        raise ScpiError(-121)
    if not units:
        raise ScpiError(-138)
    if suffix.upper() not in units:
        raise ScpiError(-131)
    return units[suffix.upper()]


def _read_radix(text: str) -> float:
    radix = _RADIX.get(text[1:2].upper())
    if radix is None:
        raise ScpiError(-104)  # a block, where a number belongs
    try:
        return float(int(text[2:], radix))
    except ValueError as reason:
        raise ScpiError(-121) from reason


@dataclass(frozen=True)
class Number:
    """A number from `low` to `high` (both in the unit), or MINimum, MAXimum, and DEFault where there is one."""

    low: float
    high: float
    unit: str = ""
    default: float | None = None
    optional: bool = False
    units: Mapping[str, float] = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "units", _UNITS.get(self.unit, {}))

    def read(self, text: str) -> float:
        word = text.upper()
        if word[:1].isalpha():
            value = self.named(word)
        else:
            value = read_number(text, self.units)
        if not self.low <= value <= self.high:
            raise ScpiError(-222)
        return value

    def named(self, word: str) -> float:
        """The value of MINimum, MAXimum, DEFault, or an infinity."""
        if word in forms("MINimum"):
            return self.low
        if word in forms("MAXimum"):
            return self.high
        if word in forms("DEFault") and self.default is not None:
            return self.default
        if word in _INFINITE:
            return _INFINITE[word]
        raise ScpiError(-104)

    def words(self) -> str:
        default = "" if self.default is None else f" (DEF {self.default:g})"
        return f"{self.low:g} to {self.high:g} {self.unit}".strip() + default


@dataclass(frozen=True)
class Extreme:
    """The optional MINimum, MAXimum or DEFault of a query that asks for a limit of a setting."""

    number: Number
    optional: bool = True

    def read(self, text: str) -> float:
        if not text[:1].isalpha():
            raise ScpiError(-104)
        return self.number.named(text.upper())

    def words(self) -> str:
        return "MIN|MAX" + ("" if self.number.default is None else "|DEF")


@dataclass(frozen=True)
class Boolean:
    """ON, OFF, or a number that is rounded: 0 is OFF (SCPI-1999, volume 1, 7.3)."""

    optional: bool = False

    def read(self, text: str) -> bool:
        word = text.upper()
        if word in ("ON", "OFF"):
            return word == "ON"
        if word[:1].isalpha():
            raise ScpiError(-224)
        return round(read_number(text, {})) != 0

    def words(self) -> str:
        return "ON|OFF|1|0"


@dataclass(frozen=True)
class Choice:
    """One of a list of mnemonics; read into its short form."""

    mnemonics: tuple[str, ...]
    optional: bool = False

    def read(self, text: str) -> str:
        if not text[:1].isalpha():
            raise _no_data(text)
        for mnemonic in self.mnemonics:
            if text.upper() in forms(mnemonic):
                return short_form(mnemonic)
        raise ScpiError(-224)

    def words(self) -> str:
        return "|".join(self.mnemonics)


@dataclass(frozen=True)
class Channels:
    """A channel list: (@1), (@1,3:5); read into a tuple of numbers in the order written."""

    known: tuple[int, ...]
    optional: bool = False

    def read(self, text: str) -> tuple[int, ...]:
        if not text.startswith("("):
            raise _no_data(text)
        match = re.fullmatch(r"\(\s*@\s*(\d{1,6}(?:\s*:\s*\d{1,6})?(?:\s*,\s*\d{1,6}(?:\s*:\s*\d{1,6})?)*)\s*\)", text)
        if match is None:
            raise ScpiError(-171)
        found: list[int] = []
        for part in match[1].split(","):
            found += self._span(part)
        return tuple(found)

    def _span(self, part: str) -> list[int]:
        ends = [int(end) for end in part.split(":")]
        first, last = ends[0], ends[-1]
        if first not in self.known or last not in self.known:
            raise ScpiError(-222)
        step = 1 if first <= last else -1
        return [channel for channel in range(first, last + step, step) if channel in self.known]

    def words(self) -> str:
        return "(@" + ",".join(str(channel) for channel in self.known) + ")"
