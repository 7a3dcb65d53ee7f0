"""A sans-IO instrument: bytes in, bytes out, common commands, status. What it measures is for its family.

Two ways to talk: `feed` and `take` keep the message exchange rules of IEEE 488.2 (clause 6: -410 when a new message
comes before the answer was read, -420 when an answer is read that nobody asked for); `stream` is a raw socket, where
answers flow out as soon as they stand.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from typing import ClassVar

from drivers.virtual.circuit import Circuit
from drivers.virtual.parameters import Extreme, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.status import OPERATION_COMPLETE, ScpiError, Status

MOST_INPUT = 65_536  # bytes without a terminator
_BYTE = Number(0, 255)
_WORD = Number(0, 32767)


def nr3(value: float) -> str:
    """A number as instruments answer it: exponent form (IEEE 488.2, 8.7.4)."""
    return f"{value:+.9E}"


def serial_number(name: str) -> str:
    """An invented serial number that belongs to a name."""
    return f"V{int.from_bytes(hashlib.sha256(name.encode()).digest()[:4], 'big') % 10_000:04d}"


class Instrument:
    """Base of the virtual instruments."""

    family: ClassVar[str]
    answer_s: ClassVar[float] = 0.0  # how long it takes to answer, in wall time
    tree: Tree  # of the family, or of the individual where its channels are its own

    def __init__(self, name: str, circuit: Circuit) -> None:
        self.name = name
        self.circuit = circuit
        self.status = Status()
        self.messages = 0  # counted for ever
        self.mute = False  # neither hears nor answers (trouble)
        self.overloaded = False  # a meter: answers overload to everything (trouble)
        self._input = b""
        self._output = b""
        self._answers: list[str] = []

    # -- the wire -------------------------------------------------------------------------------------------

    @property
    def pending(self) -> int:
        """Bytes that wait to be taken."""
        return len(self._output)

    def feed(self, data: bytes) -> None:
        """Hear bytes; a line feed ends a message, which is done at once."""
        for line in self._lines(data):
            if self._output:
                self._output = b""
                self.status.push(-410)
            self._output = self._do(line)

    def take(self, count: int) -> bytes:
        """Say at most `count` bytes; nothing, and error -420, where no answer is due."""
        if not self._output:
            self.status.push(-420)
        taken, self._output = self._output[:count], self._output[count:]
        return taken

    def stream(self, data: bytes) -> bytes:
        """Hear bytes of a raw socket and return all answers that became ready."""
        if self.mute:
            return b""
        if not self._input and data.endswith(b"\n") and data.count(b"\n") == 1:
            return self._do(data[:-1])
        return b"".join([self._do(line) for line in self._lines(data)])

    def clear_link(self) -> None:
        """Forget a half message and an answer that was not taken (device clear, or a new link)."""
        self._input = self._output = b""

    def _lines(self, data: bytes) -> list[bytes]:
        *lines, self._input = (self._input + data).split(b"\n")
        if len(self._input) > MOST_INPUT:
            self._input = b""
            self.status.push(-363)
        return lines

    def _do(self, line: bytes) -> bytes:
        self.messages += 1
        self._answers = answers = []
        for step in self.tree.compile(line.decode("latin-1").strip()):
            try:
                answer = step.call(self, *step.values)
            except ScpiError as error:
                self.status.push(error.number)
            else:
                if step.is_query:
                    answers.append(answer)
        return (";".join(answers) + "\n").encode("latin-1") if answers else b""

    # -- what families add ------------------------------------------------------------------------------------

    def reset(self) -> None:
        """*RST: settings as at power-on."""

    def conditions(self) -> tuple[int, int]:
        """The condition bits of the OPERation and the QUEStionable register as they are now."""
        return 0, 0

    # -- common commands --------------------------------------------------------------------------------------

    def identity(self) -> str:
        return f"packmime,virtual {self.family},{serial_number(self.name)},1.0"

    def _refresh(self) -> Status:
        """The status with its condition registers brought up to now."""
        operation, questionable = self.conditions()
        self.status.operation.update(operation)
        self.status.questionable.update(questionable)
        return self.status

    def _clear_status(self) -> None:
        self._refresh().clear()

    def _complete(self) -> None:
        self.status.event |= OPERATION_COMPLETE

    def _set_event_enable(self, value: float) -> None:
        self.status.event_enable = round(value)

    def _set_service_enable(self, value: float) -> None:
        self.status.service_enable = round(value) & ~64  # bit 6 cannot be enabled (IEEE 488.2, 11.3.2)

    def _status_byte(self) -> str:
        return str(self._refresh().byte(bool(self._answers)))

    def _wait(self) -> None:
        """*WAI: every command is done when the next one is heard."""

    def _preset(self) -> None:
        self.status.operation.enable = self.status.questionable.enable = 0

    def _set_enable(self, which: str, value: float) -> None:
        getattr(self.status, which).enable = round(value)

    def _error_count(self) -> str:
        return str(len(self.status.errors))


def _register(node: str, name: str) -> list[Command]:
    """The commands of one SCPI register (SCPI-1999, volume 2, STATus)."""
    return [
        Command(
            f"STATus:{node}[:EVENt]",
            f"events of the {node} register, cleared by reading",
            ask=lambda self: str(getattr(self._refresh(), name).take_event()),
        ),
        Command(
            f"STATus:{node}:CONDition",
            f"conditions of the {node} register",
            ask=lambda self: str(getattr(self._refresh(), name).condition),
        ),
        Command(
            f"STATus:{node}:ENABle",
            f"events of the {node} register that reach the status byte",
            do=lambda self, value: self._set_enable(name, value),
            takes=(_WORD,),
            ask=lambda self: str(getattr(self.status, name).enable),
        ),
    ]


COMMON = (
    Command("*CLS", "clear event registers and error queue", do=lambda self: self._clear_status()),
    Command(
        "*ESE",
        "events that reach bit 5 of the status byte",
        do=Instrument._set_event_enable,
        takes=(_BYTE,),
        ask=lambda self: str(self.status.event_enable),
    ),
    Command("*ESR", "standard events, cleared by reading", ask=lambda self: str(self.status.take_event())),
    Command("*IDN", "maker, model, serial number, version", ask=lambda self: self.identity()),
    Command("*OPC", "set the operation complete event", do=Instrument._complete, ask=lambda self: "1"),
    Command("*RST", "settings as at power-on", do=lambda self: self.reset()),
    Command(
        "*SRE",
        "bits of the status byte that request service",
        do=Instrument._set_service_enable,
        takes=(_BYTE,),
        ask=lambda self: str(self.status.service_enable),
    ),
    Command("*STB", "status byte", ask=Instrument._status_byte),
    Command("*TST", "self-test, 0 is good", ask=lambda self: "0"),
    Command("*WAI", "wait until all is done", do=Instrument._wait),
    Command("SYSTem:ERRor[:NEXT]", "oldest entry of the error queue", ask=lambda self: self.status.next_error()),
    Command("SYSTem:ERRor:COUNt", "entries in the error queue", ask=Instrument._error_count),
    Command("SYSTem:VERSion", "version of SCPI", ask=lambda self: "1999.0"),
    Command("STATus:PRESet", "disable all SCPI events", do=Instrument._preset),
    *_register("OPERation", "operation"),
    *_register("QUEStionable", "questionable"),
)


def setting(pattern: str, help: str, number: Number, attribute: str, setter: Callable[..., None]) -> Command:
    """A number that can be set and asked for, with MIN, MAX and DEF; `setter(instrument, value)` stores and acts."""

    def ask(self: Instrument, extreme: float | None = None) -> str:
        return nr3(getattr(self, attribute) if extreme is None else extreme)

    return Command(pattern, help, do=setter, takes=(number,), ask=ask, asks=(Extreme(number),))
