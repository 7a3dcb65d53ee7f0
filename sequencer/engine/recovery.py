"""A link lost in the middle of a run: energy off first, then the link afresh, then the step once more from its start.

Who answers is proven before anything is said to it; ranges, limits and protections are set and read back as at the
start of a run. What was seen in the broken step counts for nothing. A link is never cleared, always opened anew.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

from drivers.exchange import Job
from drivers.open_bench import OPEN_PATIENCE_s, OpenBench
from drivers.safe import to_safe_state
from drivers.trouble import BenchFault, InstrumentFault, LinkFault, ReplyFault
from sequencer.engine import fixture, points
from sequencer.engine.guard import LinkLost, Trip
from sequencer.engine.loop import Interrupted
from sequencer.engine.site import Site
from sequencer.model.procedure import Step

PAUSES_s = (0.3, 1.0, 3.0)  # before each try: three of them within five seconds
GONE = "a nominal pack is no longer charged as it was before the link was lost, though the mains were cycled"


def lost_link(fault: Exception) -> BenchFault | None:
    """The link whose loss this is; None for a fault of any other kind, which ends the run."""
    if isinstance(fault, LinkLost):
        return fault.fault
    return fault if isinstance(fault, LinkFault | ReplyFault) else None


def again_from(steps: Sequence[Step], broken: int) -> int:
    """Index of the step to go on from: what needs the pack that was in begins with putting it in anew."""
    if steps[broken].kind == "remove":
        return broken + 1  # the way to the safe state has taken the pack out
    if steps[broken].insert is None:
        for index in reversed(range(broken)):
            if steps[index].kind == "remove":
                break
            if steps[index].insert is not None:
                return index
    return broken


def recover(site: Site, fault: Trip | BenchFault, says: Callable[[str], None], alarm: Callable[[str], None]) -> str:
    """Energy off and every link open again; returns the instrument whose link was lost.

    Raises what ends the run: the loss, of the kind it was and with what came of it; or Interrupted.
    """
    lost = lost_link(fault)
    assert lost is not None
    try:
        _recover(site, lost, says, alarm)
    except BenchFault as told:
        if isinstance(fault, LinkLost):
            raise LinkLost(fault.quantity, told) from fault
        raise
    return lost.instrument


def _recover(site: Site, lost: BenchFault, says: Callable[[str], None], alarm: Callable[[str], None]) -> None:
    loop, bench = site.loop, site.bench
    loop.event("link-lost", instrument=lost.instrument, what=lost.what)
    says(f"lost {lost.instrument} ({lost.what}): energy off, then the link is opened anew")
    safe = to_safe_state(bench, alarm)
    if safe.alarm:
        raise lost
    tries = _open_anew(site, lost)
    if not safe.verified:  # a witness was missing; now it can be asked
        safe = to_safe_state(bench, alarm)
    if not safe.verified:
        raise lost
    loop.event("link-recovered", instrument=lost.instrument, tries=tries, words=safe.words)
    loop.start_afresh()
    site.forget_fixture()
    fixture.prepare(bench, site.pack, site.specification)
    says(f"{lost.instrument} answers again, as the one it was; the step is repeated")


def _open_anew(site: Site, lost: BenchFault) -> int:
    """How many tries it took until every link stood. Raises the loss after the last, or what answers instead."""
    clock = site.bench.clock
    for tries, pause_s in enumerate(PAUSES_s, 1):
        clock.wait_until(clock.now() + pause_s)
        if site.loop.stop.why is not None:
            raise Interrupted(site.loop.stop.why)
        faults = _closed(site.bench)
        stranger = next((fault for fault in faults if isinstance(fault, InstrumentFault)), None)
        if stranger is not None:
            raise stranger
        if not faults:
            return tries
    raise LinkFault(lost.instrument, f"{lost.what}; not to be opened anew in {len(PAUSES_s)} tries ({faults[0].what})")


def _closed(bench: OpenBench) -> list[BenchFault]:
    """Open what is closed, one try each; what could not be opened."""
    jobs = [Job(name, (), 0, reopen=True) for name in bench.file.bench.used()]
    return [reply.fault for reply in bench.exchange(jobs, OPEN_PATIENCE_s) if reply.fault is not None]


def control_again(site: Site) -> None:
    """A control point before a repeated step. Raises InstrumentFault where the charger no longer charges as before."""
    if site.control_A is None or site.control_cell_V is None:
        return  # nothing was ever charged: the insertion that follows is the first to tell
    if not points.controlled(site, site.control_cell_V):  # not what was in last: that may be a discharged pack
        raise InstrumentFault(site.bench.mains.name, GONE)
