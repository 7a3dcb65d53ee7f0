"""One run, from open links to a sealed record. Every way out goes through the safe state."""

from __future__ import annotations

import traceback
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from drivers.clock import wall_seconds
from drivers.open_bench import OpenBench
from drivers.safe import SafeState, to_safe_state
from drivers.trouble import BenchFault
from sequencer.engine import fixture, low_starts, methods, recovery, startup, sweeps, tap_watch, walks
from sequencer.engine.channels import CHANNELS
from sequencer.engine.guard import Bounds, Guard, Trip
from sequencer.engine.inputs import Inputs
from sequencer.engine.loop import Interrupted, Loop, RecordLost, StopFlag
from sequencer.engine.manifest import description_of, outcome_of
from sequencer.engine.pace import Pace
from sequencer.engine.record import RecordFolder
from sequencer.engine.scan import Scan
from sequencer.engine.site import Site
from sequencer.engine.slow import SlowGroup, channels_of
from sequencer.engine.standin import Events
from sequencer.engine.targets import passed_over
from sequencer.model.findings import findings_text
from sequencer.model.procedure import Step

FAST_SHARE = 10  # one rehearsal in so many runs fast throughout, and must give the same verdicts


@dataclass
class Watching:
    """What a person is shown while it runs; both are called with plain sentences and scans."""

    says: Callable[[str], None] = field(default=lambda words: None)
    scans: Callable[[Scan], None] = field(default=lambda scan: None)
    alarm: Callable[[str], None] = field(default=lambda words: None)
    confirm: Callable[[], bool] = field(default=lambda: False)  # a person says that the mains are unplugged


@dataclass(frozen=True)
class Ended:
    """How a run ended. `fault` is a bug of ours, with its traceback in the record."""

    record: Path
    ended: str
    why: str
    safe: SafeState
    sealed: bool
    performance: dict[str, float]
    fault: BaseException | None = None


@dataclass(frozen=True)
class Options:
    """What the command line adds to the files."""

    out: Path
    seed: int | None = None
    only: tuple[str, ...] = ()
    forced_delay: int | None = None  # of the stand-in: shows in a test what the stability rule protects from
    always_fast: bool = False


def run(inputs: Inputs, bench: OpenBench, options: Options, stop: StopFlag, watching: Watching) -> Ended:
    """Carry out the procedure and seal the record. Raises RecordError before anything is touched, nothing after."""
    begun = wall_seconds()
    with RecordFolder.create(options.out) as record:
        for name, document in inputs.documents().items():
            record.add_input(name, document.content)
        if bench.access.charger_file is not None:
            record.add_input("charger.yaml", bench.access.charger_file.content)
        record.add_input("findings.yaml", findings_text())
        start_utc = bench.clock.utc()
        channels = (*CHANNELS, *channels_of(bench, inputs.pack.model.cells))
        journal = record.start_journal(start_utc=start_utc, channels=channels, wall_s=wall_seconds)
        loop = _loop(inputs, bench, options, stop, record, journal, watching)
        described = description_of(inputs, bench, start_utc, options.seed)
        record.event(0.0, "run-start", **described)
        ended, why, fault = _guarded(inputs, loop, options, watching)
        safe = _to_safety(bench, loop, watching)
        loop.event("run-end", ended=ended, why=why)
    performance = _performance(loop, bench, wall_seconds() - begun)
    outcome = outcome_of(bench, ended, why, safe, loop.stand_in_words, performance)
    sealed = _seal(record, {**described, **outcome})
    return Ended(options.out, ended, why, safe, sealed, performance, fault)


def _loop(
    inputs: Inputs,
    bench: OpenBench,
    options: Options,
    stop: StopFlag,
    record: RecordFolder,
    journal: Any,
    watching: Watching,
) -> Loop:
    specification, pack = inputs.specification.model, inputs.pack.model
    wiring = bench.file.bench.wiring.node
    fast = options.always_fast or not bench.clock.virtual or (options.seed or 1) % FAST_SHARE == 0
    return Loop(
        bench=bench,
        record=record,
        journal=journal,
        guard=Guard(Bounds.of(bench.file.bench.limits, pack), wiring.ballast + wiring.current.shunt_ohm),
        pace=Pace(bench.clock.now(), specification.dwell.response, fast).moved(bench.clock.now()),
        stop=stop,
        events=Events.of(specification, 1.0),
        on_scan=watching.scans,
        slow=SlowGroup(bench, pack.cells - 1),
    )


