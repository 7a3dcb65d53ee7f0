"""Troubles that a bench file orders, on the virtual bench: they come at their moment, and go again where they can."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path
from typing import Any, get_args

import pytest

import drivers
from drivers.bench import Trouble as Ordered
from drivers.bench_file import BenchFile, load_bench
from drivers.text.document import read
from drivers.text.faults import Faults
from drivers.virtual.charger_file import read_charger
from drivers.virtual.plan import Plan
from drivers.virtual.troubles import FOR_GOOD, OF_AN_INSTRUMENT, Does, Trouble
from drivers.virtual.world import World
from sequencer.engine.inputs import FOLDERS

DRIVERS = Path(drivers.__file__).parent
CHARGER = DRIVERS / "virtual" / "chargers" / "sprayer-power.yaml"


@pytest.fixture
def bench_with(tmp_path: Path) -> Callable[[str], tuple[BenchFile | None, Faults]]:
    """Loads the bench whose only contact are the mains, with troubles as they stand in the file."""

    def load(troubles: str) -> tuple[BenchFile | None, Faults]:
        text = (FOLDERS["bench"] / "virtual-mains-in-process.yaml").read_text("utf-8")
        path = tmp_path / "bench.yaml"
        path.write_text(f"{text}  troubles: [{troubles}]\n", "utf-8")
        faults = Faults()
        return load_bench(path, faults), faults

    return load


@pytest.fixture
def world_with(bench_with: Callable[..., Any]) -> Callable[[str], World]:
    def make(troubles: str) -> World:
        file, faults = bench_with(troubles)
        faults.raise_if_any()
        world = World.build(file.bench, read_charger(read(CHARGER), Faults()).model, 1)
        assert Plan.from_json(json.loads(json.dumps(world.plan.to_json()))) == world.plan
        return world

    return make


def test_file_and_plan_know_the_same_troubles() -> None:
    ordered = get_args(Ordered.model_fields["does"].annotation)
    assert set(ordered) == set(get_args(Does))
    assert set(asdict(Trouble(0.0, "mute"))) == {"at_s", "does", "instrument", "lasts_s"}


def asked(world: World, name: str, message: str) -> str:
    return world.instruments[name].stream(message.encode() + b"\n").decode().strip()


def test_a_mute_instrument_neither_hears_nor_answers_until_it_is_over(world_with: Callable[..., World]) -> None:
    world = world_with("{at: 1 s, does: mute, instrument: mains, lasts: 2 s}")
    assert asked(world, "mains", "*IDN?")
    world.advance(1.5)
    assert asked(world, "mains", "*IDN?") == asked(world, "mains", "ROUT:CLOS (@1)") == ""
    assert not world.circuit.mains_on
    world.advance(1.6)
    assert asked(world, "mains", "ROUT:CLOS? (@1)") == "0"


def test_a_meter_answers_overload(world_with: Callable[..., World]) -> None:
    """9.9E37: SCPI-1999, volume 1, 7.2.1.4."""
    world = world_with("{at: 1 s, does: overload, instrument: meter_node, lasts: 1 s}")
    world.advance(1.0)
    assert abs(float(asked(world, "meter_node", "READ?"))) == 9.9e37
    world.advance(1.1)
    assert abs(float(asked(world, "meter_node", "READ?"))) < 1.0


def test_mains_that_go_behind_their_switch_leave_it_closed(world_with: Callable[..., World]) -> None:
    world = world_with("{at: 1 s, does: mains-lost, lasts: 5 s}")
    asked(world, "mains", "ROUT:CLOS (@1)")
    assert world.charger.state == "waiting"
    world.advance(1.0)
    assert (world.charger.state, asked(world, "mains", "ROUT:CLOS? (@1)")) == ("off", "1")
    asked(world, "mains", "ROUT:OPEN (@1)")
    asked(world, "mains", "ROUT:CLOS (@1)")
    assert world.charger.state == "off"
    world.advance(5.0)
    assert world.charger.state == "waiting"


def test_a_switch_that_falls_open_can_be_read(world_with: Callable[..., World]) -> None:
    world = world_with("{at: 1 s, does: mains-open}")
    asked(world, "mains", "ROUT:CLOS (@1)")
    world.advance(1.0)
    assert (world.charger.state, asked(world, "mains", "ROUT:CLOS? (@1)")) == ("off", "0")


def test_a_charger_that_starts_without_its_mains(world_with: Callable[..., World]) -> None:
    world = world_with("{at: 1 s, does: charger-starts}")
    world.advance(1.0)
    assert not world.circuit.mains_on
    assert world.charger.drive() is not None


def test_a_load_and_a_supply_in_trouble(world_with: Callable[..., World]) -> None:
    world = world_with("{at: 1 s, does: load-trips}, {at: 2 s, does: supply-limits, lasts: 1 s}")
    for name, message in (("node_supply", "VOLT 15;CURR 5;:OUTP ON"), ("node_load", "CURR 3;:INP ON")):
        asked(world, name, message)
    world.advance(0.9)
    assert world.circuit.supply_mode == "cv"
    world.advance(0.1)
    assert world.circuit.load.tripped == {"power"}
    asked(world, "node_load", "INP:PROT:CLE;:INP ON")
    world.advance(1.1)
    assert world.circuit.supply_mode == "cc"
    world.advance(1.0)
    assert world.circuit.supply_mode == "cv"


@pytest.mark.parametrize(
    ("trouble", "key", "told"),
    [
        ("{at: 1 s, does: mute}", "does", "'mute' needs an 'instrument'"),
        ("{at: 1 s, does: mute, instrument: meter_nod}", "instrument", "meter_node"),
        ("{at: 1 s, does: overload, instrument: mains}", "instrument", "only a meter"),
        ("{at: 1 s, does: load-trips, instrument: node_load}", "instrument", "leave 'instrument' out"),
        ("{at: 1 s, does: mains-open, lasts: 3 s}", "lasts", "lasts for good"),
        ("{at: 1 s, does: load-tripps}", "does", "load-trips"),
    ],
)
def test_troubles_that_make_no_sense(bench_with: Callable[..., Any], trouble: str, key: str, told: str) -> None:
    _, faults = bench_with(trouble)
    assert len(faults.found) == 1
    assert told in str(faults.found[0])
    assert faults.found[0].place.column == len("  troubles: [") + 1 + trouble.index(key)


def test_the_lists_name_what_there_is() -> None:
    assert set(OF_AN_INSTRUMENT) | set(FOR_GOOD) <= set(get_args(Does))


def test_the_example_in_the_readme_loads(bench_with: Callable[..., Any]) -> None:
    readme = (DRIVERS / "README.md").read_text("utf-8")
    block = readme.partition("```yaml\ntroubles:\n")[2].partition("```")[0]
    lines = [line.strip().removeprefix("- ").partition("#")[0].strip() for line in block.strip().splitlines()]
    file, faults = bench_with(", ".join(lines))
    faults.raise_if_any()
    assert len(file.bench.virtual.troubles) == len(get_args(Does))
