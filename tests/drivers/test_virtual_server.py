"""The virtual bench as a process: real sockets, the real pyvisa-py, and an end in every case."""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
from collections.abc import Callable, Iterator

import pytest
import pyvisa
from pyvisa.resources import MessageBasedResource

from drivers.clock import WallClock
from drivers.text.faults import BadInput
from drivers.trouble import LinkFault
from drivers.virtual.library import BenchLibrary
from drivers.virtual.plan import Plan, dumps
from drivers.virtual.remote import VirtualServer
from drivers.virtual.world import World

MakePlan = Callable[..., Plan]
QUESTIONS = {
    "node_supply": "MEAS:VOLT?;:MEAS:CURR?;:OUTP?;:STAT:OPER:COND?",
    "node_load": "MEAS:VOLT?;:MEAS:CURR?;:INP?;:STAT:QUES:COND?",
    "meter_node": "READ?",
    "meter_charger": "READ?",
    "meter_shunt": "READ?",
    "mains": "ROUT:CLOS? (@1)",
}


@pytest.fixture
def server(virtual_plan: MakePlan) -> Iterator[VirtualServer]:
    with VirtualServer.launch(virtual_plan(), 11) as started:
        yield started


def asked(server: VirtualServer, name: str, *messages: str) -> list[str]:
    with socket.create_connection(("127.0.0.1", server.ports[name]), timeout=10) as link:
        stream = link.makefile("rw", newline="\n")
        answers = []
        for message in messages:
            stream.write(message + "\n")
            stream.flush()
            answers.append(stream.readline().rstrip("\n"))
        return answers


def charge(manager: pyvisa.ResourceManager, addresses: dict[str, str], advance: Callable[[float], float]) -> list[str]:
    """A short charge with all instruments; every answer and every time, in order."""
    links: dict[str, MessageBasedResource] = {}
    for name, address in addresses.items():
        link = manager.open_resource(address, resource_pyclass=MessageBasedResource)
        assert isinstance(link, MessageBasedResource)
        link.read_termination = link.write_termination = "\n"
        link.timeout = 10_000
        links[name] = link
    said = [links[name].query("*IDN?") for name in links]
    said.append(links["node_supply"].query("VOLT 19;:CURR 10;:VOLT:PROT 23;:OUTP ON;:SYST:ERR?"))
    said.append(links["node_load"].query("CURR 4;:INP ON;:SYST:ERR?"))
    said.append(links["mains"].query("ROUT:CLOS (@1);:SYST:ERR?"))
    for step in range(150):
        said.append(links["node_supply"].query(f"VOLT {19 + step / 75:.4f};:SYST:ERR?"))
        said.append(repr(advance(0.1)))
        said += [links[name].query(question) for name, question in QUESTIONS.items()]
    for link in links.values():
        link.close()
    return said


def test_same_seed_same_bytes_in_process_and_over_sockets(server: VirtualServer, virtual_plan: MakePlan) -> None:
    world = World(virtual_plan(), 11)
    library = BenchLibrary.around(world)
    inside, outside = pyvisa.ResourceManager(library), pyvisa.ResourceManager("@py")
    near = charge(inside, library.addresses, world.advance)
    far = charge(outside, server.addresses, server.advance)
    inside.close()
    assert near == far
    assert any(answer.startswith("+2.0") for answer in near)  # it was a charge


def test_time_stands_still_between_advances(server: VirtualServer) -> None:
    assert server.advance(0.1) == 0.1
    assert server.now() == server.now() == 0.1
    assert server.advance(0.2) == 0.3  # counted in nanoseconds, not added as floats
    with pytest.raises(ValueError, match="0 or more"):
        server.advance(-1.0)


def test_stats(server: VirtualServer) -> None:
    asked(server, "mains", "*IDN?", "*OPC?")
    server.advance(1.0)
    stats = server.stats()
    assert stats["exchanges"] == 2
    assert 0 < stats["busy_s"] < 1


def test_clock_port_says_what_it_expects(server: VirtualServer) -> None:
    with socket.create_connection(("127.0.0.1", server.clock_port), timeout=10) as link:
        stream = link.makefile("rw", newline="\n")
        stream.write("advance soon\nwhat\nadvance 0.5\n")
        stream.flush()
        answers = [stream.readline().strip() for _ in range(3)]
    assert answers[0].startswith("error")
    assert answers[1] == "error expected: advance SECONDS, now, stats or bye"
    assert answers[2] == "0.5"


def test_probe_and_open_follow_each_other_at_once(server: VirtualServer) -> None:
    for _ in range(50):
        socket.create_connection(("127.0.0.1", server.ports["mains"]), timeout=10).close()
        assert asked(server, "mains", "*OPC?") == ["1"]