def _guarded(inputs: Inputs, loop: Loop, options: Options, watching: Watching) -> tuple[str, str, BaseException | None]:
    """Run the steps; whatever happens becomes a word and a sentence."""
    try:
        _prepare(inputs, loop, watching)
        return "complete", _steps(inputs, loop, options, watching), None
    except Trip as trip:
        loop.event("trip", **trip.as_dict())
        return "trip", str(trip), None
    except Interrupted as interrupted:
        return "stopped", str(interrupted), None
    except BenchFault as fault:
        loop.event("bench-fault", instrument=fault.instrument, what=fault.what)
        return "bench fault", str(fault), None
    except RecordLost as lost:
        return "bench fault", f"the record cannot be written any more: {lost}", None
    except BaseException as fault:  # a bug of ours, or somebody's sys.exit: into the record, the safe state, exit 70
        loop.event("internal-fault", traceback=traceback.format_exc())
        return "internal fault", f"{type(fault).__name__}: {fault}", fault


def _prepare(inputs: Inputs, loop: Loop, watching: Watching) -> None:
    watching.says("looking at what the outputs do now")
    state = startup.drive_down(loop.bench)
    if state is not None:
        loop.event("note", text="outputs were on at the start and were driven down: " + "; ".join(state.words))
        if not state.verified:
            raise BenchFault("bench", "outputs were on at the start and could not be proven off")
    watching.says("fixing ranges, arming protections")
    fixture.prepare(loop.bench, inputs.pack.model, inputs.specification.model)
    startup.refuse_foreign_voltage(loop.bench)


def _steps(inputs: Inputs, loop: Loop, options: Options, watching: Watching) -> str:
    curve = None if inputs.curve is None else inputs.curve.model
    site = Site(loop, inputs.pack.model, inputs.specification.model, curve, options.forced_delay)
    kept = _kept(inputs.procedure.model.steps, options.only)
    steps = inputs.procedure.model.steps
    index, broken = 0, set[int]()
    while index < len(steps):
        if index + 1 not in kept:
            loop.event("step-left-out", step=index + 1, does=steps[index].kind)
            index += 1
            continue
        why = passed_over(steps[index], site.specification)
        if why is not None:
            loop.event("step-passed-over", step=index + 1, does=steps[index].kind, why=why)
            index += 1
            continue
        try:
            outcome = _step(steps[index], index + 1, site, watching)
        except (Trip, BenchFault) as fault:
            if recovery.lost_link(fault) is None or index in broken:  # lost twice in one step: no bench to be trusted
                raise
            broken.add(index)
            _recovered(steps, index, site, fault, watching)
            index = recovery.again_from(steps, index)
            continue
        if outcome == "does not charge":
            return "the charger does not charge a nominal pack; nothing more can be shown of it"
        index += 1
    return "every step was carried out"


def _step(step: Step, number: int, site: Site, watching: Watching) -> str:
    words = _words(step)
    watching.says(words)
    site.loop.event("step-start", step=number, does=step.kind, words=words)
    outcome = _do(step, site)
    site.loop.event("step-end", step=number, outcome=outcome)
    return outcome


def _recovered(steps: tuple[Step, ...], index: int, site: Site, fault: Trip | BenchFault, watching: Watching) -> None:
    """Energy off, the link anew, and a control where the charger has charged before; or raise what ends the run."""
    broken_s, does = site.loop.now_s, steps[index].kind
    name = recovery.recover(site, fault, watching.says, watching.alarm)
    site.loop.event("step-broken", step=index + 1, does=does, at_s=round(broken_s, 3), instrument=name)
    if does != "remove":
        recovery.control_again(site)


