"""What a virtual charger does with a discharged pack: its file, and what flows in the circuit."""

from __future__ import annotations

import itertools
import json
from collections.abc import Callable
from dataclasses import asdict, replace
from typing import Any

import pytest

from drivers.text.document import compose
from drivers.text.faults import BadInput, Faults
from drivers.virtual.charger_file import ChargerFile, read_charger
from drivers.virtual.charger_plan import ChargerPlan, LowStart, Precharge, Probe
from drivers.virtual.trace import SHUNT
from drivers.virtual.world import World

Make = Callable[..., World]
Insert = Callable[..., None]
GOOD = """packmime: charger 1
name: cold frame fan charger
cells: 4
algorithm: cc-cv
stages: [{current: 2.0 A}]
voltage_per_cell: 4.20 V
cutoff: 200 mA
low_start:
  refuse_below: 2.0 V
  probe: {current: 0.2 A, time: 300 ms, pause: 2 s, count: 3}
  precharge: {below: 3.0 V, current: 0.25 A, timeout: 30 min}
  cells: all
"""
LOW = LowStart(2.0, Probe(0.2, 0.3, 2.0, 3), Precharge(3.0, 0.25, 1800.0), (1, 2, 3, 4))


def model(text: str) -> ChargerFile:
    faults = Faults()
    bound = read_charger(compose(text.encode(), "c.yaml"), faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def test_numbers_of_the_plan_survive_json() -> None:
    plan = model(GOOD).plan()
    assert plan.low_start == LOW
    assert ChargerPlan.from_json(json.loads(json.dumps(asdict(plan)))) == plan
    bare = replace(plan, low_start=None)
    assert ChargerPlan.from_json(json.loads(json.dumps(asdict(bare)))) == bare


def test_what_is_left_out_is_not_done() -> None:
    assert model(GOOD.partition("low_start")[0]).plan().low_start is None
    low = model(GOOD.replace("  cells: all\n", "").replace(", timeout: 30 min", "")).plan().low_start
    assert low == LowStart(2.0, LOW.probe, Precharge(3.0, 0.25, None), ())


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("  refuse_below: 2.0 V\n", "", "'probe' belongs to 'refuse_below'"),
        ("below: 3.0 V", "below: 1.9 V", "must lie above 'refuse_below'"),
        ("count: 3", "count: 0", "from 1 to 100"),
        ("cells: all", "cells: [1, 5]", "looks at cell 5; the pack has 4"),
        ("cells: all", "cells: some", 'expected "all"'),
        ("pause: 2 s", "rest: 2 s", "unknown key 'rest'"),
    ],
)
def test_what_no_charger_file_may_say(old: str, new: str, said: str) -> None:
    assert old in GOOD
    with pytest.raises(BadInput, match=said):
        model(GOOD.replace(old, new))
    with pytest.raises(BadInput, match="needs 'refuse_below' or 'precharge'"):
        model(GOOD.partition("  refuse_below")[0] + "  cells: all\n")


# -- in the circuit: five cells, 3 A, start delay 1.5 s, response 1 s ----------------------------------------------


def amperes(world: World) -> float:
    return world.circuit.value(SHUNT, world.circuit.now_s) / world.circuit.constants.shunt_ohm


def inserted(make: Make, insert: Insert, cell_V: float, low: LowStart, **charger: Any) -> World:
    world = make(errors=0.0, charger={"low_start": low, **charger})
    insert(world, cell_V=cell_V)
    return world


def currents(world: World, lasts_s: float, step_s: float = 0.05) -> list[float]:
    found = []
    for _ in range(round(lasts_s / step_s)):
        world.advance(step_s)
        found.append(amperes(world))
    return found


@pytest.mark.parametrize(("cell_V", "settled_A"), [(1.9, 0.0), (2.1, 0.25), (2.99, 0.25), (3.01, 3.0), (3.7, 3.0)])
def test_the_pack_voltage_decides(breadth_world: Make, insert: Insert, cell_V: float, settled_A: float) -> None:
    world = inserted(breadth_world, insert, cell_V, replace(LOW, cells=()))
    world.advance(12.0)
    assert amperes(world) == pytest.approx(settled_A, abs=2e-3)


def test_probe_pulses_have_their_size_and_number(breadth_world: Make, insert: Insert) -> None:
    seen = currents(inserted(breadth_world, insert, 1.5, LOW), 15.0)
    on = [value for value in seen if value > 0.05]
    assert on == pytest.approx([0.2] * len(on), abs=2e-3)
    assert len(on) == pytest.approx(3 * 0.3 / 0.05, abs=3)
    assert sum(b > 0.05 >= a for a, b in itertools.pairwise(seen)) == 3


def test_a_precharge_goes_over_after_the_response_time(breadth_world: Make, insert: Insert, ask: Any) -> None:
    world = inserted(breadth_world, insert, 2.9, replace(LOW, cells=()))
    world.advance(4.0)
    assert amperes(world) == pytest.approx(0.25, abs=1e-3)
    ask(world, "node_supply", "VOLT 15.1;:SYST:ERR?")
    world.advance(0.9)
    assert amperes(world) == pytest.approx(0.25, abs=1e-3)
    world.advance(0.3)
    assert amperes(world) == pytest.approx(3.0, abs=5e-3)


def test_a_precharge_that_takes_too_long_is_given_up(breadth_world: Make, insert: Insert) -> None:
    low = replace(LOW, precharge=Precharge(3.0, 0.25, 20.0))
    world = inserted(breadth_world, insert, 2.5, low)
    world.advance(19.0)
    assert amperes(world) == pytest.approx(0.25, abs=1e-3)
    world.advance(3.0)
    assert amperes(world) == pytest.approx(0.0, abs=1e-3)
    assert world.circuit.charger.state == "fault"


@pytest.mark.parametrize("cell", [1, 2, 3, 4, 5])
@pytest.mark.parametrize(("cells", "settled_A"), [((1, 2, 3, 4, 5), 0.25), ((), 3.0)])
def test_one_weak_cell(
    breadth_world: Make, insert: Insert, ask: Any, cell: int, cells: tuple[int, ...], settled_A: float
) -> None:
    """One cell at 2.5 V, four at 3.7 V; the top cell is what is left to the contacts."""
    world = breadth_world(errors=0.0, charger={"low_start": replace(LOW, cells=cells)})
    insert(world, cell_V=(4 * 3.7 + 2.5) / 5)
    for number in range(1, 5):
        ask(world, "cells", f"VOLT {2.5 if number == cell else 3.7},(@{number});:SYST:ERR?")
    world.advance(6.0)
    assert amperes(world) == pytest.approx(settled_A, abs=3e-3)
