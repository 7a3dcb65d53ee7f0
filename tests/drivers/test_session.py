"""One link to one instrument, over real sockets to peers of our own that go wrong in every way we know."""

from __future__ import annotations

import socket
import threading
import warnings
from collections.abc import Callable, Iterator, Sequence

import pytest

from drivers.bench_file import DIALECTS
from drivers.clock import WallClock, wall_seconds
from drivers.dialect import Dialect
from drivers.exchange import Job, perform
from drivers.session import MOST_ANSWER, Session, probe
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults
from drivers.trouble import InstrumentFault, LinkFault, ReplyFault

TIMEOUT_s = 0.3
LATE_s = 1.5 * TIMEOUT_s  # midway between this question's time-out and that of the first one after it
GREETING = ("*CLS;:SYST:ERR?",)
IDENTITY = "invented,bench meter,A0001,1.0"
Said = Sequence[bytes | float | None]  # bytes: say them; a number: wait so long; None: close the connection
Script = Callable[[int, str], Said]  # (how many clients have spoken, this one too; the line heard) -> what to do


class Peer:
    """A TCP instrument with a script; one client at a time, the next waits in the backlog. Ends by itself."""

    def __init__(self, script: Script, longest_s: float = 20.0) -> None:
        self.heard: list[str] = []
        self._script = script
        self._over = threading.Event()
        self._until_s = wall_seconds() + longest_s
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._listener.settimeout(0.02)
        self.address = f"TCPIP::127.0.0.1::{self._listener.getsockname()[1]}::SOCKET"
        self._thread = threading.Thread(target=self._serve)
        self._thread.start()

    @property
    def _running(self) -> bool:
        return not self._over.is_set() and wall_seconds() < self._until_s

    def _serve(self) -> None:
        spoken = 0
        with self._listener:
            while self._running:
                try:
                    client, _ = self._listener.accept()
                except TimeoutError:
                    continue
                with client:
                    client.settimeout(0.02)
                    spoken += self._attend(client, spoken + 1)

    def _attend(self, client: socket.socket, number: int) -> bool:
        """Whether this client said anything (a probe does not)."""
        half, spoke = b"", False
        while self._running:
            try:
                data = client.recv(4096)
            except TimeoutError:
                continue
            except OSError:
                return spoke
            if not data:
                return spoke
            *lines, half = (half + data).split(b"\n")
            for line in lines:
                spoke = True
                self.heard.append(line.decode())
                if not self._do(client, self._script(number, line.decode())):
                    return spoke
        return spoke

    def _do(self, client: socket.socket, said: Said) -> bool:
        for one in said:
            if one is None:
                return False
            if isinstance(one, float):
                self._over.wait(one)
                continue
            try:
                client.sendall(one)
            except OSError:
                return False
        return True

    def close(self) -> None:
        self._over.set()
        self._thread.join(5.0)
        assert not self._thread.is_alive()


def healthy(number: int, line: str) -> Said:
    if line == "*IDN?":
        return [IDENTITY.encode() + b"\n"]
    return [b'0,"No error"\n'] if line.endswith("SYST:ERR?") else [b"+1.850000000E+01\n"] if "?" in line else []


def but(message: str, said: Said, first: int = 99) -> Script:
    """Healthy but for one message, for the first `first` clients that speak."""
    return lambda number, line: said if line == message and number <= first else healthy(number, line)


@pytest.fixture(scope="module")
def meter_dialect() -> Dialect:
    faults = Faults()
    bound = bind(Dialect, read(DIALECTS / "scpi-meter.yaml"), "dialect", faults)
    assert bound is not None, faults.found
    return bound.model.model_copy(update={"timeout": TIMEOUT_s})


@pytest.fixture
def link(meter_dialect: Dialect) -> Iterator[Callable[..., tuple[Session, Peer]]]:
    """link(script, serial=None) -> an unopened session and the peer at its other end."""
    made: list[tuple[Session, Peer]] = []

    def make(script: Script = healthy, serial: str | None = None) -> tuple[Session, Peer]:
        peer = Peer(script)
        made.append((Session("meter_node", peer.address, meter_dialect, "@py", serial, GREETING), peer))
        return made[-1]

    yield make
    for session, peer in made:
        session.close()
        peer.close()


Link = Callable[..., tuple[Session, Peer]]
ASK = Job("meter_node", ("READ?",), 1)


def fails(session: Session, what: str, within_s: float, message: str = "READ?") -> None:
    """Asking raises a LinkFault that names instrument and reason, in bounded time, and the link is closed."""
    begun_s = wall_seconds()
    with pytest.raises(LinkFault, match=what) as caught:
        session.ask(message)
    assert wall_seconds() - begun_s < within_s
    assert caught.value.instrument == "meter_node"
    assert not session.is_open
    with pytest.raises(LinkFault, match="the link is closed"):
        session.ask(message)


