"""The virtual electronic load: constant current, 30 A / 80 V / 600 W, protections that latch the input off."""

from __future__ import annotations

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Imperfect, Span
from drivers.virtual.instrument import COMMON, Instrument, nr3, setting
from drivers.virtual.parameters import Boolean, Choice, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.status import ScpiError
from drivers.virtual.trace import LOAD_CURRENT, NODE

CURRENT = Number(0.0, 30.0, "A", default=0.0)
OVERCURRENT = Number(0.0, 33.0, "A", default=33.0)
MOST_V, MOST_W = 84.0, 600.0
VOLTAGE_SPAN = Span(80.0, 0.0005, 0.0002, 0.001)
CURRENT_SPAN = Span(30.0, 0.001, 0.0005, 0.001)
TRIP_BITS = {"voltage": 1, "current": 2, "power": 8}  # QUEStionable: VOLTage, CURRent, POWer


class Load(Instrument):
    family = "load"

    def __init__(self, name: str, circuit: Circuit, seed: int, scale: float) -> None:
        super().__init__(name, circuit)
        self._voltmeter = Imperfect((VOLTAGE_SPAN,), seed, name, "voltage", scale)
        self._ammeter = Imperfect((CURRENT_SPAN,), seed, name, "current", scale)
        self._dac = Imperfect((CURRENT_SPAN,), seed, name, "set current", scale)
        circuit.load.overvoltage_V, circuit.load.overpower_W = MOST_V, MOST_W
        self.reset()

    def reset(self) -> None:
        self.current, self.overcurrent, self.input = 0.0, 33.0, False
        self._act(on=False, current_A=0.0, overcurrent_A=33.0, tripped=set())

    def conditions(self) -> tuple[int, int]:
        return 0, sum(TRIP_BITS[cause] for cause in self.tripped)

    @property
    def tripped(self) -> set[str]:
        self.circuit.catch_up()
        return self.circuit.load.tripped

    def _act(self, **settings: object) -> None:
        def apply() -> None:
            for what, value in settings.items():
                setattr(self.circuit.load, what, value)

        self.circuit.change(apply)

    def _choose(self, function: str) -> None:
        """Constant current is the only function that this load has."""

    def _set_current(self, value: float) -> None:
        self.current = value
        self._act(current_A=max(self._dac.programmed(value), 0.0))

    def _set_overcurrent(self, value: float) -> None:
        self.overcurrent = value
        self._act(overcurrent_A=value)

    def _switch(self, on: bool) -> None:
        if on and self.tripped:
            raise ScpiError(-221)
        self.input = on
        self._act(on=on)

    def _clear_trips(self) -> None:
        """The input stays off after the latch is cleared, until it is switched on again."""
        if self.tripped:
            self.input = False
            self.circuit.change(self._unlatch)

    def _unlatch(self) -> None:
        self.circuit.load.on = False
        self.circuit.load.tripped.clear()

    def _input_is_on(self) -> str:
        return str(int(self.input and not self.tripped))

    def _measured_voltage(self) -> str:
        now_s = self.circuit.now_s
        return nr3(self._voltmeter.read(self.circuit.value(NODE, now_s), now_s))

    def _measured_current(self) -> str:
        now_s = self.circuit.now_s
        return nr3(self._ammeter.read(self.circuit.value(LOAD_CURRENT, now_s), now_s))


Load.tree = Tree(
    (
        *COMMON,
        Command(
            "[SOURce:]FUNCtion[:MODE]",
            "what is held constant",
            do=Load._choose,
            takes=(Choice(("CURRent",)),),
            ask=lambda self: "CURR",
        ),
        setting("[SOURce:]CURRent[:LEVel][:IMMediate]", "current to draw", CURRENT, "current", Load._set_current),
        setting(
            "[SOURce:]CURRent:PROTection[:LEVel]",
            "over-current level",
            OVERCURRENT,
            "overcurrent",
            Load._set_overcurrent,
        ),
        Command("INPut[:STATe]", "input on or off", do=Load._switch, takes=(Boolean(),), ask=Load._input_is_on),
        Command("INPut:PROTection:CLEar", "clear what has tripped; the input stays off", do=Load._clear_trips),
        Command("MEASure[:SCALar]:VOLTage[:DC]", "voltage at the input", ask=Load._measured_voltage),
        Command("MEASure[:SCALar]:CURRent[:DC]", "current into the input", ask=Load._measured_current),
    )
)
