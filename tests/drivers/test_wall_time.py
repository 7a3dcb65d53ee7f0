"""Wall time end to end: a bench in a process of its own, reached over TCP as real instruments are."""

from __future__ import annotations

import socket
import threading
from collections.abc import Iterator
from contextlib import ExitStack
from dataclasses import replace
from pathlib import Path

import pytest

from drivers import safe, session
from drivers.bench_file import BenchFile, load_bench
from drivers.clock import WallClock, wall_seconds
from drivers.exchange import Workers
from drivers.open_bench import Access, OpenBench, open_bench, open_what_answers
from drivers.roles import Deed, LoadMode, SupplyMode
from drivers.safe import ALARM_UNKNOWN, to_safe_state
from drivers.text.faults import Faults
from drivers.virtual.charger_file import load_charger
from drivers.virtual.plan import plan_of
from drivers.virtual.remote import VirtualServer

SHIPPED = Path(session.__file__).parents[1] / "procedures" / "benches" / "virtual-mains-in-process.yaml"
TIMEOUT_s = 0.5  # shorter than the shipped 3 s, for silence is waited for here


@pytest.fixture
def server() -> Iterator[VirtualServer]:
    faults = Faults()
    file, charger = load_bench(SHIPPED, faults), load_charger("sprayer-power", faults)
    assert file is not None, faults.found
    assert charger is not None, faults.found
    quick = replace(plan_of(file.bench, charger.model), charger=replace(charger.model.plan(), start_delay_s=0.3))
    with VirtualServer.launch(quick, 1, wall=True) as started:
        yield started
    assert not [thread for thread in threading.enumerate() if thread.name.startswith("link-")]


def real(tmp_path: Path, addresses: dict[str, str]) -> tuple[BenchFile, Access]:
    """The shipped bench as a real one: TCPIP addresses, no 'virtual' section, the shipped dialects."""
    text = SHIPPED.read_text("utf-8").partition("\nvirtual:")[0] + "\n"
    for name, address in addresses.items():
        text = text.replace(f"{name}: {{address: virtual", f'{name}: {{address: "{address}"')
    path, faults = tmp_path / "bay.yaml", Faults()
    path.write_text(text, "utf-8")
    file = load_bench(path, faults)
    faults.raise_if_any()
    assert file is not None
    assert file.bench.virtual is None
    quick = {
        name: replace(bound, model=bound.model.model_copy(update={"timeout": TIMEOUT_s}))
        for name, bound in file.dialects.items()
    }
    given = {name: part.address for name, part in file.bench.instruments.items()}
    return replace(file, dialects=quick), Access(file.bench.visa, given, WallClock())


def charge(bench: OpenBench) -> None:
    """From nothing to a charge at 3 A."""
    speakers = (bench.node_meter, bench.charger_meter, bench.shunt_meter)
    bench.hands.do([Deed(meter, "range", 0.1 if meter is bench.shunt_meter else 100.0) for meter in speakers])
    bench.hands.do([Deed(meter, "integration", 1.0) for meter in speakers])
    bench.hands.do([Deed(bench.supply, "voltage", 18.5), Deed(bench.supply, "current_limit", 4.1)])
    bench.hands.do([Deed(bench.load, "constant_current"), Deed(bench.load, "current", 3.75)])
    bench.hands.do([Deed(bench.supply, "on"), Deed(bench.load, "on"), Deed(bench.mains, "on")])
    until_s = bench.clock.now() + 5.0
    while bench.clock.now() < until_s and current_A(bench) < 2.9:
        bench.clock.wait_until(bench.clock.now() + 0.1)
    assert current_A(bench) == pytest.approx(3.0, rel=0.02)


def current_A(bench: OpenBench) -> float:
    return bench.shunt_meter.read(bench.hands.ask(bench.shunt_meter.reading("volts"))) / bench.shunt_ohm


def test_a_charge_and_the_way_to_safety(server: VirtualServer, tmp_path: Path) -> None:
    bench = open_bench(*real(tmp_path, server.addresses))
    try:
        assert isinstance(bench.exchange, Workers)
        assert not bench.clock.virtual
        charge(bench)
        jobs = [bench.supply.reading("state"), bench.load.reading("state"), bench.mains.reading("state")]
        jobs += [meter.reading("volts") for meter in (bench.node_meter, bench.charger_meter)]
        supply, load, mains, node, charger = bench.exchange(jobs, 3.0)
        assert bench.supply.read(supply).mode == SupplyMode.CONSTANT_VOLTAGE
        assert bench.load.read(load).mode == LoadMode.ON
        assert bench.mains.read(mains) is True
        assert bench.node_meter.read(node) == pytest.approx(18.5, abs=0.05)
        assert bench.charger_meter.read(charger) > 18.7
        begun_s = wall_seconds()
        state = to_safe_state(bench)
        assert wall_seconds() - begun_s < 10.0
        assert state.verified, state
        assert state.troubles == []
        assert bench.mains.read(bench.hands.ask(bench.mains.reading("state"))) is False
    finally:
        bench.close()
    open_bench(*real(tmp_path, server.addresses)).close()  # one client an instrument: every link was let go


def test_a_dead_meter_is_no_obstacle_on_the_way_to_safety(server: VirtualServer, tmp_path: Path) -> None:
    """Accepts and stays silent, as an instrument does that another client holds."""
    first = open_bench(*real(tmp_path, server.addresses))
    charge(first)
    first.close()
    with socket.create_server(("127.0.0.1", 0)) as listener:
        silent = f"TCPIP::127.0.0.1::{listener.getsockname()[1]}::SOCKET"
        begun_s = wall_seconds()
        bench = open_what_answers(*real(tmp_path, {**server.addresses, "meter_shunt": silent}))
        assert list(bench.lost) == ["meter_shunt"]
        state = to_safe_state(bench)
        bench.close()
        assert wall_seconds() - begun_s < 15.0
    assert state.verified, state


def test_a_bench_that_is_gone_altogether_ends_in_the_alarm_soon(
    server: VirtualServer, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """With a quarter of the usual 2 s, to spare the suite; the 2 s themselves are held in test_safe."""
    for name in ("PATIENCE_s", "DEED_PATIENCE_s"):
        monkeypatch.setattr(safe, name, 0.5)
    with ExitStack() as ends:
        bench = open_bench(*real(tmp_path, server.addresses))
        ends.callback(bench.close)
        charge(bench)
        server.close()
        begun_s = wall_seconds()
        alarms: list[str] = []
        state = to_safe_state(bench, alarms.append)
        assert wall_seconds() - begun_s < 8.0  # two tries, in each a deed and a look that may wait for a time-out
        assert alarms == [ALARM_UNKNOWN]
        assert not state.verified
