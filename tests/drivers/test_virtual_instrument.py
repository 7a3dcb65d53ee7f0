"""The instrument on the wire: message exchange, common commands, status (IEEE 488.2; SCPI-1999)."""

from __future__ import annotations

import itertools
import re
from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.instrument import MOST_INPUT, Instrument, nr3, serial_number
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
NAMES = ("node_supply", "node_load", "meter_node", "mains")


@pytest.fixture
def supply(virtual_world: Make) -> Instrument:
    return virtual_world().instruments["node_supply"]


# -- message exchange (IEEE 488.2, clause 6) ----------------------------------------------------------------------


def test_answer_waits_until_it_is_taken(supply: Instrument) -> None:
    supply.feed(b"*IDN?\n")
    assert supply.pending == len(supply.identity()) + 1
    assert supply.take(8) == b"packmime"
    assert supply.take(1000).endswith(b",1.0\n")
    assert supply.pending == 0


def test_no_answer_before_the_terminator(supply: Instrument) -> None:
    supply.feed(b"*IDN?")
    assert supply.pending == 0
    supply.feed(b"\r\n")
    assert supply.pending


def test_new_message_before_the_answer_was_taken_is_interrupted(supply: Instrument) -> None:
    supply.feed(b"*IDN?\n")
    supply.feed(b"OUTP?\n")
    assert supply.take(100) == b"0\n"  # the first answer is gone
    supply.feed(b"SYST:ERR?\n")
    assert supply.take(100) == b'-410,"Query INTERRUPTED"\n'


def test_reading_without_asking_is_unterminated(supply: Instrument) -> None:
    assert supply.take(100) == b""
    supply.feed(b"SYST:ERR?;*ESR?\n")
    assert supply.take(100) == b'-420,"Query UNTERMINATED";132\n'  # PON 128 + QYE 4


def test_raw_socket_lets_answers_flow(supply: Instrument) -> None:
    answers = supply.stream(b"OUTP?\n*OPC?\nVOLT 3\nSYST")
    assert answers == b"0\n1\n"
    assert supply.stream(b":ERR?\n") == b'0,"No error"\n'


def test_cleared_link_forgets_half_a_message(supply: Instrument) -> None:
    supply.stream(b"NONSENSE")
    supply.clear_link()
    assert supply.stream(b"SYST:ERR?\n") == b'0,"No error"\n'


def test_message_without_end_is_not_kept_for_ever(supply: Instrument) -> None:
    supply.stream(b"A" * (MOST_INPUT + 1))
    assert supply.stream(b"SYST:ERR?\n") == b'-363,"Input buffer overrun"\n'


messages = st.lists(
    st.sampled_from(["*IDN?", "VOLT 5", "VOLT?", "MEAS:VOLT?;CURR?", "*CLS", "BAD", "SYST:ERR?", "VOLT 5;:VOLT?", ""]),
    max_size=6,
).map(lambda texts: "".join(text + "\n" for text in texts).encode())


@given(messages, st.lists(st.integers(0, 80), max_size=8))
def test_bytes_whole_or_in_pieces_are_the_same(virtual_world: Make, data: bytes, cuts: list[int]) -> None:
    def heard(pieces: list[bytes]) -> bytes:
        instrument = virtual_world().instruments["node_supply"]
        return b"".join(instrument.stream(piece) for piece in pieces)

    edges = [0, *sorted(min(cut, len(data)) for cut in cuts), len(data)]
    pieces = [data[a:b] for a, b in itertools.pairwise(edges)]
    assert heard([data]) == heard(pieces) == heard([bytes([byte]) for byte in data])


@given(messages)
def test_fed_whole_or_byte_by_byte_is_the_same(virtual_world: Make, data: bytes) -> None:
    whole, single = (virtual_world().instruments["node_supply"] for _ in range(2))
    whole.feed(data)
    for byte in data:
        single.feed(bytes([byte]))
    assert (whole._output, list(whole.status.errors)) == (single._output, list(single.status.errors))


