"""The channels of a record: one name, one unit and one meaning for each quantity that is kept over time."""

from dataclasses import dataclass
from enum import IntFlag
from typing import Literal

Kind = Literal["measured", "setting", "computed"]


class SampleFlag(IntFlag):
    """What is known against one sample; the values are stored in records, so none of them ever changes."""

    GOOD = 0
    STALE = 1
    OVERLOAD = 2
    SUSPECT = 4


@dataclass(frozen=True)
class Channel:
    """One quantity over time.

    unit: SI symbol, or "1" for ratios, states and codes. kind: read from an instrument, told to one, or worked out.
    """

    name: str
    unit: str
    kind: Kind


CHANNELS: tuple[Channel, ...] = (
    Channel("node.voltage", "V", "measured"),
    Channel("charger.voltage", "V", "measured"),  # at the charger's own contacts, Kelvin
    Channel("charger.current", "A", "measured"),  # positive into the pack
    Channel("supply.voltage", "V", "measured"),
    Channel("supply.current", "A", "measured"),
    Channel("supply.mode", "1", "measured"),  # 0 off, 1 constant voltage, 2 constant current, 3 unregulated
    Channel("load.voltage", "V", "measured"),
    Channel("load.current", "A", "measured"),
    Channel("load.mode", "1", "measured"),  # 0 off, 1 on, 2 tripped
    Channel("set.supply.voltage", "V", "setting"),
    Channel("set.load.current", "A", "setting"),
    Channel("set.mains", "1", "setting"),
    Channel("mains.state", "1", "measured"),  # as the mains switch reads back: 1 closed, 0 open
    Channel("pack.ocv", "V", "computed"),
    Channel("pack.soc", "1", "computed"),
    Channel("pack.compression", "1", "computed"),  # how many times faster than real capacity the state of charge moves
    Channel("loop.period", "s", "computed"),
    Channel("node.condition", "1", "computed"),  # 1 while the supply holds the node: constant voltage, and sourcing
)
