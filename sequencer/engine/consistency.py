"""Whether procedure, specification, pack and bench fit each other: what no file shows alone."""

from __future__ import annotations

from itertools import pairwise

from drivers.bench_file import BenchFile
from drivers.text.binding import Bound
from drivers.text.faults import Faults
from drivers.text.nearest import unknown
from drivers.text.si import si
from sequencer.engine.fixture import LOAD_SHARE, SUPPLY_SHARE, load_current_A
from sequencer.model.findings import definitions
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure
from sequencer.model.specification import Specification
from sequencer.model.steps import SWEEPS


def check(
    procedure: Bound[Procedure] | None,
    specification: Bound[Specification] | None,
    pack: Bound[Pack] | None,
    bench: BenchFile | None,
    faults: Faults,
) -> None:
    """Add a fault for each pair that does not fit; files that could not be read are passed over."""
    if procedure is not None:
        _check_findings(procedure, faults)
    if specification is not None:
        _check_rating(specification, faults)
    if procedure is not None and pack is not None:
        _check_start(procedure, pack, faults)
    if specification is not None and pack is not None:
        _check_thresholds(specification, pack, faults)
    if procedure is not None and specification is not None and pack is not None:
        _check_room(procedure, specification.model, pack.model, faults)
    if bench is None or not all(name in bench.dialects for _, name in bench.bench.wired()):
        return  # a place in the wiring is empty, which is a fault of its own
    _check_accuracy(bench, faults)
    if pack is not None:
        _check_node(pack, bench, faults)
    if specification is not None:
        _check_current(specification, bench, faults)


def _check_findings(procedure: Bound[Procedure], faults: Faults) -> None:
    known = definitions()
    made = {step.finding or SWEEPS.get(step.kind) for step in procedure.model.steps}
    for number, step in enumerate(procedure.model.steps):
        if step.finding is not None and step.finding not in {name.partition(".")[0] for name in known}:
            families = {name.partition(".")[0] for name in known}
            faults.add(procedure.place("steps", number, "finding"), unknown(step.finding, families, "finding"))
    for number, name in enumerate(procedure.model.judge):
        place = procedure.place("judge", number)
        if name not in known:
            faults.add(place, unknown(name, known, "finding"))
        elif "." in name and name.partition(".")[0] not in made:
            faults.add(
                place, f"no step makes '{name}'; give the step that shall make it 'finding: {name.partition('.')[0]}'"
            )


def _check_rating(specification: Bound[Specification], faults: Faults) -> None:
    spec = specification.model
    if spec.rating_current is not None and spec.rating_current < spec.largest_declared_A:
        told = (
            f"{si(spec.rating_current, 'A')} is below the largest declared current {si(spec.largest_declared_A, 'A')}"
        )
        faults.add(specification.place("rating_current"), told)


def _check_start(procedure: Bound[Procedure], pack: Bound[Pack], faults: Faults) -> None:
    low_V, high_V = pack.model.ocv[0][1], pack.model.ocv[-1][1]
    for number, step in enumerate(procedure.model.steps):
        if step.insert is not None and not low_V <= step.insert.cell_voltage <= high_V:
            told = f"{si(step.insert.cell_voltage, 'V')} lies outside the pack's table, {low_V:g} V to {high_V:g} V"
            faults.add(procedure.place("steps", number, "insert", "cell_voltage"), told)


def _check_room(procedure: Bound[Procedure], specification: Specification, pack: Pack, faults: Faults) -> None:
    """A full charge must begin below everything that is declared to end its first stage."""
    stages = specification.charge.stages
    if not stages or not specification.events_V:
        return
    first_A, low_V = stages[0].current.high or 0.0, specification.events_V[0][0]
    ohm = pack.resistance + (pack.relaxation.resistance if pack.relaxation is not None else 0.0)
    drop_V = first_A * ohm / pack.cells
    for number, (step, following) in enumerate(pairwise(procedure.model.steps)):
        if step.insert is None or following.charge is None or step.insert.cell_voltage + drop_V < low_V:
            continue
        told = f"{si(step.insert.cell_voltage, 'V')} and {si(drop_V, 'V')} of drop at {si(first_A, 'A')} reach"
        told += f" the declared {si(low_V, 'V')}: the first stage would be over at once"
        faults.add(procedure.place("steps", number, "insert", "cell_voltage"), told)