def _kept(steps: tuple[Step, ...], only: tuple[str, ...]) -> set[int]:
    """Numbers of the steps that are carried out, from 1: those asked for, and the pack put in and out around them."""
    wanted = {
        number
        for number, step in enumerate(steps, 1)
        if not only or step.kind in only or step.expect is not None or step.kind == "remove"
    }
    for number, step in enumerate(steps, 1):
        if step.insert is not None and number + 1 in wanted and steps[number].kind == "charge":
            wanted.add(number)
    return wanted


def _words(step: Step) -> str:
    if step.insert is not None:
        return f"inserting a pack at {step.insert.cell_voltage:g} V per cell, waiting for the charger"
    if step.charge is not None:
        times = step.charge.compression
        return f"charging until the charger ends it{f', up to {times:g} times faster than the pack' * (times > 1)}"
    if step.sweep_id is not None:
        return "sweeping ID resistances: bands, edges, open, short"
    if step.sweep_temperature is not None:
        return "sweeping the thermistor: where a charge starts, where it goes on, open, short"
    if step.raise_cell is not None:
        return "raising one cell after the other until the charge stops"
    if step.watch_taps is not None:
        return "watching the tap currents while the cells stand apart"
    if step.start_low is not None:
        volts = ", ".join(f"{cell_V:g}" for cell_V in sorted(step.start_low.voltages, reverse=True))
        return f"starting a discharged pack, at {volts} V per cell"
    return "taking the pack out"


def _do(step: Step, site: Site) -> str:
    if step.insert is not None:
        return "charges" if methods.insert(site, step.insert) else "does not charge"
    if step.charge is not None:
        return methods.charge(site, step.charge)
    if step.sweep_id is not None:
        return sweeps.sweep_id(site, step.sweep_id)
    if step.sweep_temperature is not None:
        started = sweeps.sweep_starts(site, step.sweep_temperature)
        return f"{started}; {walks.walk_temperatures(site, step.sweep_temperature)}"
    if step.raise_cell is not None:
        return walks.raise_cells(site, step.raise_cell)
    if step.watch_taps is not None:
        return tap_watch.watch_taps(site, step.watch_taps)
    if step.start_low is not None:
        return low_starts.start_low(site, step.start_low)
    methods.remove(site)
    return "removed"


def _to_safety(bench: OpenBench, loop: Loop, watching: Watching) -> SafeState:
    watching.says("going to the safe state")
    try:
        safe = to_safe_state(bench, watching.alarm)
        while safe.alarm and watching.confirm():
            loop.event("note", text="a person confirmed the alarm; the safe state is walked again")
            safe = to_safe_state(bench, watching.alarm)
    except BaseException as fault:  # a bug on the way to safety must be said, not lost
        safe = SafeState(words=[f"NOT SAFE: {type(fault).__name__}: {fault}"], troubles=[traceback.format_exc()])
    loop.event("safe-state", verified=safe.verified, words=safe.words, troubles=safe.troubles)
    return safe


def _performance(loop: Loop, bench: OpenBench, wall_s: float) -> dict[str, float]:
    shares = loop.shares
    circuit_s = bench.access.circuit_s()
    scans = max(shares.scans, 1)
    known_s = shares.exchange_s + shares.waiting_s + shares.record_s
    return {
        "wall_s": round(wall_s, 3),
        "run_s": round(bench.clock.now(), 3),
        "run_s_per_wall_s": round(bench.clock.now() / wall_s, 1),
        "scans": float(shares.scans),
        "exchanges_per_scan": round(bench.exchange.count / scans, 2),
        "share_io": round((shares.exchange_s + shares.waiting_s - circuit_s) / wall_s, 3),
        "share_circuit": round(circuit_s / wall_s, 3),
        "share_record": round(shares.record_s / wall_s, 3),
        "share_engine": round((wall_s - known_s) / wall_s, 3),
    }


def _seal(record: RecordFolder, manifest: dict[str, Any]) -> bool:
    from sequencer.engine.durable import RecordError
    from sequencer.engine.sealing import seal

    try:
        seal(record, manifest)
    except (OSError, RecordError):
        return False  # a full disk: what was written stays readable, and `judge` seals it once there is room
    return True
