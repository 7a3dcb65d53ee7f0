"""Whether the bench can play what the steps ask for at the small contacts, and the files agree about them."""

from __future__ import annotations

from drivers.bench_file import BenchFile
from drivers.text.binding import Bound
from drivers.text.faults import Faults
from drivers.text.si import si
from sequencer.analysis.balance import sequence
from sequencer.engine import low_consistency
from sequencer.engine.site import NOMINAL_C
from sequencer.engine.tap_watch import phase_s
from sequencer.engine.targets import ends, passed_over, sides
from sequencer.model.curves import Curve
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure
from sequencer.model.specification import Specification
from sequencer.model.steps import RaiseCell, Step, SweepId, SweepTemperature, WatchTaps


def check(
    procedure: Bound[Procedure] | None,
    specification: Bound[Specification] | None,
    pack: Bound[Pack] | None,
    bench: BenchFile | None,
    curve: Bound[Curve] | None,
    faults: Faults,
) -> None:
    """Add a fault for each pair that does not fit; files that could not be read are passed over."""
    if specification is not None and curve is not None:
        _check_curve(specification, curve.model, faults)
    if procedure is None or specification is None or pack is None or bench is None:
        return
    if not all(name in bench.dialects for _, name in bench.bench.wired()):
        return  # a place in the wiring is empty, which is a fault of its own
    _check_taps(pack, bench, faults)
    _check_nominal_id(specification, pack, bench, faults)
    for number, step in enumerate(procedure.model.steps):
        place = ("steps", number, step.kind)
        _check_start(procedure, place, step, pack, bench, faults)
        if step.sweep_id is not None:
            _check_id(procedure, place, step.sweep_id, specification, bench, faults)
        if step.sweep_temperature is not None:
            _check_temperature(procedure, place, step.sweep_temperature, specification, curve, bench, faults)
        if step.raise_cell is not None:
            _check_raise(procedure, place, step.raise_cell, pack, bench, faults)
        if step.watch_taps is not None and passed_over(step, specification.model) is None:
            _check_watch(procedure, place, step.watch_taps, specification, pack, bench, faults)
        if step.start_low is not None and passed_over(step, specification.model) is None:
            low_consistency.check(procedure, place, step.start_low, pack, bench, faults)


Where = tuple[str | int, ...]


def _check_curve(specification: Bound[Specification], curve: Curve, faults: Faults) -> None:
    window = specification.model.temperature
    assert window is not None
    low_C, high_C = curve.span_C
    for key, pair in (("start", window.start), ("run", window.run), ("release", window.release)):
        for number, band in enumerate(pair or ()):
            for celsius in (band.low, band.high):
                if celsius is not None and not low_C <= celsius <= high_C:
                    told = f"{celsius:g} °C lies outside the curve '{curve.name}' ({low_C:g} °C to {high_C:g} °C)"
                    faults.add(specification.place("temperature", key, number), told)


def _check_taps(pack: Bound[Pack], bench: BenchFile, faults: Faults) -> None:
    taps = len(bench.bench.wiring.taps)
    if taps and taps < pack.model.cells - 1:
        told = f"{taps} taps are wired; a pack of {pack.model.cells} cells has {pack.model.cells - 1} junctions"
        faults.add(bench.bound.place("wiring", "taps"), f"{told} (pack: {pack.document.name})")


def _check_nominal_id(specification: Bound[Specification], pack: Bound[Pack], bench: BenchFile, faults: Faults) -> None:
    """The pack that stands for a right one must be one that the charger is declared to charge."""
    bands, ohm = specification.model.id_bands, pack.model.id
    if bench.bench.wiring.id is None or not bands or ohm is None:
        return
    if not any(band.low_ohm <= ohm <= band.high_ohm for band in bands):
        told = f"{si(ohm, 'Ω')} lies in no band of the specification ({', '.join(band.id.text for band in bands)})"
        faults.add(pack.place("id"), f"{told}; a pack that is refused cannot be the control of anything")


