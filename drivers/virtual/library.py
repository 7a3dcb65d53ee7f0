"""The virtual bench inside the process, as a VISA library object: the real pyvisa in front, no socket.

Each link behaves as a raw socket does: answers flow into the link's buffer, one client an instrument. A time-out
costs its seconds in virtual time and nothing of ours.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import count
from typing import Any

import pyvisa
from pyvisa import constants, rname
from pyvisa.constants import ResourceAttribute, StatusCode
from pyvisa.highlevel import VisaLibraryBase

from drivers.virtual.instrument import Instrument
from drivers.virtual.world import World

DEFAULT_TIMEOUT_ms = 2000
OK = StatusCode.success
_TIMEOUT = ResourceAttribute.timeout_value


@dataclass
class _Link:
    """One open session: its instrument, what it has heard, what it was set to."""

    instrument: Instrument
    attributes: dict[ResourceAttribute, Any]
    heard: bytearray = field(default_factory=bytearray)


def address(name: str) -> str:
    """The resource name of an instrument, in the canonical form that pyvisa rewrites names to."""
    return f"TCPIP0::{name}::5025::SOCKET"


class BenchLibrary(VisaLibraryBase):
    """Give it to `pyvisa.ResourceManager`. Make it by `around`; two of them are two benches apart."""

    _made = count(1)
    world: World

    @classmethod
    def around(cls, world: World) -> BenchLibrary:
        """The library of one bench. pyvisa keeps one library a path, so each bench has a path of its own."""
        library = cls(f"virtual bench {next(cls._made)}")
        assert isinstance(library, BenchLibrary)
        library.world = world
        library._instruments = {address(name): instrument for name, instrument in world.instruments.items()}
        library._links = {}
        library._handles = count(2)
        return library

    _instruments: dict[str, Instrument]
    _links: dict[int, _Link]
    _handles: Iterator[int]

    @property
    def addresses(self) -> dict[str, str]:
        """The resource name of each instrument of the bench."""
        return {name: address(name) for name in self.world.instruments}

    def _link(self, session: int) -> _Link:
        link = self._links.get(session)
        if link is None:
            raise pyvisa.errors.InvalidSession
        return link

    # -- what pyvisa calls ------------------------------------------------------------------------------------

    def open_default_resource_manager(self) -> tuple[Any, StatusCode]:
        return 1, self.handle_return_value(None, OK)

    def list_resources(self, session: int, query: str = "?*::INSTR") -> tuple[str, ...]:
        return rname.filter(self._instruments, query)

    def open(
        self,
        session: Any,
        resource_name: str,
        access_mode: constants.AccessModes = constants.AccessModes.no_lock,
        open_timeout: int = 0,
    ) -> tuple[Any, StatusCode]:
        """Open a link. Raises VisaIOError where there is no such instrument, or another client has it."""
        instrument = self._instruments.get(resource_name)
        if instrument is None:
            self.handle_return_value(None, StatusCode.error_resource_not_found)
        assert instrument is not None
        if any(link.instrument is instrument for link in self._links.values()):
            self.handle_return_value(None, StatusCode.error_resource_busy)
        instrument.clear_link()
        handle = next(self._handles)
        attributes: dict[ResourceAttribute, Any] = {
            ResourceAttribute.interface_type: constants.InterfaceType.tcpip,
            ResourceAttribute.resource_name: resource_name,
            ResourceAttribute.resource_class: "SOCKET",
            _TIMEOUT: DEFAULT_TIMEOUT_ms,
        }
        self._links[handle] = _Link(instrument, attributes)
        return handle, self.handle_return_value(handle, OK)  # type: ignore[arg-type]  # handles are plain numbers

    def close(self, session: int) -> StatusCode:
        self._links.pop(session, None)
        self._last_status_in_session.pop(session, None)  # type: ignore[call-overload]
        self._ignore_warning_in_session.pop(session, None)
        return OK

    def write(self, session: int, data: bytes) -> tuple[int, StatusCode]:
        link = self._link(session)
        link.heard += link.instrument.stream(data)
        self._last_status_in_session[session] = OK  # type: ignore[index]
        return len(data), OK

    def read(self, session: int, count: int) -> tuple[bytes, StatusCode]:
        """At most `count` bytes, to a line feed at most. Raises VisaIOError (time-out) where nothing was said."""
        link = self._link(session)
        if not link.heard:
            self.world.advance(self._timeout_s(link))
            return b"", self.handle_return_value(session, StatusCode.error_timeout)  # type: ignore[arg-type]
        end = link.heard.find(b"\n", 0, count) + 1
        size = end or min(count, len(link.heard))
        data = bytes(link.heard[:size])
        del link.heard[:size]
        # success_max_count_read makes pyvisa ask again, which is right: more may come, or a time-out does.
        status = StatusCode.success_termination_character_read if end else StatusCode.success_max_count_read
        self._last_status_in_session[session] = status  # type: ignore[index]
        return data, status

    @staticmethod
    def _timeout_s(link: _Link) -> float:
        value = int(link.attributes[_TIMEOUT])
        return 0.0 if value in (constants.VI_TMO_IMMEDIATE, constants.VI_TMO_INFINITE) else value / 1000.0

    def clear(self, session: int) -> StatusCode:
        link = self._link(session)
        link.heard.clear()
        link.instrument.clear_link()
        return OK

    def get_attribute(self, session: int, attribute: Any) -> tuple[Any, StatusCode]:
        attributes = self._link(session).attributes
        if attribute not in attributes:
            self.handle_return_value(session, StatusCode.error_nonsupported_attribute)  # type: ignore[arg-type]
        return attributes[attribute], OK

    def set_attribute(self, session: int, attribute: Any, attribute_state: Any) -> StatusCode:
        self._link(session).attributes[attribute] = attribute_state
        return OK

    def disable_event(self, session: int, event_type: Any, mechanism: Any) -> StatusCode:
        return OK

    def discard_events(self, session: int, event_type: Any, mechanism: Any) -> StatusCode:
        return OK
