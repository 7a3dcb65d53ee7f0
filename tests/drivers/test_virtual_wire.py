"""The whole bench with all of the pack's contacts: its wiring, its seed, its time, real sockets, a foreign client."""

from __future__ import annotations

import json
import shutil
import subprocess
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
import pyvisa
from hypothesis import given, settings
from hypothesis import strategies as st
from pyvisa.resources import MessageBasedResource

import procedures
from drivers.bench import Bench
from drivers.bench_file import load_bench
from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import BadInput, Faults
from drivers.virtual.charger_file import load_charger
from drivers.virtual.library import BenchLibrary
from drivers.virtual.plan import Plan, dumps, plan_of
from drivers.virtual.remote import VirtualServer
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
MakePlan = Callable[..., Plan]
BENCHES = Path(procedures.__file__).parent / "benches"
QUESTIONS = {
    "node_supply": "MEAS:VOLT?;:MEAS:CURR?;:OUTP?;:STAT:OPER:COND?",
    "node_load": "MEAS:VOLT?;:MEAS:CURR?;:INP?",
    "meter_node": "READ?",
    "meter_charger": "READ?",
    "meter_shunt": "READ?",
    "cells": "MEAS:VOLT? (@1:4)",
    "scanner": "MEAS:VOLT:DC? (@101:104,111,112)",
    "relays": "ROUT:CLOS? (@1:5)",
    "decade_id": "RES?",
    "decade_thermistor": "OUTP:MODE?",
    "thermometer": "MEAS:TEMP?",
}
INSERTION = (
    ("decade_id", "OUTP:MODE RES;:RES 3000"),
    ("decade_thermistor", "OUTP:MODE RES;:RES 10000"),
    ("cells", "VOLT 3.7,(@1:4);:OUTP ON,(@1:4)"),
    ("node_supply", "VOLT 18.5;:CURR 10;:OUTP ON"),
    ("node_load", "CURR 4.5;:INP ON"),
    ("mains", "ROUT:CLOS (@1)"),
    ("relays", "ROUT:CLOS (@2,4,5,11:14)"),
    ("relays", "ROUT:CLOS (@3)"),
    ("relays", "ROUT:CLOS (@1);:ROUT:OPEN (@3)"),
    ("decade_thermistor", "RES 20000"),
    ("cells", "VOLT 4.1,(@2)"),
)


def shipped_plan(bench: str, charger: str = "sprayer") -> Plan:
    faults = Faults()
    file, found = load_bench(BENCHES / f"{bench}.yaml", faults), load_charger(charger, faults)
    faults.raise_if_any()
    assert file is not None
    assert found is not None
    return plan_of(file.bench, found.model)


# -- wiring -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("bench", sorted(path.stem for path in BENCHES.glob("virtual*.yaml")))
@pytest.mark.parametrize("charger", ["sprayer", "lantern", "bellows"])
def test_every_shipped_bench_plays_every_charger_and_survives_json(bench: str, charger: str) -> None:
    plan = shipped_plan(bench, charger)
    assert Plan.from_json(json.loads(dumps(plan.to_json()))) == plan
    world = World(plan, 1)
    assert list(world.instruments) == list(dict.fromkeys(name for _, name in plan.places))
    world.advance(1.0)


def test_full_bench_has_what_its_file_says() -> None:
    plan = shipped_plan("virtual")
    assert dict(plan.channels)["id.sense"] == 111
    assert dict(plan.channels)["taps.3.contact"] == 14
    assert (plan.precharge_ohm, [tap.ohm for tap in plan.taps], plan.plain) == (47.0, [1.0] * 4, ())
    assert plan.taps[0].tolerance == pytest.approx(0.001)
    assert set(shipped_plan("virtual-plain").plain) == {"node_supply", "node_load", "cells"}


def test_charger_of_fewer_cells_leaves_the_upper_taps_alone(ask: Ask) -> None:
    world = World(replace(shipped_plan("virtual", "lantern"), errors=0.0), 1)
    ask(world, "cells", "VOLT 3.7,(@1:4);:OUTP ON,(@1:4)")
    ask(world, "mains", "ROUT:CLOS (@1)")
    ask(world, "relays", "ROUT:CLOS (@2,11:14)")
    world.advance(0.1)
    found = [float(part) for part in ask(world, "scanner", "MEAS:VOLT:DC? (@101:104)").split(",")]
    assert found == pytest.approx([20e-6, 20e-6, 0.0, 0.0], rel=1e-3)


