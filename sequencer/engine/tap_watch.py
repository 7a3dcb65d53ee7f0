"""Watching the tap currents while cells stand apart: patterns between baselines, zeros with the charger removed."""

from __future__ import annotations

from sequencer.analysis.balance import sequence
from sequencer.engine import insertion
from sequencer.engine.methods import Faded
from sequencer.engine.points import LATCHED, give_up
from sequencer.engine.site import Site
from sequencer.engine.walks import GOES_ON, begin
from sequencer.model.steps import WatchTaps

PERIODS = 3.0  # of the longest one looked for: so long each phase stands
LEFT_OUT = 1.0  # of them: the charger may need so long to notice
SHORTEST_ZERO_s, LONGEST_ZERO_s = 8.0, 30.0
ZERO_PERIODS = 2.0


def zero_s(step: WatchTaps) -> float:
    """How long the taps are read with the charger removed, each time."""
    return min(max(ZERO_PERIODS * step.longest_period, SHORTEST_ZERO_s), LONGEST_ZERO_s)


def phase_s(step: WatchTaps) -> float:
    return PERIODS * step.longest_period


def watch_taps(site: Site, step: WatchTaps) -> str:
    """Zeros, a charge begun, baselines and patterns in turn with the state of charge held, zeros again."""
    insertion.prepare(site, site.nominal(step.cell_voltage))
    _zeros(site, step, "before")
    if not begin(site, step.cell_voltage):
        return give_up(site, "balancing", LATCHED)
    outcome = _phases(site, step)
    insertion.take_out(site)
    _zeros(site, step, "after")
    return outcome


def _zeros(site: Site, step: WatchTaps, when: str) -> None:
    loop = site.loop
    begun_s = loop.now_s
    loop.closely = True
    loop.observe(zero_s(step))
    loop.closely = False
    loop.event("tap-zero", when=when, start_s=round(begun_s, 3), end_s=round(loop.now_s, 3))


def _phases(site: Site, step: WatchTaps) -> str:
    loop = site.loop
    assert loop.stand_in is not None
    loop.stand_in.held = True  # else its voltage would rise into the end of the charge meanwhile
    loop.closely = True
    outcome = "watched"
    for signs in sequence(site.pack.cells):
        if not _phase(site, step, signs):
            outcome = give_up(site, "balancing", "the charge stopped while the cells stood apart")
            break
    loop.tap_offsets_V = (0.0,) * site.pack.cells
    loop.closely = False
    return outcome


def _phase(site: Site, step: WatchTaps, signs: tuple[int, ...]) -> bool:
    """One baseline or pattern; returns whether the charge went on throughout."""
    loop = site.loop
    assert loop.last is not None
    begun_s = loop.now_s
    loop.tap_offsets_V = tuple(sign * step.offset for sign in signs)
    loop.move_taps(loop.last.charger_V.value)
    loop.look_around_next()
    floor_A = GOES_ON * (site.control_A or 0.0)
    stopped = loop.observe(phase_s(step), Faded(floor_A, 3.0 * site.specification.dwell.response))
    loop.event(
        "tap-phase",
        signs=list(signs),
        offset_V=step.offset,
        start_s=round(begun_s, 3),
        measured_s=round(begun_s + LEFT_OUT * step.longest_period, 3),
        end_s=round(loop.now_s, 3),
        charging=not stopped,
    )
    return not stopped
