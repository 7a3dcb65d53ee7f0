"""A bench with its links open: roles by place, one exchange, one clock."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from drivers.bench_file import BenchFile
from drivers.clock import Clock
from drivers.dialect import Dialect
from drivers.exchange import Exchange, Inline, Job, Workers
from drivers.roles import Hands, Load, MainsSwitch, Meter, Speaker, Supply
from drivers.session import Library, Session
from drivers.signal_roles import Contact, Lists, PowerContacts, Resistor, SignalLine, Signals, TapLine, Thermometer
from drivers.text.document import Document
from drivers.trouble import BenchFault, LinkFault
from drivers.wiring import Channel, SignalWiring

OPEN_TRIES = 3
OPEN_PAUSE_s = 0.3
LAST_TRY_s = 4.0  # no further try begins later: whoever does not answer is named within 10 s
OPEN_PATIENCE_s = 5.0


@dataclass(frozen=True)
class Access:
    """Where the instruments of a bench answer: VISA library, address by name, the clock that rules there."""

    library: Library
    addresses: dict[str, str]
    clock: Clock
    seed: int | None = None  # of a virtual bench
    charger: str | None = None  # name of the virtual charger
    charger_file: Document | None = None  # what it was built from
    circuit_s: Callable[[], float] = field(default=lambda: 0.0)  # seconds that the virtual bench worked
    close: Callable[[], None] = field(default=lambda: None)


@dataclass
class OpenBench:
    """Roles with live links."""

    file: BenchFile
    supply: Supply
    load: Load
    node_meter: Meter
    charger_meter: Meter
    shunt_meter: Meter
    mains: MainsSwitch
    hands: Hands
    exchange: Exchange
    clock: Clock
    access: Access
    identities: dict[str, str] = field(default_factory=dict)
    lost: dict[str, BenchFault] = field(default_factory=dict)  # what could not be opened, by instrument
    signals: Signals = field(default_factory=Signals)

    @property
    def speakers(self) -> tuple[Speaker, ...]:
        main = (self.supply, self.load, self.node_meter, self.charger_meter, self.shunt_meter, self.mains)
        return (*main, *self.signals.speakers)

    @property
    def shunt_ohm(self) -> float:
        return self.file.bench.wiring.node.current.shunt_ohm

    def close(self) -> None:
        self.exchange.close()


def open_bench(file: BenchFile, access: Access) -> OpenBench:
    """Open every link and verify who answers. Raises BenchFault naming the instruments; nothing is left open then."""
    bench = open_what_answers(file, access)
    if bench.lost:
        bench.close()
        first, *others = bench.lost.values()
        raise type(first)(first.instrument, "\n  ".join([first.what, *map(str, others)]))
    return bench


def open_what_answers(file: BenchFile, access: Access) -> OpenBench:
    """Open every link that can be opened, all side by side in wall time; the others stand in `lost` with their fault.

    For the way to the safe state, to which one dead meter is no obstacle. Nobody but the one expected is spoken to.
    """
    sessions = {name: _session(file, access, name) for _, name in file.bench.wired()}
    exchange: Exchange = (Inline if access.clock.virtual else Workers)(sessions, access.clock)
    patience_s = max(file.dialect(name).timeout for name in sessions) + 0.5
    bench = _with_roles(file, exchange, Hands(exchange, patience_s), access)
    _open_links(bench, list(sessions))
    bench.identities.update({name: one.identity for name, one in sessions.items() if one.identity is not None})
    return bench


def _session(file: BenchFile, access: Access, name: str) -> Session:
    """What an earlier user left in an error queue must not be taken for the answer to a setting of ours."""
    dialect = file.dialect(name)
    clear = Speaker(name, dialect).setting("clear").messages
    return Session(name, access.addresses[name], dialect, access.library, file.bench.instruments[name].serial, clear)


def _open_links(bench: OpenBench, names: list[str]) -> None:
    """OPEN_TRIES for each link, for one-client instruments need a moment after another client, such as the probe."""
    begun_s = bench.clock.now()
    for _ in range(OPEN_TRIES):
        replies = bench.exchange([Job(name, (), 0, reopen=True) for name in names], OPEN_PATIENCE_s)
        for reply in replies:
            bench.lost.pop(reply.instrument, None)
            if reply.fault is not None:
                bench.lost[reply.instrument] = reply.fault
        names = [name for name, fault in bench.lost.items() if isinstance(fault, LinkFault)]
        if not names or bench.clock.now() - begun_s > LAST_TRY_s:
            return
        bench.clock.wait_until(bench.clock.now() + OPEN_PAUSE_s)


def _with_roles(file: BenchFile, exchange: Exchange, hands: Hands, access: Access) -> OpenBench:
    def named(where: str) -> tuple[str, Dialect]:
        name, _, dialect = file.at(where)
        return name, dialect

    return OpenBench(
        file=file,
        supply=Supply(*named("node.supply")),
        load=Load(*named("node.load")),
        node_meter=Meter(*named("node.voltage")),
        charger_meter=Meter(*named("node.charger_voltage")),
        shunt_meter=Meter(*named("node.current.meter")),
        mains=MainsSwitch(*named("mains.switch")),
        hands=hands,
        exchange=exchange,
        clock=access.clock,
        access=access,
        signals=_signals(file),
    )


def _signals(file: BenchFile) -> Signals:
    """The small contacts' roles, as far as the bench has them."""
    wiring = file.bench.wiring

    def contact(channel: Channel) -> Contact:
        return Contact(Speaker(channel.instrument, file.dialect(channel.instrument)), channel.channel)

    def lists(channel: Channel) -> Lists:
        return Lists(channel.instrument, file.dialect(channel.instrument))

    def line(part: SignalWiring | None) -> SignalLine | None:
        if part is None:
            return None
        resistor = Resistor(part.resistor, file.dialect(part.resistor))
        return SignalLine(resistor, contact(part.contact), lists(part.sense), part.sense.channel)

    power, ambient = wiring.node.contacts, wiring.ambient
    return Signals(
        power=None if power is None else PowerContacts(*map(contact, (power.b_plus, power.b_minus, power.precharge))),
        id=line(wiring.id),
        thermistor=line(wiring.thermistor),
        taps=tuple(
            TapLine(
                lists(tap.supply),
                tap.supply.channel,
                lists(tap.meter),
                tap.meter.channel,
                tap.shunt_ohm,
                contact(tap.contact),
            )
            for tap in wiring.taps
        ),
        thermometer=None if ambient is None else Thermometer(ambient.thermometer, file.dialect(ambient.thermometer)),
    )
