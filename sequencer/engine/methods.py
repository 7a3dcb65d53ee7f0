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

CHARGES = 0.5  # of the lowest declared current: it charges
ENDED = 0.05  # of the first plateau


def insert(site: Site, step: Insert) -> bool:
    """Put a nominal pack in and wait for the charger; returns whether it charges.

    A charger that has charged before may have latched a fault: it gets one cycle of its mains, as after a sweep.
    """
    loop, mains_s = site.loop, site.loop.now_s
    before = site.control_A is not None and site.bench.signals.power is not None
    watched = _put_in(site, step)
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
        site.control_A = estimate.value


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
    loop.observe(step.after)
    loop.event(
        "finding-window",
        finding="charge",
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        ended="faded" if came else "time was up",
        floor_A=round(floor_A, 4),
    )
    loop.events = Events.of(specification, 1.0)
    return "the current has gone" if came else "the longest time has passed"


@dataclass
class Faded:
    """True once the current has stayed below the floor for `hold_s`."""

    floor_A: float
    hold_s: float
    since_s: float | None = None

    def __call__(self, scan: Scan) -> bool:
        if not scan.current_A.good or scan.current_A.value >= self.floor_A:
            self.since_s = None
            return False
        if self.since_s is None:
            self.since_s = scan.time_s
        return scan.time_s - self.since_s >= self.hold_s


def remove(site: Site) -> None:
    """Take the pack out."""
    insertion.take_out(site)
