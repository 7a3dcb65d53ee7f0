"""A bench with its links open, in process: whoever does not answer is named, and nothing is left open."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from drivers import session
from drivers.bench_file import BenchFile, load_bench
from drivers.clock import VirtualClock, WallClock, wall_seconds
from drivers.exchange import Inline, Job
from drivers.open_bench import Access, open_bench, open_what_answers
from drivers.text.faults import Faults
from drivers.trouble import BenchFault, InstrumentFault, LinkFault
from drivers.virtual.charger_file import load_charger
from drivers.virtual.instrument import serial_number
from drivers.virtual.library import BenchLibrary
from drivers.virtual.world import World

SHIPPED = Path(session.__file__).parents[1] / "procedures" / "benches" / "virtual-mains-in-process.yaml"
NAMES = ["node_supply", "node_load", "meter_node", "meter_charger", "meter_shunt", "mains"]


@pytest.fixture
def virtual(tmp_path: Path) -> Callable[..., tuple[BenchFile, Access, World]]:
    """virtual((old, new), ...) -> the shipped bench with texts replaced, the way to it, its world."""

    def make(*changes: tuple[str, str]) -> tuple[BenchFile, Access, World]:
        text, faults = SHIPPED.read_text("utf-8"), Faults()
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "bench.yaml").write_text(text, "utf-8")
        file, charger = load_bench(tmp_path / "bench.yaml", faults), load_charger("sprayer-power", faults)
        faults.raise_if_any()
        assert file is not None
        assert charger is not None
        world = World.build(file.bench, charger.model, 1)
        library = BenchLibrary.around(world)
        return file, Access(library, library.addresses, VirtualClock(world.advance), 1), world

    return make


Virtual = Callable[..., tuple[BenchFile, Access, World]]


@pytest.fixture
def real(virtual: Virtual) -> Callable[[dict[str, str]], tuple[BenchFile, Access]]:
    """The same bench as if it were real: addresses given, wall clock, pyvisa-py."""

    def make(addresses: dict[str, str]) -> tuple[BenchFile, Access]:
        return virtual()[0], Access("@py", addresses, WallClock())

    return make


def silent(count: int) -> tuple[list[object], list[str]]:
    """Ports that accept by their backlog and never speak."""
    import socket

    listeners = [socket.create_server(("127.0.0.1", 0)) for _ in range(count)]
    return list(listeners), [f"TCPIP::127.0.0.1::{one.getsockname()[1]}::SOCKET" for one in listeners]


def refused() -> str:
    (listener,), (address,) = silent(1)
    listener.close()  # type: ignore[attr-defined]
    return address


def test_every_role_is_identified(virtual: Virtual) -> None:
    file, access, _ = virtual()
    bench = open_bench(file, access)
    assert list(bench.identities) == NAMES == [speaker.name for speaker in bench.speakers]
    assert all(serial_number(name) in identity for name, identity in bench.identities.items())
    assert isinstance(bench.exchange, Inline)
    assert bench.lost == {}
    assert bench.shunt_ohm == 0.01
    assert bench.hands.patience_s == 3.5
    bench.close()
    with pytest.raises(LinkFault, match="the link is closed"):
        bench.mains.read(bench.hands.ask(bench.mains.reading("state")))
    open_bench(file, access).close()  # every link was let go


def test_opening_switches_nothing(virtual: Virtual) -> None:
    file, access, world = virtual()
    world.instruments["mains"].stream(b"ROUT:CLOS (@1)\n")
    world.instruments["node_supply"].stream(b"VOLT 12;:OUTP ON\n")
    bench = open_bench(file, access)
    access.clock.wait_until(1.0)
    assert bench.mains.read(bench.hands.ask(bench.mains.reading("state"))) is True
    assert bench.supply.read(bench.hands.ask(bench.supply.reading("state"))).voltage_V == pytest.approx(12.0, abs=0.1)


def test_old_errors_are_not_taken_for_answers_to_our_settings(virtual: Virtual) -> None:
    file, access, world = virtual()
    for instrument in world.instruments.values():
        instrument.stream(b"NO SUCH\n" * 5)
    bench = open_bench(file, access)
    for speaker in bench.speakers:
        reply = bench.hands.ask(Job(speaker.name, ("SYST:ERR?",), 1))
        assert reply.fields == ('0,"No error"',)  # SCPI-1999, volume 2, 21.8.8


def test_serials_are_held_against_the_identity(virtual: Virtual) -> None:
    right, wrong = serial_number("meter_node"), serial_number("meter_node")[:-1]
    line = "meter_node: {address: virtual, dialect: scpi-meter"
    file, access, _ = virtual((line, f"{line}, serial: {right}"))
    open_bench(file, access).close()
    file, access, _ = virtual((line, f"{line}, serial: {wrong}"))
    with pytest.raises(InstrumentFault, match=f"meter_node: answers as '.*{right}.*'; serial {wrong} was expected"):
        open_bench(file, access)


def test_who_does_not_answer_is_named_and_nothing_stays_open(virtual: Virtual) -> None:
    file, access, _ = virtual()
    gone = replace(access, addresses={**access.addresses, "mains": "TCPIP0::nowhere::5025::SOCKET"})
    with pytest.raises(LinkFault, match="mains: cannot be opened at TCPIP0::nowhere"):
        open_bench(file, gone)
    open_bench(file, access).close()


def test_the_way_to_safety_takes_what_answers(virtual: Virtual) -> None:
    file, access, _ = virtual()
    gone = replace(access, addresses={**access.addresses, "meter_node": "TCPIP0::nowhere::5025::SOCKET"})
    bench = open_what_answers(file, gone)
    assert list(bench.lost) == ["meter_node"]
    assert set(bench.identities) == set(NAMES) - {"meter_node"}
    assert bench.mains.read(bench.hands.ask(bench.mains.reading("state"))) is False


Real = Callable[[dict[str, str]], tuple[BenchFile, Access]]


def test_all_that_refuse_are_named_together_within_10_s(real: Real) -> None:
    file, access = real({name: refused() for name in NAMES})
    begun_s = wall_seconds()
    with pytest.raises(LinkFault) as caught:
        open_bench(file, access)
    assert wall_seconds() - begun_s < 10.0
    assert caught.value.instrument == "node_supply"
    for name in NAMES:
        assert f"{name}: nobody answers at {access.addresses[name]}" in str(caught.value)
    assert len(str(caught.value).splitlines()) == len(NAMES), "one line each"


def test_silent_ones_cost_one_wait_and_not_six(real: Real, monkeypatch: pytest.MonkeyPatch) -> None:
    """Accepts and says nothing: six of them are asked side by side."""
    listeners, addresses = silent(len(NAMES))
    file, access = real(dict(zip(NAMES, addresses, strict=True)))
    quick = {
        name: replace(bound, model=bound.model.model_copy(update={"timeout": 0.3}))
        for name, bound in file.dialects.items()
    }
    begun_s = wall_seconds()
    with pytest.raises(BenchFault) as caught:
        open_bench(replace(file, dialects=quick), access)
    assert wall_seconds() - begun_s < 10.0
    assert str(caught.value).count("time-out") == len(NAMES)
    for listener in listeners:
        listener.close()  # type: ignore[attr-defined]
