"""One link to one instrument, over pyvisa; the rules are those measured for pyvisa-py on raw sockets.

A port is probed by a plain connect first: pyvisa-py opens a refused one without a word until the first
read. After any time-out or error the link is closed and never cleared: `clear()` spins for ever once the peer has
closed, and half an answer makes its tail the answer to the next question. `reopen` opens anew and proves who answers.
"""

from __future__ import annotations

import re
import socket
import threading
from typing import TYPE_CHECKING, Any, TypeAlias

from drivers.trouble import BenchFault, InstrumentFault, LinkFault, ReplyFault

if TYPE_CHECKING:
    from pyvisa.highlevel import VisaLibraryBase
    from pyvisa.resources import MessageBasedResource

    from drivers.dialect import Dialect

Library: TypeAlias = "str | VisaLibraryBase"  # "@py", the path of a VISA library, or a library object
PROBE_TIMEOUT_s = 3.0
MOST_ANSWER = 65_536  # bytes: an instrument that talks on and on without a line's end must not be heard for ever
_SOCKET = re.compile(r"TCPIP\d*::(?P<host>[^:]+|\[[^\]]+\])::(?P<port>\d+)::SOCKET", re.IGNORECASE)
_MANAGER = threading.Lock()  # pyvisa keeps one manager a library, and two threads must not both make it


def probe(name: str, address: str) -> None:
    """Connect to a raw socket once and let go. Raises LinkFault where nobody answers."""
    match = _SOCKET.fullmatch(address)
    if match is None:
        return
    host, port = match["host"].strip("[]"), int(match["port"])
    try:
        socket.create_connection((host, port), timeout=PROBE_TIMEOUT_s).close()
    except (OSError, OverflowError, UnicodeError) as reason:  # the latter two: no such port, no such host name
        said = "no answer" if isinstance(reason, TimeoutError) else (getattr(reason, "strerror", "") or str(reason))
        raise LinkFault(
            name, f"nobody answers at {address} ({said}): is it on, cabled, and is the address right?"
        ) from reason


class Session:
    """A link that asks and is answered; one at a time, by one caller.

    What pyvisa and its backends raise is of many kinds (OSError, VisaIOError, InvalidSession, bare Exception,
    RPC and struct errors); whatever it is, the link's state is unknown then: it is closed, and a LinkFault says why.
    """

    def __init__(
        self,
        name: str,
        address: str,
        dialect: Dialect,
        library: Library,
        serial: str | None = None,
        greeting: tuple[str, ...] = (),
    ) -> None:
        """`serial`: must be a field of the identity that the instrument answers; None: anyone will do.

        `greeting`: said once it is known who answers, such as what empties the error queue; answers are dropped.
        """
        self.name = name
        self.address = address
        self.identity: str | None = None  # as proven at the first opening
        self._serial = serial
        self._greeting = greeting
        self._dialect = dialect
        self._library = library
        self._link: MessageBasedResource | None = None
        self._why_closed = "it was not opened"

    @property
    def is_open(self) -> bool:
        return self._link is not None

    def open(self) -> None:
        """Open the link. Raises LinkFault, naming instrument and address."""
        import pyvisa

        if isinstance(self._library, str):
            probe(self.name, self.address)
        try:
            with _MANAGER:
                manager = pyvisa.ResourceManager(self._library)
            self._link = self._opened(manager)
        except Exception as reason:  # see the class
            raise LinkFault(self.name, f"cannot be opened at {self.address}: {_said(reason)}") from reason

    def _opened(self, manager: Any) -> MessageBasedResource:
        import pyvisa

        link: Any = manager.open_resource(
            self.address,
            resource_pyclass=pyvisa.resources.MessageBasedResource,
            open_timeout=round(PROBE_TIMEOUT_s * 1000),
        )
        try:
            link.read_termination = link.write_termination = self._dialect.end
            link.timeout = self._dialect.timeout * 1000.0
        except Exception:
            link.close()
            raise
        return link  # type: ignore[no-any-return]  # pyvisa's own type depends on the address

    def prove(self) -> str:
        """Ask who answers, hold it against serial number and earlier identity, then say the greeting.

        Returns the identity. Raises LinkFault, and InstrumentFault for somebody else; the link is closed then.
        """
        identity = self.ask(self._dialect.identity)
        wrong = self._wrong(identity)
        if wrong is not None:
            self.close(wrong)
            raise InstrumentFault(self.name, wrong)
        self.identity = identity
        for message in self._greeting:
            self._through("ask" if "?" in message else "tell", message)
        return identity

    def _wrong(self, identity: str) -> str | None:
        # IEEE 488.2, 10.14: maker, model, serial number, firmware level, parted by commas
        if self._serial is not None and self._serial not in [part.strip() for part in identity.split(",")]:
            return f"answers as '{identity}'; serial {self._serial} was expected there"
        if self.identity is not None and identity != self.identity:
            return f"answers as '{identity}' where '{self.identity}' was before"
        return None

    def reopen(self) -> None:
        """Close, open anew, prove: one try. Raises LinkFault or InstrumentFault; the link is closed then."""
        self.close()
        try:
            self.open()
            self.prove()
        except BenchFault as fault:
            self.close(fault.what)
            raise

    def ask(self, message: str) -> str:
        """Send a message that has an answer, and return the answer. Raises LinkFault; the link is closed then."""
        return self._through("ask", message)

    def tell(self, message: str) -> None:
        """Send a message that has no answer. Raises LinkFault; the link is closed then."""
        self._through("tell", message)

    def _through(self, how: str, message: str) -> str:
        if self._link is None:
            raise LinkFault(self.name, f"the link is closed ({self._why_closed})")
        try:
            self._link.write(message)
            return self._answer() if how == "ask" else ""
        except Exception as reason:  # see the class
            what = f"no answer to '{message}': {_said(reason)}"
            self.close(what)
            raise LinkFault(self.name, what) from reason

    def _answer(self) -> str:
        assert self._link is not None
        # not read(): it goes on for ever with an instrument that never ends its line
        heard = self._link.read_bytes(MOST_ANSWER, break_on_termchar=True)
        if not heard.endswith(self._dialect.end.encode("ascii")):
            raise ValueError(f"{len(heard)} bytes came without the terminator {self._dialect.terminator}")
        return heard.decode("ascii").strip()

    def distrust(self, fault: ReplyFault) -> None:
        """Close the link after an answer that does not fit its question: the next one might be late for this."""
        self.close(fault.what)

    def close(self, why: str = "it was closed") -> None:
        """Let the link go; closing twice does nothing."""
        link, self._link = self._link, None
        if link is not None:
            self._why_closed = why
            try:
                link.close()
            except Exception:  # see the class
                return  # the peer is gone already, which is what was wanted


def _said(reason: Exception) -> str:
    code = getattr(reason, "abbreviation", None)
    if code == "VI_ERROR_TMO":
        return "time-out"
    return f"{code}" if code else str(reason) or type(reason).__name__
