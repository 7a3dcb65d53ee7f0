"""A bench file together with the dialects it names: read, and checked against each other."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from drivers.bench import Bench, Instrument, Trouble
from drivers.dialect import Dialect
from drivers.shipped import locate
from drivers.text.binding import Bound, bind
from drivers.text.document import read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.nearest import unknown

DIALECTS = Path(__file__).parent / "dialects"


@dataclass(frozen=True)
class BenchFile:
    """The bench, and the dialect of each of its instruments by the instrument's name."""

    bound: Bound[Bench]
    dialects: dict[str, Bound[Dialect]]

    @property
    def bench(self) -> Bench:
        return self.bound.model

    def dialect(self, instrument: str) -> Dialect:
        return self.dialects[instrument].model

    def at(self, where: str) -> tuple[str, Instrument, Dialect]:
        """Name, entry and dialect of the instrument at a place in the wiring, such as "node.supply"."""
        name = dict(self.bench.wired())[where]
        return name, self.bench.instruments[name], self.dialect(name)


def load_bench(path: Path, faults: Faults) -> BenchFile | None:
    """Read a bench file and its dialects; every fault goes to `faults`."""
    try:
        bound = bind(Bench, read(path), "bench", faults)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None
    if bound is None:
        return None
    _check_wiring(bound, faults)
    _check_addresses(bound, faults)
    dialects = {name: _dialect(bound, name, faults) for name in bound.model.instruments}
    known = {name: dialect for name, dialect in dialects.items() if dialect is not None}
    bench_file = BenchFile(bound, known)
    _check_roles(bench_file, faults)
    _check_troubles(bench_file, faults)
    return bench_file if len(known) == len(dialects) else None


def _dialect(bound: Bound[Bench], name: str, faults: Faults) -> Bound[Dialect] | None:
    place = bound.place("instruments", name, "dialect")
    beside = Path(bound.document.name).parent
    path = locate(bound.model.instruments[name].dialect, DIALECTS, "dialect", place, faults, beside=beside)
    if path is None:
        return None
    try:
        return bind(Dialect, read(path), "dialect", faults)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None


def _check_wiring(bound: Bound[Bench], faults: Faults) -> None:
    """Every instrument exists, and no two places share an instrument or a channel of one."""
    bench = bound.model
    used: dict[str, str] = {}
    for where, what, _ in bench.wiring.places():
        place, name = _place(bound, where), what if isinstance(what, str) else what.instrument
        if name not in bench.instruments:
            faults.add(place, unknown(name, bench.instruments, "instrument"))
        elif str(what) in used:
            need = "an instrument" if isinstance(what, str) else "a channel"
            faults.add(place, f"'{what}' stands at {used[str(what)]} already; each place needs {need} of its own")
        used.setdefault(str(what), where)


def _place(bound: Bound[Bench], where: str) -> Place:
    """The place in the file of a place in the wiring, such as "taps.0.supply"."""
    return bound.place("wiring", *(int(part) if part.isdigit() else part for part in where.split(".")))


def _check_addresses(bound: Bound[Bench], faults: Faults) -> None:
    bench = bound.model
    seen: dict[str, str] = {}
    for name, part in bench.instruments.items():
        place = bound.place("instruments", name, "address")
        if bench.virtual is None and part.address != "virtual":
            _check_address(part.address, place, faults)
            first = seen.setdefault(_canonical(part.address), name)
            if first != name:
                faults.add(place, f"'{first}' has this address already; one instrument cannot play two roles")
        if bench.virtual is None and part.address == "virtual":
            faults.add(place, "the address 'virtual' needs a bench with a 'virtual' section")
        if bench.virtual is not None and part.address != "virtual":
            faults.add(place, "a bench with a 'virtual' section drives no hardware: the address must be 'virtual'")


def _canonical(address: str) -> str:
    """The same for addresses that VISA takes for the same: letters of either case, interface 0 left out."""
    return re.sub(r"^([A-Z]+)0*(?=::)", r"\1", address.strip().upper())


def _check_address(address: str, place: Place, faults: Faults) -> None:
    """Only what no VISA library can mean is refused; the rest shows when the link is opened."""
    parts = address.split("::")
    if len(parts) < 2 or not all(part.strip() for part in parts):
        expected = 'such as "TCPIP::192.0.2.11::5025::SOCKET"'
        faults.add(place, f'"{address}" is not a VISA resource name; expected {expected}')
    elif parts[-1].upper() == "SOCKET" and not (len(parts) == 4 and parts[2].isdecimal() and 0 < int(parts[2]) < 65536):
        faults.add(place, f'"{address}": expected a host and a port from 1 to 65535 before ::SOCKET')


def _check_roles(bench_file: BenchFile, faults: Faults) -> None:
    for where, what, role in bench_file.bench.wiring.places():
        name = what if isinstance(what, str) else what.instrument
        dialect = bench_file.dialects.get(name)
        if dialect is not None and dialect.model.role != role:
            told = f"'{name}' speaks '{dialect.model.name}', the dialect of a {dialect.model.role}"
            faults.add(_place(bench_file.bound, where), f"{told}; a {role} is needed here")


def _check_troubles(bench_file: BenchFile, faults: Faults) -> None:
    """Of an instrument or not, as it belongs; what cannot be taken back lasts for good."""
    bench = bench_file.bench
    for number, trouble in enumerate(bench.virtual.troubles if bench.virtual is not None else ()):
        here = ("virtual", "troubles", number)
        needs = trouble.does in ("mute", "overload")
        if needs and trouble.instrument is None:
            faults.add(bench_file.bound.place(*here, "does"), f"'{trouble.does}' needs an 'instrument'")
        elif trouble.instrument is not None:
            _check_troubled(bench_file, trouble, bench_file.bound.place(*here, "instrument"), faults)
        if trouble.lasts is not None and trouble.does in ("load-trips", "mains-open", "charger-starts"):
            faults.add(bench_file.bound.place(*here, "lasts"), f"'{trouble.does}' lasts for good; leave 'lasts' out")


def _check_troubled(bench_file: BenchFile, trouble: Trouble, place: Place, faults: Faults) -> None:
    name = trouble.instrument or ""
    if trouble.does not in ("mute", "overload"):
        faults.add(place, f"'{trouble.does}' is not of one instrument; leave 'instrument' out")
    elif name not in bench_file.bench.used():
        faults.add(place, unknown(name, bench_file.bench.used(), "instrument"))
    elif trouble.does == "overload" and name in bench_file.dialects and bench_file.dialect(name).role != "meter":
        faults.add(place, f"'{name}' is a {bench_file.dialect(name).role}; only a meter can be made to answer overload")
