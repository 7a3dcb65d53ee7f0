"""One link to one instrument, over pyvisa; the rules are those measured for pyvisa-py on raw sockets.

A port is probed by a plain connect first: pyvisa-py opens a refused one without a word until the first
read. After any time-out or OSError the link is closed for good and opened anew, never cleared: `clear()`
spins for ever once the peer has closed, and half an answer makes its tail the answer to the next question.
"""

from __future__ import annotations

import re
import socket
from typing import TYPE_CHECKING, Any, TypeAlias

from drivers.trouble import LinkFault

if TYPE_CHECKING:
    from pyvisa.highlevel import VisaLibraryBase
    from pyvisa.resources import MessageBasedResource

    from drivers.dialect import Dialect

Library: TypeAlias = "str | VisaLibraryBase"  # "@py", the path of a VISA library, or a library object
PROBE_TIMEOUT_s = 3.0
_SOCKET = re.compile(r"TCPIP\d*::(?P<host>[^:]+|\[[^\]]+\])::(?P<port>\d+)::SOCKET", re.IGNORECASE)


def probe(name: str, address: str) -> None:
    """Connect to a raw socket once and let go. Raises LinkFault where nobody answers."""
    match = _SOCKET.fullmatch(address)
    if match is None:
        return
    host, port = match["host"].strip("[]"), int(match["port"])
    try:
        socket.create_connection((host, port), timeout=PROBE_TIMEOUT_s).close()
    except OSError as reason:
        said = "no answer" if isinstance(reason, TimeoutError) else (reason.strerror or str(reason))
        raise LinkFault(
            name, f"nobody answers at {address} ({said}): is it on, cabled, and is the address right?"
        ) from reason


class Session:
    """A link that asks and is answered; one at a time, by one caller."""

    def __init__(self, name: str, address: str, dialect: Dialect, library: Library) -> None:
        self.name = name
        self.address = address
        self._dialect = dialect
        self._library = library
        self._link: MessageBasedResource | None = None

    def open(self) -> None:
        """Open the link. Raises LinkFault, naming instrument and address."""
        import pyvisa

        if isinstance(self._library, str):
            probe(self.name, self.address)
        try:
            manager = pyvisa.ResourceManager(self._library)
            link: Any = manager.open_resource(self.address, resource_pyclass=pyvisa.resources.MessageBasedResource)
            link.read_termination = link.write_termination = self._dialect.end
            link.timeout = self._dialect.timeout * 1000.0
        except (OSError, pyvisa.errors.Error, ValueError) as reason:
            raise LinkFault(self.name, f"cannot be opened at {self.address}: {_said(reason)}") from reason
        self._link = link

    def ask(self, message: str) -> str:
        """Send a message that has an answer, and return the answer. Raises LinkFault; the link is closed then."""
        return self._through("ask", message)

    def tell(self, message: str) -> None:
        """Send a message that has no answer. Raises LinkFault; the link is closed then."""
        self._through("tell", message)

    def _through(self, how: str, message: str) -> str:
        import pyvisa

        if self._link is None:
            raise LinkFault(self.name, "the link is closed")
        try:
            if how == "ask":
                return str(self._link.query(message)).strip()
            self._link.write(message)
            return ""
        except (OSError, pyvisa.errors.Error, UnicodeError) as reason:
            self.close()
            raise LinkFault(self.name, f"no answer to '{message}': {_said(reason)}") from reason

    def close(self) -> None:
        """Let the link go; closing twice does nothing."""
        import pyvisa

        link, self._link = self._link, None
        if link is not None:
            try:
                link.close()
            except (OSError, pyvisa.errors.Error):
                return  # the peer is gone already, which is what was wanted


def _said(reason: Exception) -> str:
    code = getattr(reason, "abbreviation", None)
    if code == "VI_ERROR_TMO":
        return "time-out"
    return f"{code}" if code else str(reason) or type(reason).__name__
