"""What goes wrong on a virtual bench by order, at a moment of its time, for a while or for good."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, get_args

from drivers.virtual.charger import Charger
from drivers.virtual.circuit import Circuit

if TYPE_CHECKING:
    from drivers.virtual.instrument import Instrument

Does = Literal["load-trips", "supply-limits", "mains-lost", "mains-open", "charger-starts", "mute", "overload"]
OF_AN_INSTRUMENT = ("mute", "overload")
FOR_GOOD = ("load-trips", "mains-open", "charger-starts")  # what was done cannot be taken back
LIMIT_A = 1.0  # what a supply still gives that limits its current by itself

assert set(OF_AN_INSTRUMENT + FOR_GOOD) <= set(get_args(Does))


@dataclass(frozen=True)
class Trouble:
    """`does` at `at_s` of the bench's time; undone `lasts_s` later, or never (None)."""

    at_s: float
    does: Does
    instrument: str | None = None
    lasts_s: float | None = None


def arrange(troubles: tuple[Trouble, ...], circuit: Circuit, instruments: dict[str, Instrument]) -> None:
    """Let each trouble happen at its moment; to be called before time passes."""
    for trouble in troubles:
        act, undo = _acts(trouble, circuit, instruments)
        circuit.later(trouble.at_s, act)
        if trouble.lasts_s is not None:
            circuit.later(trouble.at_s + trouble.lasts_s, undo)


def _acts(
    trouble: Trouble, circuit: Circuit, instruments: dict[str, Instrument]
) -> tuple[Callable[[], None], Callable[[], None]]:
    """What happens, and what takes it back."""
    if trouble.instrument is not None:
        part, what = instruments[trouble.instrument], {"mute": "mute", "overload": "overloaded"}[trouble.does]
        return lambda: setattr(part, what, True), lambda: setattr(part, what, False)
    match trouble.does:
        case "load-trips":
            return lambda: circuit.load.tripped.add("power"), lambda: None
        case "supply-limits":
            return lambda: circuit.limit_supply(LIMIT_A), lambda: circuit.limit_supply(circuit.constants.supply_most_A)
        case "mains-lost":
            return lambda: circuit.feed(False), lambda: circuit.feed(True)
        case "mains-open":
            return lambda: _open_mains(circuit), lambda: None
    return _starting(circuit.charger), lambda: None


def _open_mains(circuit: Circuit) -> None:
    circuit.mains_on = False
    circuit.charger.mains(False)


def _starting(charger: Charger) -> Callable[[], None]:
    return charger.start_by_itself
