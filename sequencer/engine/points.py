"""One point of a sweep: an insertion of its own, and a control after each that did not charge.

Chargers latch faults: after one refused point every later one could read "no charge". So each point that does not
charge stands between two controls; if the one after it fails, the mains are cycled once, and if it fails again the
point counts for nothing, and before the next one a nominal pack must be charged again, or the sweep ends there.
"""

from __future__ import annotations

from dataclasses import dataclass

from drivers.roles import Deed
from sequencer.engine import fixture, insertion
from sequencer.engine.insertion import Watched
from sequencer.engine.site import Site, Situation

LATCHED = (
    "a nominal pack is no longer charged, though the mains were cycled: "
    "a fault that the charger has latched for good, or a contact that no longer closes"
)
CONTROL_SHARE = 0.05  # a control charges within this of the first one
MAINS_OFF_s = 5.0


class NoControl(Exception):
    """A nominal pack is no longer charged: nothing that follows could be told from a charger that is dead."""


@dataclass(frozen=True)
class Shown:
    """A point and whether it counts."""

    watched: Watched
    void: bool


def show(site: Site, finding: str, situation: Situation, **what: object) -> Shown:
    """Insert, watch, take out, control where it did not charge; written down as one event. Raises NoControl."""
    if not site.vouched and not controlled(site, situation.cell_V):
        raise NoControl(LATCHED)
    insertion.place(site, situation)
    watched = insertion.watch(site)
    measure_fixture_once(site, watched)
    insertion.take_out(site)
    void = not watched.began and not controlled(site, situation.cell_V)
    site.loop.event(
        "point",
        finding=finding,
        start_s=round(watched.start_s, 3),
        end_s=round(watched.end_s, 3),
        watched_s=watched.watch_s,
        label=watched.seen.label,
        void=void,
        **what,
    )
    return Shown(watched, void)


def measure_fixture_once(site: Site, watched: Watched) -> None:
    if watched.seen.kind != "charges" or site.fixture_ohm is not None:
        return
    assert site.settling_s is not None
    site.fixture_ohm = fixture.measure_fixture(site.loop, site.zero_V, site.settling_s, site.pack, site.forced_delay)


def controlled(site: Site, cell_V: float) -> bool:
    """Whether a nominal pack is charged as it was at first, with one cycle of the mains if it is not."""
    if control(site, cell_V):
        return True
    cycle_mains(site)
    return control(site, cell_V)


def control(site: Site, cell_V: float) -> bool:
    """One insertion of a nominal pack."""
    insertion.place(site, site.nominal(cell_V))
    watched = insertion.watch(site)
    measure_fixture_once(site, watched)
    good = is_good(site, watched)
    if not good:
        insertion.prove_shunt(site)
    insertion.take_out(site)
    site.vouched = good
    site.loop.event("control", start_s=round(watched.start_s, 3), end_s=round(watched.end_s, 3), good=good)
    return good


def is_good(site: Site, watched: Watched) -> bool:
    """Whether what was watched is a good control; the first one sets what the others are held against."""
    estimate = watched.seen.current
    if watched.seen.kind != "charges" or estimate is None:
        return False
    if site.control_A is None:
        site.hold_controls_against(estimate.value)
    first_A = site.control_A or estimate.value
    return abs(estimate.value - first_A) <= CONTROL_SHARE * first_A


def give_up(site: Site, finding: str, why: str) -> str:
    """Write down why what is left of a sweep or walk is not shown; returns it as the step's outcome."""
    site.loop.event("given-up", finding=finding, why=why)
    return why


def cycle_mains(site: Site, why: str = "a control failed: the mains are cycled once") -> None:
    """Mains off and on again: what a latched charger may need."""
    site.loop.event("note", text=why)
    site.loop.set(Deed(site.bench.mains, "off"))
    site.loop.observe(MAINS_OFF_s)
    site.loop.set(Deed(site.bench.mains, "on"))
    site.loop.observe(site.specification.dwell.clear)
