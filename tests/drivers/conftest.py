"""A virtual bench to play on, in numbers; made without files so that each test says what it changes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from drivers.virtual.charger_plan import ChargerPlan, Stage
from drivers.virtual.plan import Plan
from drivers.virtual.world import World

PLACES = (
    ("node.supply", "node_supply"),
    ("node.load", "node_load"),
    ("node.voltage", "meter_node"),
    ("node.charger_voltage", "meter_charger"),
    ("node.current.meter", "meter_shunt"),
    ("mains.switch", "mains"),
)
CHARGER = ChargerPlan(
    name="greenhouse sprayer charger",
    cells=5,
    stages=(Stage(3.0),),
    limit_V=21.0,
    cutoff_A=0.3,
    ends=True,
    start_delay_s=1.5,
    response_s=1.0,
    source_ohm=0.0,
    works=True,
)
PLAN = Plan(
    places=PLACES,
    charger=CHARGER,
    line_Hz=50.0,
    shunt_ohm=0.01,
    shunt_tolerance=0.001,
    shunt_factor=1.0,
    ballast_ohm=0.1,
    leads_ohm=0.01,
    delay_s=0.005,
    settling_s=0.01,
    meter_delay_s=0.0,
    supply_most_A=None,
    errors=1.0,
    node_offset_V=0.0,
)

MakePlan = Callable[..., Plan]
MakeWorld = Callable[..., World]


@pytest.fixture(scope="session")
def virtual_plan() -> MakePlan:
    """A plan with some numbers changed: of the bench by name, of the charger in `charger={...}`."""

    def make(charger: dict[str, Any] | None = None, **changes: Any) -> Plan:
        return replace(PLAN, charger=replace(CHARGER, **(charger or {})), **changes)

    return make


@pytest.fixture(scope="session")
def virtual_world(virtual_plan: MakePlan) -> MakeWorld:
    def make(seed: int = 1, **changes: Any) -> World:
        return World(virtual_plan(**changes), seed)

    return make


@pytest.fixture(scope="session")
def ask() -> Callable[[World, str, str], str]:
    """Say one message to an instrument of a world over its raw socket, and return what it answers."""

    def say(world: World, name: str, message: str) -> str:
        return world.instruments[name].stream(message.encode("latin-1") + b"\n").decode("latin-1").rstrip("\n")

    return say
