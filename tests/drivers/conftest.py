"""A virtual bench to play on, in numbers; made without files so that each test says what it changes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from drivers.virtual.charger_plan import ChargerPlan, IdBand, Pin, Stage, TapMonitor, Temperature, Window
from drivers.virtual.plan import Plan, TapShunt
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

SIGNAL_PLACES = (
    ("node.contacts.b_plus", "relays", 1),
    ("node.contacts.b_minus", "relays", 2),
    ("node.contacts.precharge", "relays", 3),
    ("id.resistor", "decade_id", 0),
    ("id.contact", "relays", 4),
    ("id.sense", "scanner", 111),
    ("thermistor.resistor", "decade_thermistor", 0),
    ("thermistor.contact", "relays", 5),
    ("thermistor.sense", "scanner", 112),
    *((f"taps.{tap}.supply", "cells", tap + 1) for tap in range(4)),
    *((f"taps.{tap}.meter", "scanner", tap + 101) for tap in range(4)),
    *((f"taps.{tap}.contact", "relays", tap + 11) for tap in range(4)),
    ("ambient.thermometer", "thermometer", 0),
)
PIN = Pin(pull_up_ohm=10e3, reference_V=3.3, filter_s=0.05)
READING = replace(
    CHARGER,
    id_pin=PIN,
    id_bands=(IdBand(820.0, 1220.0, 1.5), IdBand(2450.0, 3700.0, 3.0)),
    temperature=Temperature(PIN, Window(25040.0, 4847.0), Window(28700.0, 4101.0), Window(27000.0, 4350.0)),
    tap_monitor=TapMonitor(4.24, 0.5, 0.05, True, (1, 2, 3, 4, 5)),
    fault_latch="removal",
    clear_s=1.0,
)
BREADTH = replace(
    PLAN,
    places=(*PLACES, *((where, name) for where, name, _ in SIGNAL_PLACES)),
    channels=tuple((where, channel) for where, _, channel in SIGNAL_PLACES if channel),
    charger=READING,
    precharge_ohm=47.0,
    taps=(TapShunt(1.0, 0.001),) * 4,
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
def breadth_plan() -> MakePlan:
    """The same with all of the pack's contacts wired, and a charger that reads them."""

    def make(charger: dict[str, Any] | None = None, **changes: Any) -> Plan:
        return replace(BREADTH, charger=replace(READING, **(charger or {})), **changes)

    return make


@pytest.fixture(scope="session")
def breadth_world(breadth_plan: MakePlan) -> MakeWorld:
    def make(seed: int = 1, **changes: Any) -> World:
        return World(breadth_plan(**changes), seed)

    return make


@pytest.fixture(scope="session")
def insert(ask: Callable[[World, str, str], str]) -> Callable[..., None]:
    """Put a pack in, as a hand would: signals first, then B+ through its resistor; ends before the charger starts."""

    def inserting(world: World, id_ohm: float = 3000.0, thermistor_ohm: float = 10e3, cell_V: float = 3.7) -> None:
        said = [
            ask(world, "decade_id", f"OUTP:MODE RES;:RES {id_ohm};:SYST:ERR?"),
            ask(world, "decade_thermistor", f"OUTP:MODE RES;:RES {thermistor_ohm};:SYST:ERR?"),
            ask(world, "cells", f"VOLT {cell_V},(@1:4);:OUTP ON,(@1:4);:SYST:ERR?"),
            ask(world, "node_supply", f"VOLT {5 * cell_V};:CURR 10;:OUTP ON;:SYST:ERR?"),
            ask(world, "node_load", "FUNC CURR;:CURR 4.5;:INP ON;:SYST:ERR?"),
            ask(world, "mains", "ROUT:CLOS (@1);:SYST:ERR?"),
        ]
        world.advance(0.5)
        said.append(ask(world, "relays", "ROUT:CLOS (@2,4,5,11:14);:SYST:ERR?"))
        world.advance(0.2)
        said.append(ask(world, "relays", "ROUT:CLOS (@3);:SYST:ERR?"))
        world.advance(0.3)
        said.append(ask(world, "relays", "ROUT:CLOS (@1);:ROUT:OPEN (@3);:SYST:ERR?"))
        assert set(said) == {'0,"No error"'}

    return inserting


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