def _check_thresholds(specification: Bound[Specification], pack: Bound[Pack], faults: Faults) -> None:
    bound_V = pack.model.cell_bound_V
    charge = specification.model.charge
    named = [(("voltage_per_cell",), charge.voltage_per_cell), (("end_voltage_per_cell",), charge.end_voltage_per_cell)]
    for path, band in named:
        if band is not None and band.high is not None and band.high > bound_V:
            told = f"limit {si(band.high, 'V')} lies above the pack's guard bound {si(bound_V, 'V')} per cell"
            faults.add(specification.place("charge", *path), told)


def _check_accuracy(bench: BenchFile, faults: Faults) -> None:
    """What a judgement will need must be known before the run: how good each reading is."""
    for where, quantity in (
        ("node.voltage", "voltage"),
        ("node.charger_voltage", "voltage"),
        ("node.current.meter", "voltage"),
        ("node.supply", "current"),
        ("node.load", "current"),
    ):
        name, _, dialect = bench.at(where)
        if not getattr(dialect.accuracy, quantity):
            told = f"the dialect '{dialect.name}' of '{name}' states no accuracy of {quantity}; nothing could be judged"
            faults.add(bench.bound.place("wiring", *where.split(".")), told)


def _check_node(pack: Bound[Pack], bench: BenchFile, faults: Faults) -> None:
    highest_V = pack.model.cells * pack.model.ocv[-1][1]
    limit_V = bench.bench.limits.node
    if highest_V > limit_V:
        told = f"the full pack reaches {si(highest_V, 'V')}, above the bench's node limit {si(limit_V, 'V')}"
        faults.add(bench.bound.place("limits", "node"), f"{told} (pack: {pack.document.name})")
    settable_V = bench.at("node.supply")[2].settable.get("voltage")
    if settable_V is not None and 1.05 * highest_V > settable_V:
        told = f"its supply can be set to {si(settable_V, 'V')}; the full pack needs {si(1.05 * highest_V, 'V')}"
        faults.add(bench.bound.place("wiring", "node", "supply"), told)
    if pack.model.capacity > bench.bench.limits.charge:
        told = f"{si(bench.bench.limits.charge, 'Ah')} is less than the pack's capacity {si(pack.model.capacity, 'Ah')}"
        faults.add(bench.bound.place("limits", "charge"), told)
    if bench.bench.wiring.node.ballast + bench.bench.wiring.node.current.shunt_ohm > pack.model.resistance:
        told = f"ballast and shunt alone exceed the pack's resistance {si(pack.model.resistance, 'Ω')}"
        faults.add(bench.bound.place("wiring", "node", "ballast"), told)


def _check_current(specification: Bound[Specification], bench: BenchFile, faults: Faults) -> None:
    load_A = load_current_A(specification.model)
    why = f"{LOAD_SHARE:g} times the {si(specification.model.physical_current_A, 'A')} that the charger can deliver"
    for where, most_A in (
        ("node.load", bench.at("node.load")[2].settable.get("current")),
        ("node.supply", _over(bench.at("node.supply")[2].settable.get("current"))),
    ):
        if most_A is not None and load_A > most_A:
            told = f"must carry {si(load_A, 'A')} ({why}); it can be set to {si(most_A, 'A')}"
            faults.add(bench.bound.place("wiring", *where.split(".")), told)
    if specification.model.physical_current_A > bench.bench.limits.current:
        told = f"{si(bench.bench.limits.current, 'A')} is below the {si(specification.model.physical_current_A, 'A')}"
        faults.add(bench.bound.place("limits", "current"), f"{told} that the charger can deliver")


def _over(most_A: float | None) -> float | None:
    return None if most_A is None else most_A / SUPPLY_SHARE
