"""Status reporting of an instrument: error queue, event status, status byte, condition registers.

IEEE 488.2 (status byte, standard event status) with the SCPI-1999 additions (error queue, QUEStionable and
OPERation registers). Bits and weights: IEEE 488.2, standard event status register and status byte.
"""

from __future__ import annotations

from collections import deque

ERRORS = {
    0: "No error",
    -100: "Command error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -124: "Too many digits",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -151: "Invalid string data",
    -171: "Invalid expression",
    -200: "Execution error",
    -221: "Settings conflict",
    -222: "Data out of range",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
}
OPERATION_COMPLETE, QUERY_ERROR, DEVICE_ERROR, EXECUTION_ERROR, COMMAND_ERROR, POWER_ON = 1, 4, 8, 16, 32, 128
ERROR_QUEUE, QUESTIONABLE, MESSAGE_AVAILABLE, EVENT_STATUS, MASTER, OPERATION = 4, 8, 16, 32, 64, 128
QUEUE_DEPTH = 20


class ScpiError(Exception):
    """An error that goes to the instrument's queue; `number` as in SCPI-1999, volume 2, SYSTem:ERRor."""

    def __init__(self, number: int) -> None:
        super().__init__(f'{number},"{ERRORS[number]}"')
        self.number = number

    def __reduce__(self) -> tuple[type[ScpiError], tuple[int]]:
        return type(self), (self.number,)


def event_bit(number: int) -> int:
    """The bit of the standard event status register that belongs to an error number."""
    if -499 <= number <= -400:
        return QUERY_ERROR
    if -299 <= number <= -200:
        return EXECUTION_ERROR
    if -199 <= number <= -100:
        return COMMAND_ERROR
    return DEVICE_ERROR if number > 0 or -399 <= number <= -300 else 0


class Register:
    """A SCPI condition register with its event and enable registers; an event is a bit that went from 0 to 1."""

    def __init__(self) -> None:
        self.condition = 0
        self.event = 0
        self.enable = 0

    def update(self, condition: int) -> None:
        self.event |= condition & ~self.condition
        self.condition = condition

    def take_event(self) -> int:
        event, self.event = self.event, 0
        return event

    @property
    def summary(self) -> bool:
        return bool(self.event & self.enable)


class Status:
    """All that an instrument reports about itself."""

    def __init__(self) -> None:
        self.errors: deque[int] = deque()
        self.event = POWER_ON
        self.event_enable = 0
        self.service_enable = 0
        self.questionable = Register()
        self.operation = Register()

    def push(self, number: int) -> None:
        """Queue an error; when the queue is full its last entry becomes -350 (SCPI-1999, volume 2, 21.8)."""
        self.event |= event_bit(number)
        if len(self.errors) < QUEUE_DEPTH:
            self.errors.append(number)
        else:
            self.errors[-1] = -350
            self.event |= event_bit(-350)

    def next_error(self) -> str:
        number = self.errors.popleft() if self.errors else 0
        return f'{number},"{ERRORS[number]}"'

    def clear(self) -> None:
        """*CLS: event registers and error queue; the enable registers stay (IEEE 488.2, 10.3)."""
        self.errors.clear()
        self.event = self.questionable.event = self.operation.event = 0

    def take_event(self) -> int:
        event, self.event = self.event, 0
        return event

    def byte(self, message_available: bool) -> int:
        """The status byte with bit 6 as master summary, as *STB? answers it."""
        value = (
            ERROR_QUEUE * bool(self.errors)
            + QUESTIONABLE * self.questionable.summary
            + MESSAGE_AVAILABLE * message_available
            + EVENT_STATUS * bool(self.event & self.event_enable)
            + OPERATION * self.operation.summary
        )
        return value | (MASTER if value & self.service_enable & ~MASTER else 0)
