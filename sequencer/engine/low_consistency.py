"""Whether a bench can stand in for a discharged pack: what its load sinks, and what its tap supplies reach."""

from __future__ import annotations

from drivers.bench_file import BenchFile
from drivers.text.binding import Bound
from drivers.text.faults import Faults
from drivers.text.si import si
from sequencer.engine.targets import weak_offsets
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure
from sequencer.model.steps import StartLow

Where = tuple[str | int, ...]
REMEDY = "start higher, or use a load that sinks its current at less"


def check(
    procedure: Bound[Procedure], place: Where, step: StartLow, pack: Bound[Pack], bench: BenchFile, faults: Faults
) -> None:
    """Add a fault for each start voltage that the bench cannot play, with what would help."""
    cells = pack.model.cells
    for number, cell_V in enumerate(step.voltages):
        _check_sunk(procedure, (*place, "voltages", number), cells * cell_V, bench, faults)
    if step.end > pack.model.ocv[-1][1]:
        told = f"{si(step.end, 'V')} lies above the pack's table, which ends at {si(pack.model.ocv[-1][1], 'V')}"
        faults.add(procedure.place(*place, "to"), told)
    if step.weak_cell is not None:
        _check_weak(procedure, (*place, "weak_cell"), step.weak_cell, step.cell_voltage, cells, bench, faults)


def _check_sunk(procedure: Bound[Procedure], place: Where, node_V: float, bench: BenchFile, faults: Faults) -> None:
    name, _, dialect = bench.at("node.load")
    least_V = dialect.least.get("voltage", 0.0)
    if node_V < least_V:
        told = f"{si(node_V, 'V')} at the node is less than the load '{name}' can sink its current at"
        faults.add(procedure.place(*place), f"{told}, {si(least_V, 'V')}: {REMEDY}")


def _check_weak(
    procedure: Bound[Procedure],
    place: Where,
    weak_V: float,
    others_V: float,
    cells: int,
    bench: BenchFile,
    faults: Faults,
) -> None:
    where = procedure.place(*place)
    taps = bench.bench.wiring.taps
    if not taps or bench.bench.wiring.node.contacts is None:
        faults.add(where, "the bench has no 'taps' or no 'node.contacts' in its wiring: no cell can be low alone")
        return
    if cells < 2:
        faults.add(where, "a pack of one cell has no other cells to be normal beside a weak one")
        return
    for number in range(min(len(taps), cells - 1)):
        name, _, dialect = bench.at(f"taps.{number}.supply")
        least_V = dialect.least.get("voltage", 0.0)
        if weak_V < least_V:
            told = f"{si(weak_V, 'V')} is less than the tap supply '{name}' gives, {si(least_V, 'V')}"
            faults.add(where, f"{told}: a higher 'weak_cell', or another supply")
            return
    mean_V, _ = weak_offsets(cells, 1, weak_V, others_V)
    _check_sunk(procedure, place, cells * mean_V, bench, faults)
