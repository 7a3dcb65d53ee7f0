"""The virtual mains switch: one relay in the charger's mains lead."""

from __future__ import annotations

from drivers.virtual.circuit import Circuit
from drivers.virtual.instrument import COMMON, Instrument
from drivers.virtual.parameters import Channels
from drivers.virtual.scpi import Command, Tree

CHANNEL = Channels((1,))


class MainsSwitch(Instrument):
    family = "mains switch"

    def __init__(self, name: str, circuit: Circuit) -> None:
        super().__init__(name, circuit)
        self.reset()

    def reset(self) -> None:
        self.circuit.set_mains(False)

    def _close(self, channels: tuple[int, ...]) -> None:
        self.circuit.set_mains(True)

    def _open(self, channels: tuple[int, ...]) -> None:
        self.circuit.set_mains(False)

    def _closed(self, channels: tuple[int, ...]) -> str:
        return ",".join(str(int(self.circuit.mains_on)) for _ in channels)

    def _opened(self, channels: tuple[int, ...]) -> str:
        return ",".join(str(int(not self.circuit.mains_on)) for _ in channels)


MainsSwitch.tree = Tree(
    (
        *COMMON,
        Command(
            "ROUTe:CLOSe",
            "close relays",
            do=MainsSwitch._close,
            takes=(CHANNEL,),
            ask=MainsSwitch._closed,
            asks=(CHANNEL,),
        ),
        Command(
            "ROUTe:OPEN",
            "open relays",
            do=MainsSwitch._open,
            takes=(CHANNEL,),
            ask=MainsSwitch._opened,
            asks=(CHANNEL,),
        ),
        Command("ROUTe:OPEN:ALL", "open every relay", do=MainsSwitch.reset),
    )
)
