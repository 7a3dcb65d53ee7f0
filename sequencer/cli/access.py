"""How to reach a bench: real addresses and the wall clock, or a virtual one started for the purpose."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from drivers.bench_file import BenchFile
from drivers.clock import VirtualClock, WallClock, wall_seconds
from drivers.open_bench import Access
from drivers.text.faults import Faults, Place

if TYPE_CHECKING:
    from drivers.text.binding import Bound
    from drivers.virtual.charger_file import ChargerFile


def charger_for(file: BenchFile, asked: str | None, specification: str | None) -> Bound[ChargerFile] | None:
    """The virtual charger: asked for, named by the bench, or of the specification's own name.

    None for a real bench. Raises BadInput (no such charger; a charger asked for on a real bench).
    """
    from drivers.virtual.charger_file import load_charger

    faults = Faults()
    virtual = file.bench.virtual
    if virtual is None:
        if asked is not None:
            faults.add(Place("--charger"), "this bench drives real instruments; the charger is what hangs on it")
        faults.raise_if_any()
        return None
    name = asked or virtual.charger or Path(specification or "sprayer").stem
    place = Place("--charger") if asked else file.bound.place("virtual", "charger")
    charger = load_charger(name, faults, place=place)
    faults.raise_if_any()
    return charger


@contextmanager
def access_to(file: BenchFile, charger: Bound[ChargerFile] | None, seed: int) -> Iterator[Access]:
    """Reach the bench for as long as the block lasts."""
    if charger is None:
        addresses = {name: part.address for name, part in file.bench.instruments.items()}
        yield Access(file.bench.visa, addresses, WallClock())
    elif file.bench.virtual is not None and file.bench.virtual.transport == "in-process":
        yield _in_process(file, charger, seed)
    else:
        with _over_sockets(file, charger, seed) as access:
            yield access


def _in_process(file: BenchFile, charger: Bound[ChargerFile], seed: int) -> Access:
    from drivers.virtual.library import BenchLibrary
    from drivers.virtual.world import World

    world = World.build(file.bench, charger.model, seed, wall_seconds)
    library = BenchLibrary.around(world)
    return Access(
        library,
        library.addresses,
        VirtualClock(world.advance),
        seed,
        charger.model.name,
        circuit_s=lambda: world.busy_s,
    )


@contextmanager
def _over_sockets(file: BenchFile, charger: Bound[ChargerFile], seed: int) -> Iterator[Access]:
    from drivers.virtual.plan import plan_of
    from drivers.virtual.remote import VirtualServer

    server = VirtualServer.launch(plan_of(file.bench, charger.model), seed)
    try:
        clock = VirtualClock(server.advance)
        yield Access(
            "@py", server.addresses, clock, seed, charger.model.name, circuit_s=lambda: float(server.stats()["busy_s"])
        )
    finally:
        server.close()
