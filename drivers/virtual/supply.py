"""The virtual supply: one output, 60 V / 15 A, over-voltage and over-current protection that latch."""

from __future__ import annotations

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Imperfect, Span
from drivers.virtual.instrument import COMMON, Instrument, nr3, setting
from drivers.virtual.parameters import Boolean, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.status import ScpiError
from drivers.virtual.trace import NODE, SUPPLY_CURRENT

VOLTAGE = Number(0.0, 60.0, "V", default=0.0)
CURRENT = Number(0.0, 15.0, "A", default=1.5)
OVERVOLTAGE = Number(0.0, 66.0, "V", default=66.0)
OVERCURRENT = Number(0.0, 16.5, "A", default=16.5)
VOLTAGE_SPAN = Span(60.0, 0.0003, 0.0001, 0.001)
CURRENT_SPAN = Span(15.0, 0.001, 0.0005, 0.001)
CONSTANT_VOLTAGE, CONSTANT_CURRENT = 256, 1024  # OPERation; the bits are the designer's own (SCPI leaves them free)
OVERVOLTAGE_TRIPPED, OVERCURRENT_TRIPPED = 1, 2  # QUEStionable: VOLTage, CURRent


class Supply(Instrument):
    family = "supply"

    def __init__(self, name: str, circuit: Circuit, seed: int, scale: float, offset_V: float) -> None:
        super().__init__(name, circuit)
        self._offset_V = offset_V
        self._voltmeter = Imperfect((VOLTAGE_SPAN,), seed, name, "voltage", scale)
        self._ammeter = Imperfect((CURRENT_SPAN,), seed, name, "current", scale)
        self._dac = Imperfect((VOLTAGE_SPAN,), seed, name, "set voltage", scale)
        self._limiter = Imperfect((CURRENT_SPAN,), seed, name, "set current", scale)
        self.reset()

    def reset(self) -> None:
        self.overcurrent_on = False
        self.circuit.change(self._unlatch)
        self._switch(False)
        self._set_voltage(0.0)
        self._set_current(1.5)
        self._set_overvoltage(66.0)
        self._set_overcurrent(16.5)

    def conditions(self) -> tuple[int, int]:
        mode = self.circuit.supply_mode
        operation = {"cv": CONSTANT_VOLTAGE, "cc": CONSTANT_CURRENT}.get(mode, 0)
        tripped = self.circuit.supply.tripped
        questionable = OVERVOLTAGE_TRIPPED * ("voltage" in tripped) + OVERCURRENT_TRIPPED * ("current" in tripped)
        return operation, questionable

    def _set_voltage(self, value: float) -> None:
        self.voltage = value
        real_V = max(self._dac.programmed(value) + self._offset_V * bool(value), 0.0)
        self._later("voltage_V", real_V)

    def _set_current(self, value: float) -> None:
        self.current = value
        self._later("limit_A", max(self._limiter.programmed(value), 0.0))

    def _switch(self, on: bool) -> None:
        if on and self.tripped:
            raise ScpiError(-221)
        self.output = on
        self._later("on", on)

    def _later(self, what: str, value: float) -> None:
        self.circuit.command(lambda: setattr(self.circuit.supply, what, value))

    def _set_overvoltage(self, value: float) -> None:
        self.overvoltage = value
        self.circuit.change(lambda: setattr(self.circuit.supply, "overvoltage_V", value))

    def _set_overcurrent(self, value: float) -> None:
        self.overcurrent = value
        self._arm_overcurrent(self.overcurrent_on)

    def _arm_overcurrent(self, on: bool) -> None:
        self.overcurrent_on = on
        level_A = self.overcurrent if on else float("inf")
        self.circuit.change(lambda: setattr(self.circuit.supply, "overcurrent_A", level_A))

    @property
    def tripped(self) -> set[str]:
        self.circuit.catch_up()
        return self.circuit.supply.tripped

    def _clear_trips(self) -> None:
        """The output stays off after the latch is cleared, until it is switched on again."""
        if self.tripped:
            self.output = False
            self.circuit.change(self._unlatch)

    def _unlatch(self) -> None:
        self.circuit.supply.on = False
        self.circuit.supply.tripped.clear()

    def _output_is_on(self) -> str:
        return str(int(self.output and not self.tripped))

    def _tripped_by(self, cause: str) -> str:
        return str(int(cause in self.tripped))

    def _measured_voltage(self) -> str:
        now_s = self.circuit.now_s
        return nr3(self._voltmeter.read(self.circuit.value(NODE, now_s), now_s))

    def _measured_current(self) -> str:
        now_s = self.circuit.now_s
        return nr3(self._ammeter.read(self.circuit.value(SUPPLY_CURRENT, now_s), now_s))


_SOURCE = (
    setting(
        "[SOURce:]VOLTage[:LEVel][:IMMediate][:AMPLitude]", "output voltage", VOLTAGE, "voltage", Supply._set_voltage
    ),
    setting(
        "[SOURce:]CURRent[:LEVel][:IMMediate][:AMPLitude]", "current limit", CURRENT, "current", Supply._set_current
    ),
    setting(
        "[SOURce:]VOLTage:PROTection[:LEVel]",
        "over-voltage level",
        OVERVOLTAGE,
        "overvoltage",
        Supply._set_overvoltage,
    ),
    Command(
        "[SOURce:]VOLTage:PROTection:TRIPped",
        "whether the over-voltage protection has tripped",
        ask=lambda self: self._tripped_by("voltage"),
    ),
    setting(
        "[SOURce:]CURRent:PROTection[:LEVel]",
        "over-current level",
        OVERCURRENT,
        "overcurrent",
        Supply._set_overcurrent,
    ),
    Command(
        "[SOURce:]CURRent:PROTection:STATe",
        "whether the over-current protection is armed",
        do=Supply._arm_overcurrent,
        takes=(Boolean(),),
        ask=lambda self: str(int(self.overcurrent_on)),
    ),
    Command(
        "[SOURce:]CURRent:PROTection:TRIPped",
        "whether the over-current protection has tripped",
        ask=lambda self: self._tripped_by("current"),
    ),
    Command("OUTPut[:STATe]", "output on or off", do=Supply._switch, takes=(Boolean(),), ask=Supply._output_is_on),
    Command("OUTPut:PROTection:CLEar", "clear what has tripped; the output stays off", do=Supply._clear_trips),
    Command("MEASure[:SCALar]:VOLTage[:DC]", "voltage at the output", ask=Supply._measured_voltage),
    Command("MEASure[:SCALar]:CURRent[:DC]", "current out of the output", ask=Supply._measured_current),
)
Supply.tree = Tree((*COMMON, *_SOURCE))
