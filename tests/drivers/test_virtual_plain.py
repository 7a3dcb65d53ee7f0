"""The second virtual family: its manner, its faults, its reversed status, its slowness."""

from __future__ import annotations

import socket
from collections.abc import Callable

import pytest

from drivers.clock import wall_seconds
from drivers.virtual.plain import MOST_FAULTS, ANSWER_s
from drivers.virtual.plan import Plan
from drivers.virtual.remote import VirtualServer
from drivers.virtual.world import World

MakePlan = Callable[..., Plan]
PLAIN = ("node_supply", "node_load", "cells")


@pytest.fixture
def world(breadth_plan: MakePlan) -> World:
    return World(breadth_plan(plain=PLAIN, errors=0.0), 1)


def say(world: World, name: str, *lines: str) -> list[str]:
    """Each line with CR LF; the answers, without."""
    heard = world.instruments[name].stream(b"".join(line.encode() + b"\r\n" for line in lines))
    assert heard == b"" or heard.endswith(b"\r\n")
    return heard.decode().split("\r\n")[:-1]


def test_identity_and_fault_memory(world: World) -> None:
    assert say(world, "node_supply", "IDENT?")[0].startswith("packmime,plain supply,V")
    assert say(world, "node_supply", "FAULT?", "SET:VOLT 12.5", "SET:VOLT?", "FAULT?") == ["NONE", "12.5000", "NONE"]


@pytest.mark.parametrize(
    ("line", "fault"),
    [
        ("SET:VOLT 12;SET:CURR 1", "VALUE"),
        ("FAULT?;FAULT?", "WORD"),
        ("SET:VOLT?;:SET:CURR?", "WORD"),
        ("*IDN?", "WORD"),
        ("VOLT 12", "WORD"),
        ("set:volt 12", "WORD"),
        ("SET:VOLT", "VALUE"),
        ("SET:VOLT 1E1", "VALUE"),
        ("SET:VOLT 61", "RANGE"),
        ("SET:VOLT -1", "RANGE"),
        ("POWER 1", "VALUE"),
        ("READ:VOLT 3", "WORD"),
        ("READ:VOLT? 3", "VALUE"),
        ("FAULT:CLEAR 1", "VALUE"),
        ("FAULT:CLEAR?", "WORD"),
    ],
)
def test_what_it_cannot_do_stands_as_one_word(world: World, line: str, fault: str) -> None:
    assert say(world, "node_supply", line) == []
    assert say(world, "node_supply", "FAULT?", "FAULT?") == [fault, "NONE"]
    assert say(world, "node_supply", "SET:VOLT?") == ["0.0000"]


def test_line_feed_alone_is_no_end_of_a_line(world: World) -> None:
    assert world.instruments["node_supply"].stream(b"IDENT?\n") == b""
    assert say(world, "node_supply", "FAULT?") == ["LINE"]


def test_fault_memory_is_bounded_and_cleared(world: World) -> None:
    say(world, "node_load", *["NONSENSE"] * 20)
    assert say(world, "node_load", *["FAULT?"] * (MOST_FAULTS + 1)) == ["WORD"] * MOST_FAULTS + ["NONE"]
    say(world, "node_load", "NONSENSE", "FAULT:CLEAR")
    assert say(world, "node_load", "FAULT?") == ["NONE"]


def test_supply_thinks_before_it_acts_and_its_status_is_reversed(world: World) -> None:
    say(world, "node_supply", "SET:CURR 2", "SET:VOLT 10", "POWER ON")
    assert say(world, "node_supply", "POWER?", "READ:VOLT?", "READ:STATUS?") == ["ON", "0.0000", "3"]
    world.advance(0.099)
    assert say(world, "node_supply", "READ:VOLT?") == ["0.0000"]
    world.advance(1.0)
    assert say(world, "node_supply", "READ:VOLT?", "READ:STATUS?") == ["10.0000", "2"]  # not in constant current
    say(world, "node_load", "MODE CC", "SET:CURR 3", "POWER ON")
    assert say(world, "node_supply", "READ:CURR?", "READ:STATUS?") == ["2.0000", "1"]  # not in constant voltage


