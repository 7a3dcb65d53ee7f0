"""The bench as a whole: its time, its seed, its plan."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers import virtual
from drivers.bench import Bench
from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.virtual.charger_file import load_charger
from drivers.virtual.plan import Plan, dumps, plan_of
from drivers.virtual.world import World

Make = Callable[..., World]
Ask = Callable[[World, str, str], str]

BENCH = """packmime: bench 1
name: virtual
line_frequency: 60 Hz
instruments:
  s: {address: virtual, dialect: scpi-supply}
  l: {address: virtual, dialect: scpi-load}
  v: {address: virtual, dialect: scpi-meter}
  c: {address: virtual, dialect: scpi-meter}
  i: {address: virtual, dialect: scpi-meter}
  m: {address: virtual, dialect: scpi-mains-switch}
wiring:
  node: {supply: s, load: l, voltage: v, charger_voltage: c, current: {shunt: 10 mΩ ± 0.5 %, meter: i}, ballast: 100 mΩ}
  mains: {switch: m}
limits: {node: 26 V, current: 12 A, charge: 5 Ah}
virtual: {leads: 8 mΩ, node: {delay: 200 ms, settling: 150 ms}, meter_delay: 30 ms, shunt_factor: 1.1, errors: 0.5}
"""


def bench() -> Bench:
    faults = Faults()
    bound = bind(Bench, compose(BENCH.encode(), "bench.yaml"), "bench", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def plan() -> Plan:
    charger = load_charger("sprayer-power", Faults())
    assert charger is not None
    return plan_of(bench(), charger.model)


def test_plan_holds_what_the_files_say() -> None:
    found = plan()
    assert (found.line_Hz, found.shunt_ohm, found.shunt_factor, found.errors) == (60.0, 0.01, 1.1, 0.5)
    assert found.shunt_tolerance == pytest.approx(0.005)
    assert (found.delay_s, found.settling_s, found.meter_delay_s) == (0.2, 0.15, 0.03)
    assert dict(found.places)["node.current.meter"] == "i"


def test_plan_survives_json() -> None:
    assert Plan.from_json(json.loads(dumps(plan().to_json()))) == plan()


def test_world_is_built_from_bench_and_charger(ask: Ask) -> None:
    charger = load_charger("lantern-power", Faults())
    assert charger is not None
    world = World.build(bench(), charger.model, 3)
    assert list(world.instruments) == ["s", "l", "v", "c", "i", "m"]
    assert ask(world, "v", "*IDN?").startswith("packmime,virtual meter,")
    assert len(world.charger.plan.stages) == 2


def test_bench_without_virtual_section_cannot_be_played(virtual_plan: Callable[..., Plan]) -> None:
    charger = load_charger("sprayer-power", Faults())
    assert charger is not None
    real = bench().model_copy(update={"virtual": None})
    with pytest.raises(ValueError, match="no 'virtual' section"):
        plan_of(real, charger.model)


# -- time -------------------------------------------------------------------------------------------------------


def test_ten_tenths_are_one_second(virtual_world: Make) -> None:
    world = virtual_world()
    for _ in range(36_000):
        world.advance(0.1)
    assert world.now == 3600.0


@pytest.mark.parametrize("dt_s", [-0.1, float("nan"), float("inf")])
def test_time_does_not_go_back(virtual_world: Make, dt_s: float) -> None:
    with pytest.raises(ValueError, match="0 or more"):
        virtual_world().advance(dt_s)


@given(st.lists(st.integers(1, 3_000_000_000), min_size=1, max_size=6))
def test_advances_add_up(virtual_world: Make, ask: Ask, steps_ns: list[int]) -> None:
    """advance(a) then advance(b) is advance(a + b), to the last digit of every reading."""
    answers = []
    for steps in (steps_ns, [sum(steps_ns)]):
        world = virtual_world()
        ask(world, "node_supply", "VOLT 20.9;:CURR 10;:OUTP ON")
        ask(world, "node_load", "CURR 4;:INP ON")
        ask(world, "mains", "ROUT:CLOS (@1)")
        for step in steps:
            world.advance(step / 1e9)
        answers.append([ask(world, name, "READ?") for name in ("meter_node", "meter_charger", "meter_shunt")])
        answers[-1].append(repr(world.now))
    assert answers[0] == answers[1]


def test_stopwatch_measures_the_circuit(virtual_plan: Callable[..., Plan]) -> None:
    ticks = iter(range(100))
    world = World(virtual_plan(), 1, lambda: float(next(ticks)))
    world.advance(1.0)
    world.advance(1.0)
    assert world.busy_s == 2.0


# -- seed -------------------------------------------------------------------------------------------------------

READINGS = {
    "node_supply": "MEAS:VOLT?;:MEAS:CURR?;:OUTP?;:STAT:OPER:COND?",
    "node_load": "MEAS:VOLT?;:MEAS:CURR?;:INP?;:STAT:QUES:COND?",
    "meter_node": "READ?",
    "meter_charger": "READ?",
    "meter_shunt": "READ?",
}


def scanned(make: Make, ask: Ask, seed: int, turn: int) -> list[dict[str, str]]:
    world = make(seed=seed)
    ask(world, "node_supply", "VOLT 20.5;:CURR 10;:OUTP ON")
    ask(world, "node_load", "CURR 4;:INP ON")
    ask(world, "mains", "ROUT:CLOS (@1)")
    scans = []
    for _ in range(50):
        world.advance(0.1)
        names = [*list(READINGS)[turn:], *list(READINGS)[:turn]][:: -1 if turn % 2 else 1]
        scans.append({name: ask(world, name, READINGS[name]) for name in names})
    return scans


def test_order_of_the_exchanges_of_a_scan_does_not_matter(virtual_world: Make, ask: Ask) -> None:
    straight = scanned(virtual_world, ask, 5, 0)
    assert scanned(virtual_world, ask, 5, 1) == straight
    assert scanned(virtual_world, ask, 5, 2) == straight


def test_another_seed_is_another_bench(virtual_world: Make, ask: Ask) -> None:
    one, other = (scanned(virtual_world, ask, seed, 0) for seed in (5, 6))
    assert all(a["meter_node"] != b["meter_node"] for a, b in zip(one, other, strict=True))


def test_shunt_is_drawn_within_its_tolerance(virtual_world: Make) -> None:
    ohms = [virtual_world(seed=seed).circuit.constants.shunt_ohm for seed in range(50)]
    assert all(abs(ohm / 0.01 - 1) <= 0.001 for ohm in ohms)
    assert max(ohms) - min(ohms) > 0.01 * 0.001
    assert virtual_world(errors=0.0, shunt_factor=1.2).circuit.constants.shunt_ohm == pytest.approx(0.012)


def test_meter_noise_differs_between_meters_of_one_bench(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    assert ask(world, "meter_node", "READ?") != ask(world, "meter_charger", "READ?")


def test_nothing_here_reads_the_wall_clock() -> None:
    sources = sorted(Path(virtual.__file__).parent.glob("*.py"))
    assert len(sources) > 5
    for source in sources:
        assert "import time" not in source.read_text("utf-8"), source.name