def test_second_client_beside_a_live_one_is_turned_away(server: VirtualServer) -> None:
    with socket.create_connection(("127.0.0.1", server.ports["mains"]), timeout=10) as first:
        first.sendall(b"*OPC?\n")
        assert first.recv(10) == b"1\n"
        with socket.create_connection(("127.0.0.1", server.ports["mains"]), timeout=10) as second:
            assert second.recv(10) == b""
        first.sendall(b"*TST?\n")
        assert first.recv(10) == b"0\n"


def test_half_a_message_dies_with_its_link(server: VirtualServer) -> None:
    with socket.create_connection(("127.0.0.1", server.ports["mains"]), timeout=10) as link:
        link.sendall(b"ROUT:CLOS (@1)\nNONS")
    assert asked(server, "mains", "SYST:ERR?", "ROUT:CLOS? (@1)") == ['0,"No error"', "1"]


def test_fixed_ports_and_a_port_in_use(server: VirtualServer, virtual_plan: MakePlan) -> None:
    taken = server.ports["mains"]
    with pytest.raises(LinkFault, match="did not come up"):
        VirtualServer.launch(virtual_plan(), 1, ports={"mains": taken})
    server.close()
    with VirtualServer.launch(virtual_plan(), 1, ports={"mains": taken}) as again:
        assert again.ports["mains"] == taken
        assert asked(again, "mains", "*OPC?") == ["1"]


def test_wall_time_passes_by_itself(virtual_plan: MakePlan) -> None:
    with VirtualServer.launch(virtual_plan(), 1, wall=True) as server:
        first = server.now()
        for _ in range(100_000):
            if server.now() > first + 0.02:
                break
        assert server.now() > first + 0.02
        with pytest.raises(ValueError, match="wall clock"):
            server.advance(1.0)


def test_bad_texts_are_refused_before_anything_is_started() -> None:
    with pytest.raises(BadInput) as caught:
        VirtualServer.start("packmime: bench 1\nname: x\n", "packmime: charger 1\ncells: 5\n", 1)
    files = {fault.place.file for fault in caught.value.faults}
    assert files == {"bench", "charger"}


def test_close_ends_the_process_and_may_be_called_twice(virtual_plan: MakePlan) -> None:
    server = VirtualServer.launch(virtual_plan(), 1)
    server.advance(1.0)
    server.close()
    server.close()
    assert server._process.returncode == 0
    with pytest.raises(LinkFault, match="its process ended with 0"):
        server.now()


def test_stopped_process_is_killed(virtual_plan: MakePlan, monkeypatch: pytest.MonkeyPatch) -> None:
    if sys.platform == "win32":
        pytest.skip("there is no stop signal on Windows")
    monkeypatch.setattr("drivers.virtual.remote.END_TIMEOUT_s", 0.1)
    server = VirtualServer.launch(virtual_plan(), 1)
    os.kill(server._process.pid, signal.SIGSTOP)
    server.close()
    assert server._process.returncode == -signal.SIGKILL


def test_interrupt_leaves_the_instruments_alive(server: VirtualServer) -> None:
    server._process.send_signal(signal.SIGINT)
    assert asked(server, "mains", "*OPC?") == ["1"]


PARENT = """
import json, sys
from drivers.virtual.plan import Plan
from drivers.virtual.remote import VirtualServer
server = VirtualServer.launch(Plan.from_json(json.loads(sys.argv[1])), 1)
print(server.clock_port, flush=True)
sys.stdin.read()
"""


def test_no_orphan_when_the_parent_is_killed(virtual_plan: MakePlan) -> None:
    arguments = [sys.executable, "-P", "-c", PARENT, dumps(virtual_plan().to_json())]
    with subprocess.Popen(arguments, stdin=subprocess.PIPE, stdout=subprocess.PIPE) as parent:
        assert parent.stdout is not None
        port = int(parent.stdout.readline())
        assert _answers(port)
        parent.kill()
    clock = WallClock()
    while _answers(port) and clock.now() < 5.0:
        clock.wait_until(clock.now() + 0.01)
    assert not _answers(port)


def _answers(port: int) -> bool:
    try:
        socket.create_connection(("127.0.0.1", port), timeout=5).close()
    except ConnectionRefusedError:
        return False
    return True


def test_plan_line_is_json_on_one_line(virtual_plan: MakePlan) -> None:
    line = dumps(virtual_plan().to_json())
    assert "\n" not in line
    assert json.loads(line)["charger"]["cells"] == 5
