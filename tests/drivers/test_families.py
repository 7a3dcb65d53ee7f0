"""A new family of instruments takes a dialect file and no Python: what drivers/README.md promises, carried out."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

import drivers
import procedures
from drivers.bench_file import BenchFile, load_bench
from drivers.clock import VirtualClock
from drivers.open_bench import Access, OpenBench, open_bench
from drivers.roles import Deed, LoadMode, SupplyMode
from drivers.text.faults import Faults
from drivers.trouble import InstrumentFault
from drivers.virtual.charger_file import load_charger
from drivers.virtual.library import BenchLibrary
from drivers.virtual.world import World

PAGE = Path(drivers.__file__).parent / "README.md"
BENCHES = Path(procedures.__file__).parent / "benches"


def page_examples(kind: str) -> list[str]:
    blocks = re.findall(r"```yaml\n(.*?)```", PAGE.read_text("utf-8"), re.DOTALL)
    return [block for block in blocks if block.startswith(f"packmime: {kind} 1\n")]


def loaded(path: Path) -> BenchFile:
    faults = Faults()
    file = load_bench(path, faults)
    faults.raise_if_any()
    assert file is not None
    return file


@contextmanager
def opened(path: Path) -> Iterator[tuple[OpenBench, World]]:
    """A bench by its file, played in this process, every link proven."""
    file, charger = loaded(path), load_charger("sprayer", Faults())
    assert charger is not None
    world = World.build(file.bench, charger.model, 1)
    library = BenchLibrary.around(world)
    bench = open_bench(file, Access(library, library.addresses, VirtualClock(world.advance), 1))
    try:
        yield bench, world
    finally:
        bench.close()


@pytest.mark.parametrize("kind", ["dialect", "bench", "charger"])
def test_page_has_one_complete_example_of_each_kind(kind: str) -> None:
    assert len(page_examples(kind)) == 1


def test_example_bench_of_the_page_loads_with_its_dialects(tmp_path: Path) -> None:
    (example,) = page_examples("bench")
    path = tmp_path / "bench.yaml"
    path.write_text(example, "utf-8")
    file = loaded(path)
    assert len(file.dialects) == len(file.bench.instruments) == 12
    assert file.bench.hardware.missing() == ["node clamp", "watchdog relay"]


def test_example_charger_of_the_page_is_loaded_by_path(tmp_path: Path) -> None:
    (example,) = page_examples("charger")
    (tmp_path / "fan.yaml").write_text(example, "utf-8")
    faults = Faults()
    charger = load_charger("fan.yaml", faults, beside=tmp_path)
    faults.raise_if_any()
    assert charger is not None
    assert len(charger.model.plan().id_bands) == 2


def test_worked_example_is_spoken_to_as_the_page_says(tmp_path: Path) -> None:
    """The dialect of the page, beside a copy of the shipped bench that names it."""
    (example,) = page_examples("dialect")
    (tmp_path / "plain-mine.yaml").write_text(example, "utf-8")
    text = (BENCHES / "virtual-plain.yaml").read_text("utf-8")
    assert "dialect: plain-supply}" in text
    path = tmp_path / "my-bench.yaml"
    path.write_text(text.replace("dialect: plain-supply}", "dialect: plain-mine.yaml}"), "utf-8")
    with opened(path) as (bench, _):
        assert bench.identities["node_supply"].startswith("packmime,plain supply,")
        bench.hands.do([Deed(bench.supply, "voltage", 12.0), Deed(bench.supply, "current_limit", 2.0)])
        bench.hands.do([Deed(bench.supply, "on")])
        bench.clock.wait_until(bench.clock.now() + 1.0)
        read = bench.supply.read(bench.hands.ask(bench.supply.reading("state")))
        assert (read.mode, read.voltage_V) == (SupplyMode.CONSTANT_VOLTAGE, pytest.approx(12.0, abs=0.02))
        with pytest.raises(InstrumentFault, match=re.escape("refused 'overvoltage 66.5' and said RANGE")):
            bench.hands.do([Deed(bench.supply, "overvoltage", 66.5)])


@pytest.mark.parametrize("bench_name", ["virtual", "virtual-plain"])
def test_both_families_say_the_same_of_the_same_bench(bench_name: str) -> None:
    """Modes by status bits, the right way round and the other: constant voltage, current limit, off, tripped."""
    with opened(BENCHES / f"{bench_name}.yaml") as (bench, world):
        modes = []

        def note() -> None:
            world.advance(1.0)
            replies = bench.exchange([bench.supply.reading("state"), bench.load.reading("state")], 5.0)
            modes.append((bench.supply.read(replies[0]).mode, bench.load.read(replies[1]).mode))

        note()
        bench.hands.do([Deed(bench.supply, "voltage", 18.0), Deed(bench.supply, "current_limit", 2.0)])
        bench.hands.do([Deed(bench.supply, "on"), Deed(bench.load, "constant_current")])
        note()
        bench.hands.do([Deed(bench.load, "overcurrent", 4.0), Deed(bench.load, "current", 3.0), Deed(bench.load, "on")])
        note()
        bench.hands.do([Deed(bench.load, "current", 5.0), Deed(bench.supply, "current_limit", 10.0)])
        note()
        assert modes == [
            (SupplyMode.OFF, LoadMode.OFF),
            (SupplyMode.CONSTANT_VOLTAGE, LoadMode.OFF),
            (SupplyMode.CONSTANT_CURRENT, LoadMode.ON),
            (SupplyMode.CONSTANT_VOLTAGE, LoadMode.TRIPPED),
        ]


@pytest.mark.parametrize("bench_name", ["virtual", "virtual-plain"])
def test_cell_channels_are_set_and_read_one_by_one_or_as_a_list(bench_name: str) -> None:
    with opened(BENCHES / f"{bench_name}.yaml") as (bench, world):
        taps = bench.signals.taps
        for number, tap in enumerate(taps):
            bench.hands.do([tap.limit(0.1), tap.volts(3.5 + 0.1 * number), tap.on])
        world.advance(0.5)
        channels = [tap.channel for tap in taps]
        reply = bench.hands.ask(taps[0].supply.ask("volts", channels))
        assert taps[0].supply.answers(reply, "volts", channels) == pytest.approx([3.5, 3.6, 3.7, 3.8], abs=5e-3)


def test_second_family_is_data_alone() -> None:
    """Outside of drivers/virtual no Python names the second family, its commands or its words."""
    root = Path(drivers.__file__).parents[1]
    sources = [path for room in ("drivers", "sequencer", "reports") for path in (root / room).rglob("*.py")]
    for path in sources:
        if (root / "drivers" / "virtual") not in path.parents:
            assert not re.search(r"plain-|SET:VOLT|INST:SEL|FAULT\?", path.read_text("utf-8")), path


def test_both_families_reach_the_same_verdicts(rehearse: Callable[..., object]) -> None:
    plain = {"dialect: scpi-supply": "dialect: plain-supply", "dialect: scpi-load": "dialect: plain-load"}
    first, second = rehearse("charge-profile"), rehearse("charge-profile", bench=plain)
    assert first.verdicts == second.verdicts  # type: ignore[attr-defined]
    assert set(first.verdicts.values()) == {"pass", "not applicable"}  # type: ignore[attr-defined]
