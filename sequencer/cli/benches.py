"""`packmime bench ...`: look, make safe, serve."""

from __future__ import annotations

from pathlib import Path

import typer

from drivers.bench_file import BenchFile, load_bench
from drivers.open_bench import Access, open_bench, open_what_answers
from drivers.roles import LoadMode, SupplyMode
from drivers.shipped import locate
from drivers.text.faults import BadInput, Fault, Faults, Place
from drivers.text.si import si
from sequencer.cli.access import access_to, charger_for
from sequencer.cli.answers import BENCH_FAULT
from sequencer.cli.stopping import noted_signals
from sequencer.engine.inputs import FOLDERS
from sequencer.engine.loop import StopFlag

_SUPPLY = {
    SupplyMode.OFF: "off",
    SupplyMode.CONSTANT_VOLTAGE: "constant voltage",
    SupplyMode.CONSTANT_CURRENT: "current limit",
}
_LOAD = {LoadMode.OFF: "off", LoadMode.ON: "on", LoadMode.TRIPPED: "tripped"}


def _bench(text: str) -> BenchFile:
    faults = Faults()
    path = locate(text, FOLDERS["bench"], "bench", Place("BENCH"), faults)
    file = None if path is None else load_bench(Path(path), faults)
    faults.raise_if_any()
    assert file is not None
    return file


def _mark(file: BenchFile, access: Access) -> None:
    """What is seen on a virtual bench says nothing of any real one."""
    if file.bench.virtual is not None:
        typer.echo(f"REHEARSAL on a virtual bench: {access.charger}, seed {access.seed}")


def show_command(bench: str, charger: str | None) -> None:
    """Identities and output states; changes nothing on the bench."""
    file = _bench(bench)
    with access_to(file, charger_for(file, charger, None), seed=1) as access:
        _mark(file, access)
        opened = open_bench(file, access)
        try:
            for speaker in opened.speakers:
                typer.echo(f"{speaker.name:<15} {opened.identities[speaker.name]}")
            hands = opened.hands
            supply = opened.supply.read(hands.ask(opened.supply.reading("state")))
            load = opened.load.read(hands.ask(opened.load.reading("state")))
            mains = opened.mains.read(hands.ask(opened.mains.reading("state")))
            node_V = opened.node_meter.read(hands.ask(opened.node_meter.reading("volts")))
            supply_does = _SUPPLY.get(supply.mode, "unregulated")
            typer.echo(f"mains {'ON' if mains else 'off'}, supply {supply_does}, load {_LOAD[load.mode]}")
            currents = f"supply gives {si(supply.current_A, 'A')}, load takes {si(load.current_A, 'A')}"
            typer.echo(f"node {si(node_V, 'V')}, {currents}")
        finally:
            opened.close()
    missing = file.bench.hardware.missing()
    if missing:
        typer.echo(f"No {', no '.join(missing)} declared: software stops are not emergency stops.")


def safe_command(bench: str, charger: str | None) -> None:
    """The safe-state order with whatever answers, and what was seen on the way; exit 3 where it is not proven.

    Ctrl-C does not cut the walk short: it would leave the bench halfway.
    """
    from drivers.safe import to_safe_state

    file = _bench(bench)
    with access_to(file, charger_for(file, charger, None), seed=1) as access, noted_signals(StopFlag()):
        _mark(file, access)
        opened = open_what_answers(file, access)
        try:
            state = to_safe_state(opened, lambda words: typer.echo(f"\aALARM: {words}", err=True))
        finally:
            opened.close()
    for words in (*map(str, opened.lost.values()), *state.words, *state.troubles):
        typer.echo(words)
    typer.echo("Safe means de-energised, not isolated: unplug the charger before touching it.")
    if not state.verified:
        raise typer.Exit(BENCH_FAULT)


def serve_command(bench: str, charger: str, seed: int, port: int) -> None:
    """Serve until Ctrl-C. Raises BadInput for a bench that is not virtual."""
    file = _bench(bench)
    found = charger_for(file, charger, None)
    if found is None:
        raise BadInput([Fault(Place(file.bound.document.name), "only a virtual bench can be served")])
    from drivers.virtual.plan import plan_of
    from drivers.virtual.remote import VirtualServer

    ports = None if port == 0 else {name: port + number for number, name in enumerate(file.bench.used())}
    server = VirtualServer.launch(plan_of(file.bench, found.model), seed, wall=True, ports=ports)
    try:
        for name, address in server.addresses.items():
            typer.echo(f"{name:<15} {address}")
        typer.echo("Serving in wall time until Ctrl-C.")
        server.wait()
    except KeyboardInterrupt:
        typer.echo("stopped")
    finally:
        server.close()
