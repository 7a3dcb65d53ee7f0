"""Before energy: what the outputs really do now, driven down in order, and nothing foreign on the node."""

from __future__ import annotations

from drivers.open_bench import OpenBench
from drivers.roles import LoadMode, SupplyMode
from drivers.safe import SafeState, to_safe_state
from drivers.text.si import si
from drivers.trouble import InstrumentFault

FOREIGN_V = 0.5


def drive_down(bench: OpenBench) -> SafeState | None:
    """If anything is on, walk the safe-state order before any reset; None where nothing was on.

    A reset of the load first would let go of a live charger.
    """
    mains_on = bench.mains.read(bench.hands.ask(bench.mains.reading("state")))
    supply = bench.supply.read(bench.hands.ask(bench.supply.reading("state")))
    load = bench.load.read(bench.hands.ask(bench.load.reading("state")))
    if not mains_on and supply.mode == SupplyMode.OFF and load.mode == LoadMode.OFF:
        return None
    return to_safe_state(bench)


def refuse_foreign_voltage(bench: OpenBench) -> None:
    """Raise InstrumentFault where the node carries a voltage with every output off: a real pack, perhaps."""
    for meter, what in ((bench.node_meter, "the node"), (bench.charger_meter, "the charger's contacts")):
        volts = meter.read(bench.hands.ask(meter.reading("volts")))
        if not abs(volts) <= FOREIGN_V:
            told = f"{what} carry {si(volts, 'V')}" if what.endswith("s") else f"{what} carries {si(volts, 'V')}"
            raise InstrumentFault(
                meter.name, f"{told} with every output off: is a real pack or another source connected?"
            )
