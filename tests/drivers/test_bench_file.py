"""A bench file and its dialects, read and held against each other: all faults at once, each with its place."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers.bench_file import DIALECTS, BenchFile, load_bench
from drivers.text.faults import Faults

NAMES = ("node_supply", "node_load", "meter_node", "meter_charger", "meter_shunt", "mains")
KINDS = ("scpi-supply", "scpi-load", "scpi-meter", "scpi-meter", "scpi-meter", "scpi-mains-switch")
REAL = (
    "packmime: bench 1\nname: bay-1\ninstruments:\n"
    + "".join(
        f'  {name}: {{address: "TCPIP::192.0.2.{number}::5025::SOCKET", dialect: {kind}}}\n'
        for number, (name, kind) in enumerate(zip(NAMES, KINDS, strict=True), 11)
    )
    + """wiring:
  node:
    supply: node_supply
    load: node_load
    voltage: meter_node
    charger_voltage: meter_charger
    current: {shunt: 10 mΩ ± 0.1 %, meter: meter_shunt}
    ballast: 100 mΩ
  mains: {switch: mains}
limits: {node: 26 V, current: 12 A, charge: 5 Ah}
"""
)
ROLES = {
    "node.supply": "supply",
    "node.load": "load",
    "node.voltage": "meter",
    "node.charger_voltage": "meter",
    "node.current.meter": "meter",
    "mains.switch": "mains switch",
}
Load = Callable[..., tuple[BenchFile | None, list[str]]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """load((old, new), ...) -> the bench file with texts replaced, and its faults as sentences."""

    def loading(*changes: tuple[str, str], text: str = REAL) -> tuple[BenchFile | None, list[str]]:
        for old, new in changes:
            assert old in text, old
            text = text.replace(old, new)
        path, faults = tmp_path / "bay.yaml", Faults()
        path.write_text(text, "utf-8")
        return load_bench(path, faults), [str(fault) for fault in faults.found]

    return loading


def test_a_real_bench(load: Load) -> None:
    file, faults = load()
    assert faults == []
    assert file is not None
    for where, role in ROLES.items():
        name, part, dialect = file.at(where)
        assert dialect.role == role
        assert part.address.startswith("TCPIP::192.0.2.")
        assert file.dialect(name) is dialect


def test_shipped_benches_are_whole() -> None:
    benches = sorted((DIALECTS.parents[1] / "procedures" / "benches").glob("*.yaml"))
    assert benches
    for path in benches:
        faults = Faults()
        assert load_bench(path, faults) is not None
        assert faults.found == []


def test_every_fault_is_named_at_once_and_in_its_place(load: Load) -> None:
    _, faults = load(
        ("dialect: scpi-load", "dialect: scpi-lode"),
        ("voltage: meter_node", "voltage: meter_knot"),
        ("meter: meter_shunt", "meter: meter_charger"),
    )
    assert len(faults) == 3
    assert any("scpi-load" in fault and "bay.yaml:5:" in fault for fault in faults)
    assert any("meter_node" in fault and "meter_knot" in fault for fault in faults)
    assert any("an instrument of its own" in fault for fault in faults)


def test_a_role_needs_its_dialect(load: Load) -> None:
    _, (fault,) = load(
        ("load: node_load", "load: meter_spare"), ("node_load:", "meter_spare:"), ("scpi-load", "scpi-meter")
    )
    assert "the dialect of a meter; a load is needed here" in fault


def test_a_dialect_file_beside_the_bench(load: Load, tmp_path: Path) -> None:
    text = (DIALECTS / "scpi-meter.yaml").read_text("utf-8")
    (tmp_path / "own.yaml").write_text(text.replace("name: scpi-meter", "name: own"), "utf-8")
    file, faults = load(
        (
            f'{NAMES[2]}: {{address: "TCPIP::192.0.2.13::5025::SOCKET", dialect: scpi-meter',
            f'{NAMES[2]}: {{address: "TCPIP::192.0.2.13::5025::SOCKET", dialect: own.yaml',
        )
    )
    assert faults == []
    assert file is not None
    assert file.dialect("meter_node").name == "own"
    (tmp_path / "own.yaml").write_text(text.replace("volts: {", "volt: {"), "utf-8")
    _, faults = load(("dialect: scpi-load", "dialect: own.yaml"))
    assert any("own.yaml" in fault for fault in faults)


@pytest.mark.parametrize("again", ["TCPIP::192.0.2.11::5025::SOCKET", "tcpip0::192.0.2.11::5025::socket"])
def test_two_instruments_at_one_address(load: Load, again: str) -> None:
    _, (fault,) = load(("TCPIP::192.0.2.12::5025::SOCKET", again))
    assert "'node_supply' has this address already" in fault
    assert "bay.yaml:5:" in fault


@pytest.mark.parametrize(
    "address",
    [
        "",
        "192.0.2.11",
        "TCPIP::",
        "TCPIP::192.0.2.11::SOCKET",
        "TCPIP::192.0.2.11::0::SOCKET",
        "TCPIP::192.0.2.11::65536::SOCKET",
        "TCPIP::192.0.2.11::http::SOCKET",
        "TCPIP:192.0.2.11:5025:SOCKET",
    ],
)
def test_what_no_visa_library_can_mean_is_refused_before_anything_is_touched(load: Load, address: str) -> None:
    _, faults = load(("TCPIP::192.0.2.11::5025::SOCKET", address))
    assert faults
    assert all("bay.yaml:4:" in fault for fault in faults)


@pytest.mark.parametrize(
    "address",
    [
        "TCPIP0::192.0.2.99::inst0::INSTR",
        "TCPIP::192.0.2.99::hislip0::INSTR",
        "TCPIP::meter.example::5025::SOCKET",
        "USB0::0x1234::0x5678::A0001::INSTR",
        "GPIB0::5::INSTR",
        "GPIB::5",
        "ASRL/dev/ttyUSB0::INSTR",
    ],
)
def test_addresses_of_every_bus_are_taken(load: Load, address: str) -> None:
    assert load(("TCPIP::192.0.2.11::5025::SOCKET", address))[1] == []


def test_a_virtual_bench_drives_no_hardware(load: Load) -> None:
    _, faults = load(text=REAL + "virtual: {transport: in-process}\n")
    assert len(faults) == len(NAMES)
    assert all("drives no hardware" in fault for fault in faults)
    _, (fault,) = load(("TCPIP::192.0.2.11::5025::SOCKET", "virtual"))
    assert "needs a bench with a 'virtual' section" in fault


@pytest.mark.parametrize("text", ["", "[]", "packmime: bench 2\n", "packmime: procedure 1\n", "a: [", "\0"])
def test_what_is_no_bench_file_is_a_fault(load: Load, text: str) -> None:
    file, faults = load(text=text)
    assert file is None
    assert faults


def test_a_file_that_is_not_there_is_a_fault(tmp_path: Path) -> None:
    faults = Faults()
    assert load_bench(tmp_path / "none.yaml", faults) is None
    assert faults.found
