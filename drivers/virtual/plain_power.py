"""Supply, load and cell supply of the second family.

Their status words are the other way round: a supply's bit is set while it is *not* in constant voltage or constant
current, a load's while nothing has tripped. The supplies think for a while before they act.
"""

from __future__ import annotations

from functools import partial
from typing import Any

from drivers.virtual.load import CURRENT as LOAD_CURRENT
from drivers.virtual.load import OVERCURRENT, Load
from drivers.virtual.parameters import Number
from drivers.virtual.plain import Entry, Plain, PlainFault, decimal, fixed, on_off, switched, word
from drivers.virtual.supply import CURRENT, OVERVOLTAGE, VOLTAGE, Supply
from drivers.virtual.tap_supply import CURRENT as CELL_CURRENT
from drivers.virtual.tap_supply import VOLTAGE as CELL_VOLTAGE
from drivers.virtual.tap_supply import Output, TapSupply
from drivers.virtual.terminals import Cell

THINKS_s = 0.1  # from a command to the output's reaction; system supplies need 20 to 100 ms, common practice, no source
NOT_VOLTAGE, NOT_CURRENT = 1, 2  # of a supply's status
SOUND = 1  # of a load's


def _within(number: Number, text: str) -> float:
    value = decimal(text)
    if not number.low <= value <= number.high:
        raise PlainFault("RANGE")
    return value


def _number(number: Number) -> Any:
    return partial(_within, number)


class PlainSupply(Plain, Supply):
    def _later(self, what: str, value: float) -> None:
        self.circuit.later(THINKS_s, lambda: setattr(self.circuit.supply, what, value))

    def _status(self) -> str:
        mode = self.circuit.supply_mode
        return str(NOT_VOLTAGE * (mode != "cv") + NOT_CURRENT * (mode != "cc"))

    def _on_now(self) -> str:
        return switched(self.output and not self.tripped)


PlainSupply.table = {
    "SET:VOLT": Entry(_number(VOLTAGE), PlainSupply._set_voltage, lambda self: fixed(self.voltage)),
    "SET:CURR": Entry(_number(CURRENT), PlainSupply._set_current, lambda self: fixed(self.current)),
    "TRIP:VOLT": Entry(_number(OVERVOLTAGE), PlainSupply._set_overvoltage, lambda self: fixed(self.overvoltage)),
    "TRIP:CLEAR": Entry(do=PlainSupply._clear_trips),
    "POWER": Entry(on_off, PlainSupply._switch, PlainSupply._on_now),
    "READ:VOLT": Entry(ask=lambda self: fixed(float(self._measured_voltage()))),
    "READ:CURR": Entry(ask=lambda self: fixed(float(self._measured_current()))),
    "READ:STATUS": Entry(ask=PlainSupply._status),
}


class PlainLoad(Plain, Load):
    def _status(self) -> str:
        return str(SOUND * (not self.tripped))

    def _on_now(self) -> str:
        return switched(self.input and not self.tripped)


PlainLoad.table = {
    "MODE": Entry(word("CC"), PlainLoad._choose, lambda self: "CC"),
    "SET:CURR": Entry(_number(LOAD_CURRENT), PlainLoad._set_current, lambda self: fixed(self.current)),
    "TRIP:CURR": Entry(_number(OVERCURRENT), PlainLoad._set_overcurrent, lambda self: fixed(self.overcurrent)),
    "TRIP:CLEAR": Entry(do=PlainLoad._clear_trips),
    "POWER": Entry(on_off, PlainLoad._switch, PlainLoad._on_now),
    "READ:VOLT": Entry(ask=lambda self: fixed(float(self._measured_voltage()))),
    "READ:CURR": Entry(ask=lambda self: fixed(float(self._measured_current()))),
    "READ:STATUS": Entry(ask=PlainLoad._status),
}


class PlainTapSupply(Plain, TapSupply):
    """One channel at a time: what follows `INST:SEL CH2` is for channel 2, until another is chosen."""

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        self._selected: int | None = None
        super().__init__(*args, **kwargs)

    def _later(self, cell: Cell, what: str, value: float) -> None:
        self.circuit.later(THINKS_s, partial(setattr, cell, what, value))

    def _select(self, channel: int) -> None:
        if channel not in self._outputs:
            raise PlainFault("RANGE")
        self._selected = channel

    @property
    def _chosen(self) -> tuple[int, ...]:
        if self._selected is None:
            raise PlainFault("STATE")
        return (self._selected,)

    @property
    def _channel_now(self) -> Output:
        return self._outputs[self._chosen[0]]

    def _volts(self) -> str:
        self.circuit.catch_up()
        return fixed(self._measure(self._channel_now))


def _channel(text: str) -> int:
    if not text.startswith("CH") or not text[2:].isdecimal():
        raise PlainFault("VALUE")
    return int(text[2:])


PlainTapSupply.table = {
    "INST:SEL": Entry(_channel, PlainTapSupply._select, lambda self: f"CH{self._chosen[0]}"),
    "SET:VOLT": Entry(
        _number(CELL_VOLTAGE),
        lambda self, value: self._set_voltage(value, self._chosen),
        lambda self: fixed(self._channel_now.voltage),
    ),
    "SET:CURR": Entry(
        _number(CELL_CURRENT),
        lambda self, value: self._set_current(value, self._chosen),
        lambda self: fixed(self._channel_now.current),
    ),
    "POWER": Entry(
        on_off, lambda self, on: self._switch(on, self._chosen), lambda self: switched(self._channel_now.on)
    ),
    "READ:VOLT": Entry(ask=PlainTapSupply._volts),
}
