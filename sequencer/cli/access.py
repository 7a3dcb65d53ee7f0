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
    from sequencer.engine.inputs import Inputs
    from sequencer.model.pack import Pack


def charger_for(
    file: BenchFile, asked: str | None, specification: str | None, pack: Bound[Pack] | None = None
) -> Bound[ChargerFile] | None:
    """The virtual charger: asked for, named by the bench, or of the specification's own name.

    None for a real bench. Raises BadInput (no such charger; a charger asked for on a real bench; where a `pack` is
    given, one for another number of cells).
    """
    from drivers.virtual.charger_file import CHARGERS, load_charger

    faults = Faults()
    virtual = file.bench.virtual
    if virtual is None:
        if asked is not None:
            faults.add(Place("--charger"), "this bench drives real instruments; the charger is what hangs on it")
        faults.raise_if_any()
        return None
    name = asked or virtual.charger or Path(specification or "sprayer").stem
    place = Place("--charger") if asked else file.bound.place("virtual", "charger")
    if not (asked or virtual.charger or (CHARGERS / f"{name}.yaml").is_file()):
        told = f"no virtual charger bears the name '{name}' of the specification"
        faults.add(Place("--charger"), f"{told}: name one, by its path or as one that ships ({', '.join(_shipped())})")
        faults.raise_if_any()
    charger = load_charger(name, faults, place=place)
    if charger is not None and pack is not None:
        _check_cells(charger, pack, faults)
    faults.raise_if_any()
    return charger


def _shipped() -> list[str]:
    from drivers.virtual.charger_file import CHARGERS

    return sorted(path.stem for path in CHARGERS.glob("*.yaml"))


def _check_cells(charger: Bound[ChargerFile], pack: Bound[Pack], faults: Faults) -> None:
    """Everything else of a charger may be wrong on purpose; for other packs it is no charger of this product at all."""
    given, wanted = charger.model.cells, pack.model.cells
    if given != wanted:
        told = f"a charger for {given} cells; the pack has {wanted} ({pack.place('cells')})"
        remedy = f"name a charger for {wanted} cells with --charger, or a pack with {given} with --pack"
        faults.add(charger.place("cells"), f"{told}; {remedy}")


def rehearsal_charger(inputs: Inputs, asked: str | None, specification: str) -> Bound[ChargerFile] | None:
    """The charger that a rehearsal with these files would use, checked as for a run; None where it would have none.

    A specification whose name no virtual charger bears is no fault: it may be meant for real instruments.
    """
    from drivers.virtual.charger_file import CHARGERS

    virtual = inputs.bench.bench.virtual
    named = asked is not None or (virtual is not None and virtual.charger is not None)
    if not named and not (CHARGERS / f"{Path(specification).stem}.yaml").is_file():
        return None
    return charger_for(inputs.bench, asked, specification, inputs.pack)


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
        charger.document,
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
            "@py",
            server.addresses,
            clock,
            seed,
            charger.model.name,
            charger.document,
            circuit_s=lambda: float(server.stats()["busy_s"]),
        )
    finally:
        server.close()
