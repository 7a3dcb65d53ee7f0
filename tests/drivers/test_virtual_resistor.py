"""The virtual programmable resistor: what it says, how wrong it is, and what it does while it switches."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers.dialect import Dialect
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults
from drivers.virtual import resistor
from drivers.virtual.terminals import OPEN
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
DIALECTS = Path(resistor.__file__).parents[1] / "dialects"


def standing(world: World) -> float:
    world.circuit.catch_up()
    return world.circuit.terminals.signals["id"].resistor_ohm


def test_it_is_open_at_first_and_answers_what_was_set(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    assert standing(world) == OPEN
    assert ask(world, "decade_id", "OUTP:MODE?") == "OPEN"
    assert float(ask(world, "decade_id", "OUTPut:MODE RESistance;:SOUR:RES:LEV 4.7 KOHM;:RES?")) == 4700.0
    assert ask(world, "decade_id", "OUTP:MODE SHORT;MODE?") == "SHOR"


@pytest.mark.parametrize(
    ("message", "error"),
    [("RES 2E6", -222), ("RES -1", -222), ("RES 1 V", -131), ("OUTP:MODE HALF", -224), ("RES", -109), ("RAS 1", -113)],
)
def test_it_refuses_as_a_citizen(breadth_world: Make, ask: Ask, message: str, error: int) -> None:
    assert ask(breadth_world(), "decade_id", f"{message};:SYST:ERR?").startswith(f"{error},")


def test_mega_before_ohm_is_mega(breadth_world: Make, ask: Ask) -> None:
    """IEEE 488.2, 7.7.3.4: M is milli, but before OHM (and HZ) it is mega."""
    assert float(ask(breadth_world(), "decade_id", "RES 0.5 MOHM;:RES?")) == 5e5


def test_it_is_open_exactly_while_it_switches(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world(errors=0.0, glitch_s=0.02)
    ask(world, "decade_id", "OUTP:MODE RES;:RES 1000")
    assert standing(world) == OPEN
    world.advance(0.019_999)
    assert standing(world) == OPEN
    world.advance(0.000_001)
    assert standing(world) == 1000.0
    ask(world, "decade_id", "RES 1000")  # nothing moves
    assert standing(world) == 1000.0
    ask(world, "decade_id", "RES 1100")
    world.advance(0.01)
    ask(world, "decade_id", "RES 1200")  # anew before the relays came to rest
    world.advance(0.015)
    assert standing(world) == OPEN
    world.advance(0.005)
    assert standing(world) == 1200.0
    ask(world, "decade_id", "OUTP:MODE OPEN")
    world.advance(1.0)
    assert standing(world) == OPEN


def test_individuals_lie_within_what_the_dialect_states_and_differ(breadth_world: Make, ask: Ask) -> None:
    faults = Faults()
    bound = bind(Dialect, read(DIALECTS / "scpi-resistor.yaml"), "dialect", faults)
    faults.raise_if_any()
    assert bound is not None
    (span,) = bound.model.accuracy.resistance
    assert (span.set, span.residual) == pytest.approx((resistor.SET_SHARE, resistor.RESIDUAL_ohm))
    assert bound.model.settable["resistance"] == resistor.RESISTANCE.high
    found = []
    for seed in range(30):
        world = breadth_world(seed=seed)
        ask(world, "decade_id", "OUTP:MODE RES;:RES 10000")
        world.advance(0.1)
        found.append(standing(world))
    assert all(abs(ohm - 10e3) <= span.set * 10e3 + span.residual for ohm in found)
    assert max(found) - min(found) > 0.5 * span.set * 10e3


def test_short_is_the_residual_and_reset_opens(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    ask(world, "decade_id", "OUTP:MODE SHOR")
    world.advance(0.1)
    assert 0.0 <= standing(world) <= resistor.RESIDUAL_ohm
    ask(world, "decade_id", "*RST")
    assert standing(world) == OPEN
