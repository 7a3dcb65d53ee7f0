"""What a run will need and how long it will take, worked out before anything is touched."""

from __future__ import annotations

from dataclasses import dataclass

from sequencer.engine import fixture, methods
from sequencer.engine.inputs import Inputs
from sequencer.engine.plan_sweeps import Sweeping, Times
from sequencer.engine.standin import Events, Follow, StandIn
from sequencer.engine.targets import passed_over
from sequencer.model.pack import Pack
from sequencer.model.procedure import FullCharge, Step
from sequencer.model.specification import Specification

STEP_s = 1.0
FIRST_s = (
    fixture.SETTLE_s + 2 * fixture.MEAN_s + 0.5
)  # the first insertion also settles, reads zeros, measures the fixture


@dataclass(frozen=True)
class Plan:
    """Roles with the instrument that plays each, insertions, seconds of bench time step by step, notes."""

    roles: tuple[tuple[str, str, str], ...]  # place in the wiring, instrument, dialect
    steps: tuple[tuple[str, float], ...]
    insertions: int
    notes: tuple[str, ...]

    @property
    def bench_s(self) -> float:
        return sum(seconds for _, seconds in self.steps)


def plan_of(inputs: Inputs) -> Plan:
    """Predict a run from the specification's dwell times and an ideal charger that keeps it."""
    pack, specification, bench = inputs.pack.model, inputs.specification.model, inputs.bench
    stand_in = StandIn.inserted(pack, pack.ocv[0][1])
    steps: list[tuple[str, Times]] = []
    first = True
    for step in inputs.procedure.model.steps:
        if step.insert is not None:
            stand_in = StandIn.inserted(pack, step.insert.cell_voltage)
        steps.append((step.kind, _times(step, stand_in, Sweeping(specification, pack), first)))
        first = first and step.insert is None
    roles = {name: (where, name, bench.dialect(name).name) for where, name in reversed(bench.bench.wired())}
    return Plan(
        roles=tuple(roles[name] for name in bench.bench.used()),
        steps=tuple((kind, times.seconds) for kind, times in steps),
        insertions=sum(times.insertions for _, times in steps),
        notes=tuple(_notes(inputs)),
    )


def _times(step: Step, stand_in: StandIn, sweeping: Sweeping, first: bool) -> Times:
    specification, pack = sweeping.specification, sweeping.pack
    if passed_over(step, specification) is not None:
        return Times()
    if step.insert is not None:
        taken_out = Times(0, -2 * specification.dwell.clear)  # that is the 'remove' step's
        return sweeping.charging + taken_out + (Times(0, FIRST_s) if first else Times())
    if step.charge is not None:
        return Times(0, charge_s(step.charge, stand_in, pack, specification))
    if step.sweep_id is not None:
        return sweeping.sweep_id(step.sweep_id)
    if step.sweep_temperature is not None:
        return sweeping.sweep_temperature(step.sweep_temperature)
    if step.raise_cell is not None:
        return sweeping.raise_cells(step.raise_cell)
    if step.watch_taps is not None:
        return sweeping.watch_taps(step.watch_taps)
    if step.start_low is not None:
        return sweeping.start_low(step.start_low)
    return Times(0, 2 * specification.dwell.clear)


def charge_s(step: FullCharge, stand_in: StandIn, pack: Pack, specification: Specification) -> float:
    """Seconds that an ideal charger of this specification takes on the stand-in, with what is watched after it."""
    events = Events.of(specification, step.compression)
    follow = Follow(pack.resistance, 0.0, 0, 1.0, STEP_s)
    charger, time_s = _Ideal(specification, pack), 0.0
    while time_s < step.longest:
        current_A, charger_V = charger.answer(stand_in.ocv_V + stand_in.relaxation_V)
        if current_A <= 0:
            break
        stand_in.choose_compression(time_s, charger_V, current_A, events)
        stand_in.move(STEP_s, current_A, follow)
        time_s += STEP_s
    hold_s = max(3.0, 3.0 * specification.dwell.response)
    return time_s + specification.dwell.response + hold_s + step.after


@dataclass
class _Ideal:
    """A charger that does exactly what its specification declares."""

    specification: Specification
    pack: Pack
    stage: int = 0

    def answer(self, open_V: float) -> tuple[float, float]:
        """Current and charger-side voltage at an open-circuit voltage; 0 A once it has ended."""
        charge, cells = self.specification.charge, self.pack.cells
        while self.stage < len(charge.stages):
            stage = charge.stages[self.stage]
            current_A = stage.current.nominal or stage.current.high or 0.0
            charger_V = open_V + current_A * self.pack.resistance
            band = stage.threshold_per_cell or charge.voltage_per_cell or charge.end_voltage_per_cell
            top_V = (
                cells * (band.nominal or band.high or self.pack.ocv[-1][1]) if band else cells * self.pack.ocv[-1][1]
            )
            if charger_V < top_V:
                return current_A, charger_V
            self.stage += 1
        return self._constant_voltage(open_V)

    def _constant_voltage(self, open_V: float) -> tuple[float, float]:
        charge = self.specification.charge
        if charge.voltage_per_cell is None:
            return 0.0, open_V
        hold_V = self.pack.cells * (charge.voltage_per_cell.nominal or charge.voltage_per_cell.high or 0.0)
        current_A = (hold_V - open_V) / self.pack.resistance
        cutoff = charge.cutoff
        ends_A = (
            (cutoff.nominal or cutoff.high or 0.0) if cutoff else methods.ENDED * self.specification.largest_declared_A
        )
        return (current_A, hold_V) if current_A > ends_A else (0.0, open_V)


def _notes(inputs: Inputs) -> list[str]:
    notes = []
    wiring = inputs.bench.bench.wiring.node
    if wiring.ballast < 0.5 * inputs.pack.model.resistance:
        notes.append(
            "the ballast carries less than half of the pack's resistance: the stand-in must follow more slowly"
        )
    missing = inputs.bench.bench.hardware.missing()
    if missing:
        notes.append(f"no {', no '.join(missing)} declared: protection hangs on the program alone")
    for step in inputs.procedure.model.steps:
        why = passed_over(step, inputs.specification.model)
        if why is not None:
            notes.append(f"{step.kind} is passed over: {why}")
    notes += [f"not run, no start voltage lies within {text}" for text in _unshown(inputs)]
    compressed = [step.charge.compression for step in inputs.procedure.model.steps if step.charge is not None]
    if any(times > 1 for times in compressed):
        notes.append("compressed charge: times and time-based ends of the charger are not judged")
    return notes


def _unshown(inputs: Inputs) -> list[str]:
    """Declared ranges of start voltages that are judged, and that no step shows."""
    low = inputs.specification.model.low_start
    if low is None or "low_start.response" not in inputs.procedure.model.judge:
        return []
    steps = [step.start_low for step in inputs.procedure.model.steps if step.start_low is not None]
    shown_V = [cell_V for step in steps for cell_V in step.voltages]
    return [one.cell_voltage.text for one in low.starts if not any(one.holds(cell_V) for cell_V in shown_V)]