def test_supply_that_tripped_refuses_to_be_switched_on(world: World) -> None:
    say(world, "node_supply", "TRIP:VOLT 5", "SET:VOLT 10", "POWER ON")
    world.advance(1.0)
    assert say(world, "node_supply", "POWER?", "POWER ON", "FAULT?") == ["OFF", "STATE"]
    say(world, "node_supply", "TRIP:CLEAR", "SET:VOLT 4", "POWER ON")
    world.advance(1.0)
    assert say(world, "node_supply", "POWER?", "READ:VOLT?") == ["ON", "4.0000"]


def test_load_is_sound_until_it_trips(world: World) -> None:
    say(world, "node_supply", "SET:CURR 10", "SET:VOLT 12", "POWER ON")
    world.advance(1.0)
    say(world, "node_load", "MODE CC", "TRIP:CURR 2", "SET:CURR 1", "POWER ON")
    assert say(world, "node_load", "MODE?", "READ:CURR?", "READ:STATUS?", "POWER?") == ["CC", "1.0000", "1", "ON"]
    say(world, "node_load", "SET:CURR 3")
    assert say(world, "node_load", "READ:CURR?", "READ:STATUS?", "POWER?") == ["0.0000", "0", "OFF"]
    assert say(world, "node_load", "MODE CV", "FAULT?") == ["VALUE"]


def test_cells_are_chosen_before_they_are_spoken_to(world: World) -> None:
    assert say(world, "cells", "SET:VOLT 3.7", "FAULT?") == ["STATE"]
    assert say(world, "cells", "INST:SEL CH9", "FAULT?") == ["RANGE"]
    assert say(world, "cells", "INST:SEL 2", "FAULT?") == ["VALUE"]
    for channel, volts in ((1, 3.6), (2, 3.8)):
        say(world, "cells", f"INST:SEL CH{channel}", f"SET:VOLT {volts}", "SET:CURR 0.1", "POWER ON")
    assert say(world, "cells", "INST:SEL CH1", "SET:VOLT?", "INST:SEL?") == ["3.6000", "CH1"]
    world.advance(0.2)
    said = say(world, "cells", "INST:SEL CH1", "READ:VOLT?", "INST:SEL CH2", "READ:VOLT?", "POWER?", "INST:SEL CH3")
    assert said == ["3.6000", "3.8000", "ON"]
    assert say(world, "cells", "READ:VOLT?", "POWER?", "FAULT?") == ["0.0000", "OFF", "NONE"]


def test_reset_leaves_everything_off(world: World) -> None:
    say(world, "cells", "INST:SEL CH1", "SET:VOLT 3.7", "POWER ON")
    world.advance(1.0)
    say(world, "cells", "RESET")
    world.advance(1.0)
    assert say(world, "cells", "READ:VOLT?", "POWER?") == ["0.0000", "OFF"]


def test_it_is_slow_in_wall_time_and_holds_up_nobody_else(breadth_plan: MakePlan) -> None:
    with VirtualServer.launch(breadth_plan(plain=PLAIN), 1, wall=True) as server:
        slow, quick = (
            socket.create_connection(("127.0.0.1", server.ports[name]), timeout=10)
            for name in ("node_supply", "meter_node")
        )
        with slow, quick:
            begun_s = wall_seconds()
            slow.sendall(b"IDENT?\r\n")
            quick.sendall(b"*IDN?\n")
            assert quick.recv(100).startswith(b"packmime,virtual meter")
            slow.setblocking(False)
            with pytest.raises(BlockingIOError):
                slow.recv(100)
            slow.setblocking(True)
            assert slow.recv(100).startswith(b"packmime,plain supply")
            assert wall_seconds() - begun_s >= ANSWER_s


def test_client_that_leaves_before_its_answer_hurts_nobody(breadth_plan: MakePlan) -> None:
    with VirtualServer.launch(breadth_plan(plain=PLAIN), 1, wall=True) as server:
        for _ in range(3):
            with socket.create_connection(("127.0.0.1", server.ports["cells"]), timeout=10) as gone:
                gone.sendall(b"IDENT?\r\n")
        with socket.create_connection(("127.0.0.1", server.ports["cells"]), timeout=10) as link:
            link.sendall(b"FAULT?\r\n")
            assert link.recv(100) == b"NONE\r\n"