def refused_address() -> str:
    """A port at which nobody listens: bound once, and let go."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        return f"TCPIP::127.0.0.1::{listener.getsockname()[1]}::SOCKET"


def test_asks_and_is_answered(link: Link) -> None:
    session, peer = link(serial="A0001")
    session.reopen()
    assert session.identity == IDENTITY
    assert [session.ask("READ?") for _ in range(3)] == ["+1.850000000E+01"] * 3
    session.tell("*CLS")
    assert peer.heard[:2] == ["*IDN?", "*CLS;:SYST:ERR?"]


def test_many_answers_cost_no_delayed_acknowledgement(link: Link) -> None:
    """A write and a bare query stall for 40 ms (measured for pyvisa-py); one message with its answer does not."""
    session, _ = link()
    session.reopen()
    begun_s = wall_seconds()
    for _ in range(50):
        session.ask("VOLT 15.1;:SYST:ERR?")
    assert wall_seconds() - begun_s < 50 * 0.040


def test_a_refused_port_is_named_at_once(meter_dialect: Dialect) -> None:
    address = refused_address()
    session = Session("meter_node", address, meter_dialect, "@py")
    begun_s = wall_seconds()
    with pytest.raises(LinkFault) as caught:
        session.open()
    assert wall_seconds() - begun_s < 3.5
    assert address in str(caught.value)
    assert str(caught.value).startswith("meter_node: nobody answers at")
    assert not session.is_open


@pytest.mark.parametrize(
    "address",
    [
        "TCPIP::127.0.0.1::99999::SOCKET",  # no such port
        "TCPIP::" + "x" * 70 + ".invalid::5025::SOCKET",  # a label of more than 63 letters (RFC 1035, 2.3.4)
        "no address at all",
        "GPIB0::5::INSTR",  # no such interface on this machine, or no driver for it
        "TCPIP::127.0.0.1::SOCKET",
    ],
)
def test_an_address_that_leads_nowhere_is_a_link_fault(meter_dialect: Dialect, address: str) -> None:
    session = Session("meter_node", address, meter_dialect, "@py")
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with pytest.raises(LinkFault, match="meter_node"):
            session.open()
    assert not session.is_open


def test_a_library_that_is_not_there_is_a_link_fault(meter_dialect: Dialect) -> None:
    with pytest.raises(LinkFault, match="cannot be opened"):
        Session("meter_node", "GPIB0::5::INSTR", meter_dialect, "/nowhere/libvisa.so").open()


def test_only_raw_sockets_are_probed() -> None:
    probe("meter_node", "USB0::0x1234::0x5678::A0001::INSTR")
    probe("meter_node", "TCPIP0::192.0.2.1::INSTR")  # RFC 5737: nobody is there, and nobody is asked


def test_silence_ends_in_a_time_out(link: Link) -> None:
    session, _ = link(but("READ?", []))
    session.reopen()
    fails(session, "no answer to 'READ\\?': time-out", 10 * TIMEOUT_s)


def test_an_instrument_that_accepts_and_never_speaks(link: Link) -> None:
    session, _ = link(lambda number, line: [])
    begun_s = wall_seconds()
    with pytest.raises(LinkFault, match="no answer to '\\*IDN\\?': time-out"):
        session.reopen()
    assert wall_seconds() - begun_s < 10 * TIMEOUT_s
    assert not session.is_open


def test_the_tail_of_a_late_answer_never_is_the_next_answer(link: Link) -> None:
    session, _ = link(but("READ?", [b"123", LATE_s, b"4567\n"], first=1))
    session.reopen()
    fails(session, "time-out", 10 * TIMEOUT_s)
    session.reopen()
    assert [session.ask("READ?") for _ in range(3)] == ["+1.850000000E+01"] * 3


def test_a_whole_answer_that_is_late_is_lost_with_its_link(link: Link) -> None:
    session, _ = link(but("READ?", [LATE_s, b"666\n"], first=1))
    session.reopen()
    fails(session, "time-out", 10 * TIMEOUT_s)
    session.reopen()
    assert session.ask("READ?") == "+1.850000000E+01"


@pytest.mark.parametrize("said", [[None], [b"12", None]], ids=["before the answer", "in its middle"])
def test_a_peer_that_closes(link: Link, said: Said) -> None:
    """pyvisa-py spins until its time-out when the peer closes (measured); it must not spin for ever."""
    session, _ = link(but("READ?", said))
    session.reopen()
    fails(session, "no answer to 'READ\\?'", 10 * TIMEOUT_s)


def test_a_peer_that_is_gone_before_it_is_asked(link: Link) -> None:
    session, peer = link()
    session.reopen()
    peer.close()
    fails(session, "no answer to 'READ\\?'", 10 * TIMEOUT_s)
    with pytest.raises(LinkFault, match="nobody answers at"):
        session.reopen()


def test_bytes_that_are_no_text(link: Link) -> None:
    session, _ = link(but("READ?", [b"\xff\xfe\x00\n"]))
    session.reopen()
    fails(session, "no answer to 'READ\\?'", 10 * TIMEOUT_s)


def test_an_instrument_that_never_ends_its_line(link: Link) -> None:
    session, _ = link(but("READ?", [b"9" * 4096] * (MOST_ANSWER // 4096 + 2)))
    session.reopen()
    fails(session, "without the terminator LF", 10 * TIMEOUT_s)


def test_too_few_and_too_many_values_close_the_link(link: Link) -> None:
    """What did not fit may still be on its way, and would be taken for the next answer."""
    for answer, count in ((b"1;2\n", 2), (b"1;2;3;4\n", 4)):
        session, _ = link(but("A?;:B?;:C?", [answer]))
        session.reopen()
        got = perform(session, Job("meter_node", ("A?;:B?;:C?",), 3), WallClock())
        assert isinstance(got.fault, ReplyFault)
        assert f"3 values were expected to 'A?;:B?;:C?', {count} came" in str(got.fault)
        assert got.fields == ()
        assert not session.is_open


def test_one_line_a_value_is_noticed_and_never_shifts_the_answers(link: Link) -> None:
    session, _ = link(but("A?;:B?", [b"1\n2\n"], first=1))
    session.reopen()
    pair = Job("meter_node", ("A?;:B?",), 2)
    assert isinstance(perform(session, pair, WallClock()).fault, ReplyFault)
    got = perform(session, Job("meter_node", ("READ?",), 1, reopen=True), WallClock())
    assert got.fields == ("+1.850000000E+01",)


def test_a_closed_link_says_why_and_reopens_only_when_asked_to(link: Link) -> None:
    session, peer = link(but("READ?", [], first=1))
    session.reopen()
    assert isinstance(perform(session, ASK, WallClock()).fault, LinkFault)
    spoken = len(peer.heard)
    got = perform(session, ASK, WallClock())
    assert "the link is closed (no answer to 'READ?': time-out)" in str(got.fault)
    assert len(peer.heard) == spoken
    again = perform(session, Job("meter_node", ("READ?",), 1, reopen=True), WallClock())
    assert again.fields == ("+1.850000000E+01",)


def test_the_wrong_serial_number_is_not_spoken_to(link: Link) -> None:
    """IEEE 488.2, 10.14: the third field of the identity; A000 is not A0001."""
    session, peer = link(serial="A000")
    with pytest.raises(InstrumentFault, match="serial A000 was expected there"):
        session.reopen()
    assert not session.is_open
    assert peer.heard == ["*IDN?"]


def test_another_instrument_at_the_same_address_is_not_spoken_to(link: Link) -> None:
    def script(number: int, line: str) -> Said:
        if number == 1:
            return [None] if line == "READ?" else healthy(number, line)
        return [b"invented,bench supply,B0002,1.0\n"]

    session, peer = link(script)
    session.reopen()
    fails(session, "no answer", 10 * TIMEOUT_s)
    with pytest.raises(InstrumentFault, match="answers as 'invented,bench supply,B0002,1\\.0' where"):
        session.reopen()
    assert peer.heard[-1] == "*IDN?"
    with pytest.raises(LinkFault, match="the link is closed \\(answers as"):
        session.ask("READ?")


def test_one_client_instrument_that_is_still_busy(link: Link, meter_dialect: Dialect) -> None:
    """A second client is accepted by the backlog and hears nothing until the first has gone."""
    first, peer = link()
    first.reopen()
    second = Session("meter_node", peer.address, meter_dialect, "@py")
    with pytest.raises(LinkFault, match="time-out"):
        second.reopen()
    assert not second.is_open
    first.close()
    second.reopen()
    assert second.ask("READ?") == "+1.850000000E+01"
    second.close()


def test_what_was_left_in_the_error_queue_is_not_held_against_us(link: Link) -> None:
    """IEEE 488.2, 10.3: *CLS empties the queue."""
    queue = ['-113,"Undefined header"']

    def script(number: int, line: str) -> Said:
        if "*CLS" in line:
            queue.clear()
        if line.endswith("SYST:ERR?"):
            return [(queue.pop(0) if queue else '0,"No error"').encode() + b"\n"]
        return healthy(number, line)

    session, _ = link(script)
    session.reopen()
    assert session.ask("VOLT 1;:SYST:ERR?") == '0,"No error"'


@pytest.mark.parametrize(("terminator", "end"), [("CRLF", b"\r\n"), ("LF", b"\n")])
def test_terminators(link: Link, meter_dialect: Dialect, terminator: str, end: bytes) -> None:
    _, peer = link(lambda number, line: [b"42" + end])
    session = Session("it", peer.address, meter_dialect.model_copy(update={"terminator": terminator}), "@py")
    session.open()
    assert session.ask("A?") == "42"
    session.close()
    session.close()


def test_a_terminator_that_the_instrument_does_not_send(link: Link, meter_dialect: Dialect) -> None:
    _, peer = link(lambda number, line: [b"42\n"])
    session = Session("meter_node", peer.address, meter_dialect.model_copy(update={"terminator": "CRLF"}), "@py")
    session.open()
    fails(session, "without the terminator CRLF", 10 * TIMEOUT_s, "A?")
