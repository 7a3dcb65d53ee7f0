"""A bench with its links open: roles by place, one exchange, one clock."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from drivers.bench_file import BenchFile
from drivers.clock import Clock
from drivers.dialect import Dialect
from drivers.exchange import Exchange, Inline, Workers
from drivers.roles import Hands, Load, MainsSwitch, Meter, Speaker, Supply
from drivers.session import Library, Session
from drivers.trouble import BenchFault, InstrumentFault


@dataclass(frozen=True)
class Access:
    """Where the instruments of a bench answer: VISA library, address by name, the clock that rules there."""

    library: Library
    addresses: dict[str, str]
    clock: Clock
    seed: int | None = None  # of a virtual bench
    charger: str | None = None  # name of the virtual charger
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

    @property
    def speakers(self) -> tuple[Speaker, ...]:
        return (self.supply, self.load, self.node_meter, self.charger_meter, self.shunt_meter, self.mains)

    @property
    def shunt_ohm(self) -> float:
        return self.file.bench.wiring.node.current.shunt_ohm

    def close(self) -> None:
        self.exchange.close()


def open_bench(file: BenchFile, access: Access) -> OpenBench:
    """Open every link and verify who answers. Raises BenchFault naming the instrument; nothing is left open then."""
    sessions = {
        name: Session(name, access.addresses[name], file.dialect(name), access.library)
        for _, name in file.bench.wired()
    }
    try:
        for session in sessions.values():
            session.open()
    except BenchFault:
        for session in sessions.values():
            session.close()
        raise
    exchange: Exchange = (Inline if access.clock.virtual else Workers)(sessions, access.clock)
    patience_s = max(file.dialect(name).timeout for name in sessions) + 0.5
    bench = _with_roles(file, exchange, Hands(exchange, patience_s), access)
    try:
        _identify(bench)
    except BenchFault:
        bench.close()
        raise
    return bench


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
    )


def _identify(bench: OpenBench) -> None:
    for speaker in bench.speakers:
        identity = bench.hands.identity(speaker)
        serial = bench.file.bench.instruments[speaker.name].serial
        if serial is not None and serial not in identity:
            raise InstrumentFault(speaker.name, f"answers as '{identity}'; serial {serial} was expected there")
        bench.identities[speaker.name] = identity
