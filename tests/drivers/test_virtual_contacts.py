"""The virtual relay card: bounce to the microsecond, resistance from closing to closing, a contact that welds."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import pytest

from drivers.virtual.contacts import BOUNCES, OPERATE_s, POWER_WALK_ohm, RELEASE_s
from drivers.virtual.terminals import OPEN
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
MICRO_s = 1e-6


def ohm(world: World, name: str) -> float:
    world.circuit.catch_up()
    return world.circuit.terminals.contacts[name]


def test_lists_spans_and_states(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    assert ask(world, "relays", "ROUT:CLOS (@4,11:13);:ROUT:CLOS? (@4,5,11:14)") == "1,0,1,1,1,0"
    assert ask(world, "relays", "ROUT:OPEN (@12);:ROUT:OPEN? (@11:13)") == "0,1,0"
    assert ask(world, "relays", "ROUT:OPEN:ALL;:ROUT:CLOS? (@4,11,13)") == "0,0,0"


@pytest.mark.parametrize(
    ("message", "error"),
    [("ROUT:CLOS (@6)", -222), ("ROUT:CLOS 4", -104), ("ROUT:CLOS (@)", -171), ("ROUT:CLOS", -109)],
)
def test_it_refuses_as_a_citizen(breadth_world: Make, ask: Ask, message: str, error: int) -> None:
    assert ask(breadth_world(), "relays", f"{message};:SYST:ERR?").startswith(f"{error},")


def test_contact_bounces_for_two_milliseconds_at_exact_moments(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    assert BOUNCES[-1] == (0.002, True)
    ask(world, "relays", "ROUT:CLOS (@4)")
    world.advance(OPERATE_s - MICRO_s)
    assert ohm(world, "id") == OPEN
    before_s = OPERATE_s - MICRO_s
    for after_s, touches in BOUNCES:
        world.advance(OPERATE_s + after_s + MICRO_s - before_s)
        assert (ohm(world, "id") != OPEN) is touches
        before_s = OPERATE_s + after_s + MICRO_s
    world.advance(10.0)
    assert ohm(world, "id") < 0.02


def test_coil_that_lets_go_during_the_bounce_leaves_the_contact_open(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    ask(world, "relays", "ROUT:CLOS (@4)")
    world.advance(OPERATE_s + 0.0001)
    ask(world, "relays", "ROUT:OPEN (@4)")
    world.advance(RELEASE_s)
    assert ohm(world, "id") == OPEN
    world.advance(1.0)
    assert ohm(world, "id") == OPEN


def closings(world: World, ask: Ask, channel: int, name: str, count: int = 60) -> list[float]:
    found = []
    for _ in range(count):
        ask(world, "relays", f"ROUT:CLOS (@{channel})")
        world.advance(0.1)
        found.append(ohm(world, name))
        ask(world, "relays", f"ROUT:OPEN (@{channel})")
        world.advance(0.1)
    return found


def test_resistance_walks_between_closings_within_its_width(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world(contact_walk_ohm=0.02)
    signal, power = closings(world, ask, 4, "id"), closings(world, ask, 1, "b_plus")
    assert all(0.0 <= value <= 0.02 for value in signal)
    assert all(0.0 <= value <= POWER_WALK_ohm for value in power)
    assert max(signal) - min(signal) > 0.01
    steps = [abs(b - a) for a, b in pairwise(signal)]
    assert 0 < sorted(steps)[30] < 0.01  # a walk: the usual step is smaller than the width


def test_ideal_bench_has_ideal_contacts(breadth_world: Make, ask: Ask) -> None:
    assert set(closings(breadth_world(errors=0.0), ask, 4, "id", 5)) == {0.0}


def test_closing_again_what_is_closed_changes_nothing(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    ask(world, "relays", "ROUT:CLOS (@4)")
    world.advance(0.1)
    first = ohm(world, "id")
    ask(world, "relays", "ROUT:CLOS (@4)")
    world.advance(0.1)
    assert ohm(world, "id") == first


def test_welded_contact_stays_after_its_first_closing_and_its_coil_says_otherwise(
    breadth_world: Make, ask: Ask
) -> None:
    world = breadth_world(welded=("relays", 5))
    assert ohm(world, "thermistor") == OPEN
    ask(world, "relays", "ROUT:CLOS (@5)")
    world.advance(0.1)
    ask(world, "relays", "ROUT:OPEN (@5)")
    world.advance(1.0)
    assert ask(world, "relays", "ROUT:CLOS? (@5)") == "0"
    assert ohm(world, "thermistor") < 0.02
    ask(world, "relays", "*RST")
    world.advance(1.0)
    assert ohm(world, "thermistor") < 0.02
