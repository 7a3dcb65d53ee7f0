"""The second virtual family, in another manner: plain words, one command a line, no status model.

A line is `WORDS value` or `WORDS?`, in capitals, ended by CR and LF. What an instrument cannot do stands as one word
in its fault memory until `FAULT?` takes it: WORD (no such command, or two in a line), VALUE (no such value),
RANGE, STATE (not now), LINE (CR missing). The stages behind are those of the first family.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

from drivers.virtual.instrument import Instrument, serial_number
from drivers.virtual.status import ScpiError

NO_FAULT = "NONE"
MOST_FAULTS = 8
ANSWER_s = 0.03  # from a question to its answer, in wall time; common practice, no source
_LINE = re.compile(r"([A-Z]+(?::[A-Z]+)*)(\?)?(?: (\S.*))?")
_NUMBER = re.compile(r"[+-]?\d+(?:\.\d+)?")
_WORDS = {-221: "STATE", -222: "RANGE"}


class PlainFault(Exception):
    """What goes to the fault memory, one word."""


@dataclass(frozen=True)
class Entry:
    """One command: how its value's text is read, what setting it does, what asking for it answers."""

    read: Callable[[str], Any] | None = None
    do: Callable[..., None] | None = None
    ask: Callable[..., str] | None = None


def decimal(text: str) -> float:
    """A number without exponent: this family knows no other."""
    if not _NUMBER.fullmatch(text):
        raise PlainFault("VALUE")
    return float(text)


def on_off(text: str) -> bool:
    if text not in ("ON", "OFF"):
        raise PlainFault("VALUE")
    return text == "ON"


def word(known: str) -> Callable[[str], str]:
    """The one word that may stand there."""

    def read(text: str) -> str:
        if text != known:
            raise PlainFault("VALUE")
        return text

    return read


def fixed(value: float) -> str:
    """A number as this family answers it."""
    return f"{value:.4f}"


def switched(on: object) -> str:
    return "ON" if on else "OFF"


class Plain(Instrument):
    """Base of the second family; stands before an instrument of the first, whose stages it drives."""

    table: ClassVar[Mapping[str, Entry]]
    answer_s: ClassVar[float] = ANSWER_s

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        self._faults: list[str] = []
        super().__init__(*args, **kwargs)

    def _do(self, line: bytes) -> bytes:
        self.messages += 1
        try:
            answer = self._obey(line.decode("latin-1"))
        except PlainFault as fault:
            self._note(str(fault))
        except ScpiError as error:
            self._note(_WORDS.get(error.number, "WORD"))
        else:
            return b"" if answer is None else (answer + "\r\n").encode("latin-1")
        return b""

    def _note(self, fault: str) -> None:
        if len(self._faults) < MOST_FAULTS:
            self._faults.append(fault)

    def _obey(self, line: str) -> str | None:
        if not line.endswith("\r"):
            raise PlainFault("LINE")
        match = _LINE.fullmatch(line.removesuffix("\r"))
        if match is None:
            raise PlainFault("WORD")
        header, question, text = match.groups()
        entry = self.table.get(header) or COMMON.get(header)
        if entry is None:
            raise PlainFault("WORD")
        if question:
            return self._replied(entry, text)
        self._told(entry, text)
        return None

    def _replied(self, entry: Entry, text: str | None) -> str:
        if entry.ask is None:
            raise PlainFault("WORD")
        if text is not None:
            raise PlainFault("VALUE")
        return entry.ask(self)

    def _told(self, entry: Entry, text: str | None) -> None:
        if entry.do is None:
            raise PlainFault("WORD")
        if (text is None) is not (entry.read is None):
            raise PlainFault("VALUE")
        if entry.read is None or text is None:
            entry.do(self)
        else:
            entry.do(self, entry.read(text))

    def _take_fault(self) -> str:
        return self._faults.pop(0) if self._faults else NO_FAULT

    def identity(self) -> str:
        return f"packmime,plain {self.family},{serial_number(self.name)},1"


COMMON: Mapping[str, Entry] = {
    "IDENT": Entry(ask=lambda self: self.identity()),
    "FAULT": Entry(ask=lambda self: self._take_fault()),
    "FAULT:CLEAR": Entry(do=lambda self: self._faults.clear()),
    "RESET": Entry(do=lambda self: self.reset()),
}
