"""What is done on the bench, as plain functions that read like lab instructions.

A method never sleeps and never talks to an instrument by name: all waiting is `loop.observe`, so the guard is
never off duty, and every wait has an end.
"""

from __future__ import annotations

from dataclasses import dataclass

from sequencer.engine import insertion, points
from sequencer.engine.insertion import Watched
from sequencer.engine.scan import Scan
from sequencer.engine.site import Site
from sequencer.engine.standin import Events
from sequencer.model.procedure import FullCharge, Insert
from sequencer.model.specification import Specification

CHARGES = 0.5  # of the lowest declared current: it charges
ENDED = 0.05  # of the first plateau


def insert(site: Site, step: Insert) -> bool:
    """Put a nominal pack in and wait for the charger; returns whether it charges.

    A charger that has charged before may have latched a fault: it gets one cycle of its mains, as after a sweep.
    """
    loop, mains_s = site.loop, site.loop.now_s
    before = site.control_A is not None and site.bench.signals.power is not None
    watched = _put_in(site, step)
    if not _charges(site, watched):
        insertion.prove_shunt(site)
    if before and not _charges(site, watched):
        insertion.take_out(site)
        points.cycle_mains(site)
        watched = _put_in(site, step)
    start_s = watched.end_s - insertion.MEAN_s if watched.began else watched.start_s
    loop.event(
        "finding-window",
        finding="charges",
        start_s=round(start_s, 3),
        end_s=round(watched.end_s, 3),
        mains_s=round(mains_s, 3),
        began=watched.began,
        watched_s=watched.watch_s,
    )
    charges = _charges(site, watched)
    if charges:
        _first_plateau(site, watched)
    return charges


def _put_in(site: Site, step: Insert) -> Watched:
    insertion.place(site, site.nominal(step.cell_voltage, step.temperature))
    return insertion.watch(site)


def _charges(site: Site, watched: Watched) -> bool:
    low_A, _ = site.nominal_current()
    estimate = watched.seen.current
    return watched.seen.kind == "charges" and estimate is not None and estimate.value > CHARGES * low_A


def _first_plateau(site: Site, watched: Watched) -> None:
    """What is measured once: the fixture, and the current that every control is held against."""
    points.measure_fixture_once(site, watched)
    estimate = watched.seen.current
    if site.control_A is None and estimate is not None:
        site.hold_controls_against(estimate.value)


def charge(site: Site, step: FullCharge) -> str:
    """Charge until the charger ends it, its current has faded without an end, or time is up; then watch on."""
    loop, specification = site.loop, site.specification
    loop.events = Events.of(specification, step.compression)
    plateau_A = loop.last.current_A.value if loop.last is not None else 0.0
    floor_A = ENDED * plateau_A
    cutoff = specification.charge.cutoff
    if cutoff is not None and cutoff.low is not None:
        floor_A = min(floor_A, 0.5 * cutoff.low)
    faded = Faded(floor_A, max(3.0, 3.0 * specification.dwell.response))
    begun_s = loop.now_s
    came = loop.observe(step.longest, faded)
    resumed = _Resumed(floor_A)
    loop.observe(step.after, resumed)
    proper = not came or ended_as_declared(faded.before, specification, site.pack.cells)
    loop.event(
        "finding-window",
        finding="charge",
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        ended="faded" if came else "time was up",
        floor_A=round(floor_A, 4),
        resumed_s=None if resumed.since_s is None or not came else round(resumed.since_s, 3),
        as_declared=proper,
    )
    if not proper and resumed.since_s is None:
        _witness_mains(site, floor_A)
    loop.events = Events.of(specification, 1.0)
    return "the current has gone" if came else "the longest time has passed"


@dataclass
class Faded:
    """True once the current has stayed below the floor for `hold_s`."""

    floor_A: float
    hold_s: float
    since_s: float | None = None
    before: Scan | None = None  # the last one that was not below

    def __call__(self, scan: Scan) -> bool:
        if not scan.current_A.good or scan.current_A.value >= self.floor_A:
            self.since_s, self.before = None, scan
            return False
        if self.since_s is None:
            self.since_s = scan.time_s
        return scan.time_s - self.since_s >= self.hold_s


@dataclass
class _Resumed:
    """Notes when a current flows again after the end, in two scans in a row; lets the watching go on."""

    floor_A: float
    since_s: float | None = None
    _first_s: float | None = None

    def __call__(self, scan: Scan) -> bool:
        flows = scan.current_A.good and scan.current_A.value >= self.floor_A
        if flows and self._first_s is not None and self.since_s is None:
            self.since_s = self._first_s
        self._first_s = scan.time_s if flows else None
        return False


def ended_as_declared(before: Scan | None, specification: Specification, cells: int) -> bool:
    """Whether the last scan before the end shows what is declared to end a charge: its cut-off, else its voltage.

    Anything else may as well be mains that are gone: the bench sees no difference. Pure.
    """
    cutoff = specification.charge.cutoff
    if before is None or not (before.current_A.good and before.charger_V.good):
        return False
    if cutoff is not None and cutoff.high is not None:
        return before.current_A.value <= cutoff.high
    events_V = specification.events_V
    return bool(events_V) and before.charger_V.value >= cells * events_V[-1][0]


def _witness_mains(site: Site, floor_A: float) -> None:
    """After an end that nobody declared: does it charge again once its mains are cycled? Then they were there."""
    loop = site.loop
    points.cycle_mains(site, "the charge did not end as declared: the mains are cycled, to see that they are there")
    begun_s = loop.now_s
    watch_s = max(insertion.START_DELAYS * site.specification.dwell.start_delay, insertion.SHORTEST_WATCH_s)
    charges = loop.observe(watch_s, lambda scan: scan.current_A.good and scan.current_A.value >= floor_A)
    loop.event("mains-witness", charges=charges, start_s=round(begun_s, 3), end_s=round(loop.now_s, 3))


def remove(site: Site) -> None:
    """Take the pack out."""
    insertion.take_out(site)
