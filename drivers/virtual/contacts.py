"""The virtual relay card: contacts that bounce when they close, and whose resistance walks from closing to closing."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import generator, normals
from drivers.virtual.instrument import COMMON, Instrument
from drivers.virtual.parameters import Channels
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.terminals import OPEN

OPERATE_s, RELEASE_s = 3e-3, 2e-3  # from coil to first touch, and to the gap; common practice, no source
BOUNCES = ((0.0, True), (0.4e-3, False), (0.9e-3, True), (1.3e-3, False), (1.6e-3, True), (1.8e-3, False), (2e-3, True))
STEP = 0.3  # of the walk's width, standard deviation from closing to closing
POWER_WALK_ohm = 3e-3  # of a power contact; common practice, no source
POWER = frozenset({"b_plus", "b_minus", "precharge"})


@dataclass
class _Relay:
    """`contact`: what it closes, by name; `resistances`: of its closings, one after the other."""

    contact: str
    welds: bool
    resistances: Iterator[float]
    coil: bool = False
    closed_once: bool = False
    moves: int = field(default=0)


class Contacts(Instrument):
    family = "contacts"

    def __init__(
        self,
        name: str,
        circuit: Circuit,
        contacts: Mapping[int, str],
        seed: int,
        scale: float,
        walk_ohm: float,
        welded: int | None = None,
    ) -> None:
        """`contacts`: what each channel closes; `walk_ohm`: width of a signal contact's walk; `welded`: a channel."""
        super().__init__(name, circuit)
        width = min(scale, 1.0)
        self._relays = {
            channel: _Relay(
                contact,
                channel == welded,
                _walk(seed, name, channel, width * (POWER_WALK_ohm if contact in POWER else walk_ohm)),
            )
            for channel, contact in sorted(contacts.items())
        }
        self.tree = Tree((*COMMON, *_commands(Channels(tuple(self._relays)))))

    def reset(self) -> None:
        self._open(tuple(self._relays))

    def _close(self, channels: tuple[int, ...]) -> None:
        for channel in channels:
            relay = self._relays[channel]
            if not relay.coil:
                relay.coil = True
                relay.moves += 1
                self._bounce(relay, next(relay.resistances))

    def _bounce(self, relay: _Relay, ohm: float) -> None:
        if relay.welds and relay.closed_once:
            return
        for after_s, touches in BOUNCES:
            self._touch(relay, OPERATE_s + after_s, ohm if touches else OPEN)

    def _open(self, channels: tuple[int, ...]) -> None:
        for channel in channels:
            relay = self._relays[channel]
            if relay.coil:
                relay.coil = False
                if relay.welds:  # the coil lets go, the contact does not
                    continue
                relay.moves += 1
                self._touch(relay, RELEASE_s, OPEN)

    def _touch(self, relay: _Relay, after_s: float, ohm: float) -> None:
        """Let a contact touch or part after a time, unless its coil has moved again by then."""
        move = relay.moves

        def act() -> None:
            if relay.moves == move:
                relay.closed_once |= ohm != OPEN
                self.circuit.terminals.touch(relay.contact, ohm)

        self.circuit.later(after_s, act)

    def _closed(self, channels: tuple[int, ...]) -> str:
        """What the coils do; no contact is asked."""
        return ",".join(str(int(self._relays[channel].coil)) for channel in channels)

    def _opened(self, channels: tuple[int, ...]) -> str:
        return ",".join(str(int(not self._relays[channel].coil)) for channel in channels)


def _walk(seed: int, name: str, channel: int, width_ohm: float) -> Iterator[float]:
    """A walk between 0 and `width_ohm` that turns back at both ends."""
    source = generator(seed, name, f"contact {channel}")
    place, steps = float(source.uniform(0.0, 1.0)), normals(source)
    while True:
        yield place * width_ohm
        place = abs(place + STEP * next(steps)) % 2.0
        place = 2.0 - place if place > 1.0 else place


def _commands(channels: Channels) -> tuple[Command, ...]:
    one = (channels,)
    return (
        Command("ROUTe:CLOSe", "close contacts", do=Contacts._close, takes=one, ask=Contacts._closed, asks=one),
        Command("ROUTe:OPEN", "open contacts", do=Contacts._open, takes=one, ask=Contacts._opened, asks=one),
        Command("ROUTe:OPEN:ALL", "open every contact", do=Contacts.reset),
    )
