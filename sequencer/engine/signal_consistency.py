"""Whether the bench can play what the steps ask for at the small contacts, and the files agree about them."""

from __future__ import annotations

from drivers.bench_file import BenchFile
from drivers.text.binding import Bound
from drivers.text.faults import Faults
from drivers.text.measures import Band
from drivers.text.si import si
from sequencer.model.curves import Curve
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure
from sequencer.model.specification import Specification
from sequencer.model.steps import RaiseCell, SweepId, SweepTemperature


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
    _check_taps(pack, bench, faults)
    for number, step in enumerate(procedure.model.steps):
        place = ("steps", number, step.kind)
        if step.sweep_id is not None:
            _check_id(procedure, place, step.sweep_id, specification, bench, faults)
        if step.sweep_temperature is not None:
            _check_temperature(procedure, place, step.sweep_temperature, specification, curve, bench, faults)
        if step.raise_cell is not None:
            _check_raise(procedure, place, step.raise_cell, pack, bench, faults)


Where = tuple[str | int, ...]


def _check_curve(specification: Bound[Specification], curve: Curve, faults: Faults) -> None:
    window = specification.model.temperature
    assert window is not None
    low_C, high_C = curve.span_C
    for key, pair in (("start", window.start), ("run", window.run)):
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
    most_ohm = bench.at("id.resistor")[2].settable.get("resistance")
    highest = max((band.high_ohm for band in specification.model.id_bands), default=0.0) * (1 + step.outside)
    if most_ohm is not None and highest > most_ohm:
        told = f"{si(highest, 'Ω')} must be shown beyond the highest band; it can be set to {si(most_ohm, 'Ω')}"
        faults.add(bench.bound.place("wiring", "id", "resistor"), told)


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
    most_ohm = bench.at("thermistor.resistor")[2].settable.get("resistance")
    coldest_C = min(
        (_outer(band, -step.beyond) for pair in (window.start, window.run) if pair for band in pair[:1]), default=0.0
    )
    if coldest_C < curve.model.span_C[0]:
        faults.add(
            procedure.place(*place), f"{coldest_C:g} °C must be shown; the curve begins at {curve.model.span_C[0]:g} °C"
        )
    elif most_ohm is not None and curve.model.ohm_at(coldest_C) > most_ohm:
        told = f"{coldest_C:g} °C is {si(curve.model.ohm_at(coldest_C), 'Ω')}; it can be set to {si(most_ohm, 'Ω')}"
        faults.add(bench.bound.place("wiring", "thermistor", "resistor"), told)


def _outer(band: Band, by: float) -> float:
    """The side of a band that lies further out, and `by` beyond it."""
    edge = band.low if by < 0 else band.high
    return (edge if edge is not None else band.nominal or 0.0) + by


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
    lowest_V = step.cell_voltage - (step.end - step.cell_voltage) / max(pack.model.cells - 1, 1)
    if pack.model.cells > 1 and lowest_V < pack.model.ocv[0][1]:
        told = f"with one cell at {si(step.end, 'V')} the others fall to {si(lowest_V, 'V')}, below the pack's table"
        faults.add(procedure.place(*place, "to"), told)