def _check_start(
    procedure: Bound[Procedure], place: Where, step: Step, pack: Bound[Pack], bench: BenchFile, faults: Faults
) -> None:
    """Every voltage at which a pack is put in: within the pack's table, and one that the load can sink."""
    start = (
        step.insert or step.sweep_id or step.sweep_temperature or step.raise_cell or step.watch_taps or step.start_low
    )
    if start is None:
        return
    name, _, dialect = bench.at("node.load")
    least_V, node_V = dialect.least.get("voltage", 0.0), pack.model.cells * start.cell_voltage
    if node_V < least_V:
        told = (
            f"{si(node_V, 'V')} at the node is less than the load '{name}' can sink its current at, {si(least_V, 'V')}"
        )
        faults.add(procedure.place(*place, "cell_voltage"), f"{told}: a higher voltage, or another load")
    sweep = start if step.insert is None else None  # an insert's is checked elsewhere
    low_V, high_V = pack.model.ocv[0][1], pack.model.ocv[-1][1]
    if sweep is not None and not low_V <= sweep.cell_voltage <= high_V:
        told = f"{si(sweep.cell_voltage, 'V')} lies outside the pack's table, {low_V:g} V to {high_V:g} V"
        faults.add(procedure.place(*place, "cell_voltage"), told)


def _check_id(
    procedure: Bound[Procedure],
    place: Where,
    step: SweepId,
    specification: Bound[Specification],
    bench: BenchFile,
    faults: Faults,
) -> None:
    if not specification.model.id_bands:
        faults.add(procedure.place(*place), "the specification declares no id_bands to sweep")
    if bench.bench.wiring.id is None or bench.bench.wiring.node.contacts is None:
        faults.add(procedure.place(*place), "the bench has no 'id' resistor or no 'node.contacts' in its wiring")
        return
    outward = [side.beyond_ohm for side in sides(specification.model, step.outside)]
    _check_settable("id", bench, max(outward, default=0.0), "must be shown beyond the highest band", faults)


def _check_settable(line: str, bench: BenchFile, ohm: float, why: str, faults: Faults) -> None:
    most_ohm = bench.at(f"{line}.resistor")[2].settable.get("resistance")
    if most_ohm is not None and ohm > most_ohm:
        told = f"{si(ohm, 'Ω')} {why}; it can be set to {si(most_ohm, 'Ω')}"
        faults.add(bench.bound.place("wiring", line, "resistor"), told)


def _check_temperature(
    procedure: Bound[Procedure],
    place: Where,
    step: SweepTemperature,
    specification: Bound[Specification],
    curve: Bound[Curve] | None,
    bench: BenchFile,
    faults: Faults,
) -> None:
    window = specification.model.temperature
    if window is None:
        faults.add(procedure.place(*place), "the specification declares no temperature window to sweep")
    if bench.bench.wiring.thermistor is None or bench.bench.wiring.node.contacts is None:
        faults.add(
            procedure.place(*place), "the bench has no 'thermistor' resistor or no 'node.contacts' in its wiring"
        )
        return
    if window is None or curve is None:
        return
    pairs = [pair for pair in (window.start, window.run) if pair]
    coldest_C = min((ends(pair[0], True, step)[1] for pair in pairs), default=NOMINAL_C)
    hottest_C = max((ends(pair[1], False, step)[1] for pair in pairs), default=NOMINAL_C)
    low_C, high_C = curve.model.span_C
    for celsius in (coldest_C, hottest_C):
        if not low_C <= celsius <= high_C:
            told = f"{celsius:g} °C must be shown; the curve '{curve.model.name}' holds from {low_C:g} to {high_C:g} °C"
            faults.add(procedure.place(*place), f"{told}: take a smaller 'beyond', or a curve that goes further")
            return
    most_ohm = max(curve.model.ohm_at(celsius) for celsius in (coldest_C, hottest_C))
    _check_settable("thermistor", bench, most_ohm, f"must be shown for {coldest_C:g} °C", faults)