# -- common commands --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_mandatory_common_commands(virtual_world: Make, ask: Ask, name: str) -> None:
    """IEEE 488.2, clause 10: the mandatory common commands."""
    world = virtual_world()
    for command in ("*CLS", "*ESE 36", "*OPC", "*RST", "*SRE 48", "*WAI"):
        assert ask(world, name, command) == ""
    for query in ("*ESE?", "*ESR?", "*OPC?", "*SRE?", "*STB?", "*TST?"):
        assert re.fullmatch(r"\d+", ask(world, name, query)), query
    assert ask(world, name, "SYST:ERR?") == '0,"No error"'


@pytest.mark.parametrize("name", NAMES)
def test_identity_has_four_fields(virtual_world: Make, ask: Ask, name: str) -> None:
    """IEEE 488.2, 10.14: maker, model, serial number, version, separated by commas."""
    assert ask(virtual_world(), name, "*IDN?").split(",")[2] == serial_number(name)
    assert len(ask(virtual_world(), name, "*IDN?").split(",")) == 4


@pytest.mark.parametrize(("message", "bit"), [("VOLT 99", 16), ("NONSENSE", 32), ("*OPC", 1)])
def test_event_status_by_class(virtual_world: Make, ask: Ask, message: str, bit: int) -> None:
    world = virtual_world()
    assert ask(world, "node_supply", "*ESR?") == "128"  # power on
    ask(world, "node_supply", message)
    assert ask(world, "node_supply", "*ESR?") == str(bit)
    assert ask(world, "node_supply", "*ESR?") == "0"


def test_status_byte_from_error_to_master_summary(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    ask(world, "node_supply", "*CLS;*ESE 32;*SRE 32;BAD")
    assert ask(world, "node_supply", "*STB?") == str(4 + 32 + 64)
    assert ask(world, "node_supply", "*IDN?;*STB?").endswith(f";{4 + 16 + 32 + 64}")  # MAV: an answer stands
    ask(world, "node_supply", "*CLS")
    assert ask(world, "node_supply", "*STB?") == "0"


def test_service_enable_ignores_bit_six(virtual_world: Make, ask: Ask) -> None:
    """IEEE 488.2, 11.3.2: bit 6 of the service request enable register is not used."""
    assert ask(virtual_world(), "mains", "*SRE 255;*SRE?") == "191"


def test_scpi_registers(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    ask(world, "node_supply", "STAT:OPER:ENAB 256;*SRE 128;:VOLT 5;:OUTP ON")
    world.advance(1.0)
    assert ask(world, "node_supply", "STAT:OPER:COND?") == "256"
    assert ask(world, "node_supply", "*STB?") == str(128 + 64)
    assert ask(world, "node_supply", "STAT:OPER?") == "256"
    assert ask(world, "node_supply", "STAT:OPER:EVEN?;ENAB?") == "0;256"
    ask(world, "node_supply", "STAT:PRES")
    assert ask(world, "node_supply", "STAT:OPER:ENAB?") == "0"


def test_version_and_error_count(virtual_world: Make, ask: Ask) -> None:
    assert ask(virtual_world(), "mains", "SYST:VERS?") == "1999.0"
    assert ask(virtual_world(), "mains", "BAD;WORSE;:SYST:ERR:COUN?") == "2"


@pytest.mark.parametrize("value", [0.0, 15.1234, -0.00025, 9.9e37])
def test_numbers_are_answered_as_nr3(value: float) -> None:
    """IEEE 488.2, 8.7.4: sign, digits with a point, E, signed exponent."""
    text = nr3(value)
    assert re.fullmatch(r"[+-]\d\.\d+E[+-]\d+", text)
    assert float(text) == pytest.approx(value, rel=1e-9)


@pytest.mark.parametrize("name", NAMES)
def test_help_lists_what_it_hears(virtual_world: Make, name: str) -> None:
    lines = list(virtual_world().instruments[name].tree.help())
    assert any(line.startswith("SYSTem:ERRor[:NEXT]?") for line in lines)
    assert all("  -- " in line for line in lines)