def test_channel_that_is_no_number_is_a_fault_of_the_bench_file() -> None:
    text = (BENCHES / "virtual.yaml").read_text("utf-8").replace("precharge: relays.3", "precharge: relays.K3")
    faults = Faults()
    bound, charger = bind(Bench, compose(text.encode(), "b.yaml"), "bench", faults), load_charger("sprayer", faults)
    assert bound is not None
    assert charger is not None
    with pytest.raises(BadInput, match=r"'relays\.K3': the channels of a virtual instrument are numbers"):
        plan_of(bound.model, charger.model)


# -- time and seed ------------------------------------------------------------------------------------------------


def played(world: World, ask: Ask, pieces: int = 1, turned: bool = False) -> list[str]:
    """An insertion, step by step; everything read after each."""
    said = []
    for name, message in INSERTION:
        ask(world, name, message)
        for _ in range(pieces):
            world.advance(0.6 / pieces)
        names = list(QUESTIONS)[::-1] if turned else list(QUESTIONS)
        answers = {name: ask(world, name, QUESTIONS[name]) for name in names}
        said += [answers[name] for name in QUESTIONS]
    return said


def test_same_seed_same_bytes_whatever_the_order_of_questions(breadth_world: Make, ask: Ask) -> None:
    first = played(breadth_world(seed=7), ask)
    assert played(breadth_world(seed=7), ask) == first
    assert played(breadth_world(seed=7), ask, turned=True) == first
    assert played(breadth_world(seed=8), ask) != first


@settings(max_examples=15)
@given(st.integers(2, 40))
def test_advances_add_up(breadth_world: Make, ask: Ask, pieces: int) -> None:
    """0.6 s in one piece or in many; whole nanoseconds only, so that both end at the same moment."""
    exact = [count for count in range(2, pieces + 1) if 600_000_000 % count == 0][-1]
    assert played(breadth_world(seed=3), ask, exact) == played(breadth_world(seed=3), ask)


def charged(manager: pyvisa.ResourceManager, addresses: dict[str, str], advance: Callable[[float], float]) -> list[str]:
    links: dict[str, MessageBasedResource] = {}
    for name, address in addresses.items():
        link = manager.open_resource(address, resource_pyclass=MessageBasedResource)
        assert isinstance(link, MessageBasedResource)
        link.read_termination = link.write_termination = "\n"
        link.timeout = 10_000
        links[name] = link
    said = []
    for name, message in INSERTION:
        said.append(links[name].query(f"{message};:SYST:ERR?"))
        said.append(repr(advance(0.6)))
        said += [links[who].query(question) for who, question in QUESTIONS.items()]
    for link in links.values():
        link.close()
    return said


def test_same_seed_same_bytes_in_process_and_over_tcp(breadth_plan: MakePlan) -> None:
    library = BenchLibrary.around(World(breadth_plan(), 5))
    inside = charged(pyvisa.ResourceManager(library), library.addresses, library.world.advance)
    with VirtualServer.launch(breadth_plan(), 5) as server:
        outside = charged(pyvisa.ResourceManager("@py"), server.addresses, server.advance)
    assert outside == inside


# -- somebody else's client ---------------------------------------------------------------------------------------

LXI = shutil.which("lxi")


@pytest.mark.skipif(LXI is None, reason="lxi of Debian's lxi-tools is not installed")
def test_a_foreign_scpi_client_is_served(breadth_plan: MakePlan) -> None:
    """lxi-tools, raw TCP: one connection a command, as people use it by hand."""
    assert LXI is not None

    def lxi(port: int, message: str) -> str:
        command = [LXI, "scpi", "--address", "127.0.0.1", "--port", str(port), "--raw", "--timeout", "5", message]
        done = subprocess.run(command, capture_output=True, text=True, timeout=20, check=True)
        return done.stdout.strip()

    with VirtualServer.launch(breadth_plan(), 1, wall=True) as server:
        assert lxi(server.ports["relays"], "*IDN?").startswith("packmime,virtual contacts,V")
        assert lxi(server.ports["relays"], "ROUTe:CLOSe (@2,11:13)") == ""
        assert lxi(server.ports["relays"], "ROUT:CLOS? (@1,2,11:14)") == "0,1,1,1,1,0"
        assert lxi(server.ports["relays"], "ROUT:CLOS (@99)") == ""
        assert lxi(server.ports["relays"], "SYST:ERR?") == '-222,"Data out of range"'
        assert lxi(server.ports["decade_id"], "OUTP:MODE RES;:RES 4.7 KOHM;:RES?") == "+4.700000000E+03"
        assert len(lxi(server.ports["scanner"], "MEAS:VOLT:DC? (@101:104,111,112)").split(",")) == 6
        assert abs(float(lxi(server.ports["thermometer"], "MEAS:TEMP?")) - 23.0) < 2.0
