"""The virtual bench through the real pyvisa, in this process."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import pytest
import pyvisa
from pyvisa.resources import MessageBasedResource

from drivers.virtual.library import BenchLibrary
from drivers.virtual.world import World

Make = Callable[..., World]


@pytest.fixture
def library(virtual_world: Make) -> BenchLibrary:
    return BenchLibrary.around(virtual_world())


@pytest.fixture
def manager(library: BenchLibrary) -> Iterator[pyvisa.ResourceManager]:
    made = pyvisa.ResourceManager(library)
    yield made
    made.close()


def opened(manager: pyvisa.ResourceManager, library: BenchLibrary, name: str) -> MessageBasedResource:
    link = manager.open_resource(library.addresses[name], resource_pyclass=MessageBasedResource)
    assert isinstance(link, MessageBasedResource)
    link.read_termination = link.write_termination = "\n"
    return link


def test_instruments_answer(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    for name in library.addresses:
        with opened(manager, library, name) as link:
            assert link.query("*IDN?").startswith("packmime,virtual ")


def test_names_are_canonical_and_listed(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    assert library.addresses["mains"] == "TCPIP0::mains::5025::SOCKET"
    assert set(manager.list_resources("?*")) == set(library.addresses.values())


def test_default_resource_class_opens_too(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    with manager.open_resource("TCPIP::mains::5025::SOCKET") as link:
        assert link.timeout == 2000


def test_time_out_costs_virtual_time_only(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    with opened(manager, library, "mains") as link:
        link.timeout = 3_600_000
        before = library.world.now
        with pytest.raises(pyvisa.errors.VisaIOError, match="VI_ERROR_TMO"):
            link.query("*CLS")
        assert library.world.now == before + 3600.0
        assert link.query("*OPC?") == "1"


def test_long_answers_and_several_answers_come_whole(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    with opened(manager, library, "node_supply") as link:
        link.chunk_size = 7
        assert link.query("VOLT?;:CURR?;:VOLT:PROT?").count("E+") == 3
        link.write("*OPC?\nOUTP?")
        assert [link.read(), link.read()] == ["1", "0"]


def test_one_client_an_instrument(manager: pyvisa.ResourceManager, library: BenchLibrary) -> None:
    first = opened(manager, library, "mains")
    with pytest.raises(pyvisa.errors.VisaIOError, match="VI_ERROR_RSRC_BUSY"):
        opened(manager, library, "mains")
    first.close()
    opened(manager, library, "mains").close()


def test_unknown_instrument(manager: pyvisa.ResourceManager) -> None:
    with pytest.raises(pyvisa.errors.VisaIOError, match="VI_ERROR_RSRC_NFOUND"):
        manager.open_resource("TCPIP0::nobody::5025::SOCKET", resource_pyclass=MessageBasedResource)


def test_answer_not_read_is_found_by_the_next_reader_unless_cleared(
    manager: pyvisa.ResourceManager, library: BenchLibrary
) -> None:
    with opened(manager, library, "mains") as link:
        link.write("*IDN?")
        link.write("*OPC?")
        assert link.read().startswith("packmime")  # a raw socket keeps what was said
        link.clear()
        assert link.query("*TST?") == "0"
    with opened(manager, library, "mains") as link:
        link.write("*IDN?")
    with opened(manager, library, "mains") as link:
        assert link.query("*OPC?") == "1"  # a new link starts empty


def test_two_benches_are_apart(virtual_world: Make) -> None:
    libraries = [BenchLibrary.around(virtual_world(seed=seed)) for seed in (1, 2)]
    managers = [pyvisa.ResourceManager(library) for library in libraries]
    links = [opened(manager, library, "mains") for manager, library in zip(managers, libraries, strict=True)]
    links[0].query("ROUT:CLOS (@1);*OPC?")
    libraries[0].world.advance(5.0)
    assert [link.query("ROUT:CLOS? (@1)") for link in links] == ["1", "0"]
    assert [library.world.now for library in libraries] == [5.0, 0.0]
    for manager in managers:
        manager.close()


def test_closed_session_is_refused(library: BenchLibrary) -> None:
    with pytest.raises(pyvisa.errors.InvalidSession):
        library.write(99, b"*IDN?\n")