def _check_raise(
    procedure: Bound[Procedure], place: Where, step: RaiseCell, pack: Bound[Pack], bench: BenchFile, faults: Faults
) -> None:
    wiring = bench.bench.wiring
    if not wiring.taps or wiring.node.contacts is None:
        faults.add(procedure.place(*place), "the bench has no 'taps' or no 'node.contacts' in its wiring")
        return
    if step.end > bench.bench.limits.tap:
        told = f"{si(step.end, 'V')} lies above the bench's limit for a tap, {si(bench.bench.limits.tap, 'V')}"
        faults.add(procedure.place(*place, "to"), told)
    if pack.model.cells < 2:
        faults.add(procedure.place(*place), "a pack of one cell has no other cell to be lowered while it is raised")
    taps = [bench.at(f"taps.{number}.supply")[2] for number in range(len(wiring.taps))]
    most_V = min(dialect.settable.get("voltage", step.end) for dialect in taps)
    if step.end > most_V:
        told = f"{si(step.end, 'V')} cannot be set by the bench's tap supplies, which reach {si(most_V, 'V')}"
        faults.add(procedure.place(*place, "to"), told)
    lowest_V = step.cell_voltage - (step.end - step.cell_voltage) / max(pack.model.cells - 1, 1)
    if pack.model.cells > 1 and lowest_V < pack.model.ocv[0][1]:
        told = f"with one cell at {si(step.end, 'V')} the others fall to {si(lowest_V, 'V')}, below the pack's table"
        faults.add(procedure.place(*place, "to"), told)


def _check_watch(
    procedure: Bound[Procedure],
    place: Where,
    step: WatchTaps,
    specification: Bound[Specification],
    pack: Bound[Pack],
    bench: BenchFile,
    faults: Faults,
) -> None:
    """The charge must go on at its first current for all that time, with every cell below what stops it."""
    wiring, cells = bench.bench.wiring, pack.model.cells
    if not wiring.taps or wiring.node.contacts is None:
        faults.add(procedure.place(*place), "the bench has no 'taps' or no 'node.contacts' in its wiring")
        return
    if cells < 2:
        faults.add(procedure.place(*place), "a pack of one cell has no other cell to be balanced with")
        return
    for number in range(min(cells - 1, len(wiring.taps))):
        dialect = bench.at(f"taps.{number}.meter")[2]
        if not dialect.accuracy.voltage:
            told = f"the dialect '{dialect.name}' states no accuracy of voltage; no tap current could be judged"
            faults.add(bench.bound.place("wiring", "taps", number, "meter"), told)
    stages = specification.model.charge.stages
    current_A = stages[0].current.high or 0.0
    relaxation = pack.model.relaxation
    ohm = pack.model.resistance + (relaxation.resistance if relaxation is not None else 0.0)
    mean_V = step.cell_voltage + current_A * ohm / cells
    events_V, trip = specification.model.events_V, specification.model.tap_trip
    if events_V and mean_V >= events_V[0][0]:
        told = f"with the drop of {si(current_A, 'A')} the cells reach {si(mean_V, 'V')}; at {si(events_V[0][0], 'V')}"
        faults.add(procedure.place(*place, "cell_voltage"), f"{told} the first stage is declared to end")
    highest_V = mean_V + step.offset
    if trip is not None and trip.voltage.low is not None and highest_V >= trip.voltage.low:
        told = f"a high cell reaches {si(highest_V, 'V')}; at {si(trip.voltage.low, 'V')} it may stop the charge"
        faults.add(procedure.place(*place, "cell_voltage"), told)
    if highest_V > bench.bench.limits.tap:
        told = f"a high cell reaches {si(highest_V, 'V')}, above the bench's limit for a tap"
        faults.add(procedure.place(*place, "cell_voltage"), f"{told}, {si(bench.bench.limits.tap, 'V')}")
    seconds = len(sequence(cells)) * phase_s(step)
    charge_Ah = current_A * seconds / 3600.0
    if charge_Ah > bench.bench.limits.charge:
        told = f"{si(charge_Ah, 'Ah')} flow in {seconds / 60:.0f} min; the bench allows for"
        told = f"{told} {si(bench.bench.limits.charge, 'Ah')} in one run: a shorter period, or a higher limit there"
        faults.add(procedure.place(*place, "longest_period"), told)
