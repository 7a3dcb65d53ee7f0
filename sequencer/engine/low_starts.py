"""Deep-discharge starts: a discharged pack is put in at each start voltage, held there, and watched at the fast pace.

The mildest comes first. Full current into a pack that plays a discharged one harms nothing here; a charger may latch
a fault at any of them, so each that is not charged has a control after it, as every point of a sweep.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from sequencer.analysis.low_start import NOTHING_A, PULSE_A, Response, response_of
from sequencer.engine import insertion
from sequencer.engine.points import LATCHED, NoControl, controlled, give_up
from sequencer.engine.scan import Scan
from sequencer.engine.site import Site, Situation
from sequencer.engine.targets import threshold_levels, weak_cells, weak_offsets
from sequencer.engine.walks import DWELLS
from sequencer.model.low_start import OR
from sequencer.model.steps import StartLow

FULL = 0.5  # of the lowest current declared for this pack: above it flows full current
LATE_s = 5.0  # watched on for so long where the current still changed at the end
CHARGED = ("precharges", "full current")


def full_above_A(nominal_A: float) -> float:
    """The current above which it is full current, A."""
    return max(FULL * nominal_A, 2 * PULSE_A)


def start_low(site: Site, step: StartLow) -> str:
    """Every start voltage, the threshold, what is held, then every cell weak."""
    if not controlled(site, step.cell_voltage):
        return give_up(site, "low_start", LATCHED)
    try:
        kinds = _starts(site, step)
        charged = [cell_V for cell_V, kind in kinds.items() if kind == "precharges"]
        if step.hold and charged:
            _show(site, step, _low(site, step, min(charged)), "hold", min(charged))
        for cell in weak_cells(step, site.specification, site.pack.cells):
            _show_surely(site, step, _weak(site, step, cell), "weak", step.weak_cell or 0.0, cell)
    except NoControl as none:
        return give_up(site, "low_start", str(none))
    return "started low"


def _starts(site: Site, step: StartLow) -> dict[float, str]:
    """What the charger did at each start voltage; the highest that is precharged is raised through the threshold."""
    kinds: dict[float, str] = {}
    for cell_V in sorted(step.voltages, reverse=True):
        role = "start" if "precharges" in kinds.values() else "start, raised"
        kinds[cell_V] = _show_surely(site, step, _low(site, step, cell_V), role, cell_V)
    return kinds


def _show_surely(
    site: Site, step: StartLow, situation: Situation, role: str, cell_V: float, cell: int | None = None
) -> str:
    """One start, and once more where nothing flowed that is declared to: mains may be gone for a while. Full current
    into a discharged pack needs no second time.
    """
    kind = _show(site, step, situation, role, cell_V, cell)
    allowed = _declared(site, cell_V, cell)
    if allowed is None or kind in (*allowed.split(OR), "full current"):
        return kind
    return _show(site, step, situation, role, cell_V, cell)


def _declared(site: Site, cell_V: float, cell: int | None) -> str | None:
    """What the charger may do with this start; None where nothing is declared."""
    low = site.specification.low_start
    if low is None or cell is not None:
        return None if low is None else low.weak_cell
    return next((one.response for one in low.starts if one.holds(cell_V)), None)


def _low(site: Site, step: StartLow, cell_V: float) -> Situation:
    return replace(site.nominal(cell_V), held=True)


def _weak(site: Site, step: StartLow, cell: int) -> Situation:
    assert step.weak_cell is not None
    mean_V, offsets_V = weak_offsets(site.pack.cells, cell, step.weak_cell, step.cell_voltage)
    return replace(site.nominal(mean_V), held=True, offsets_V=offsets_V)


def _show(site: Site, step: StartLow, situation: Situation, role: str, cell_V: float, cell: int | None = None) -> str:
    """Insert, watch, raise or hold, take out, control where it was not charged. Raises NoControl."""
    if not site.vouched and not controlled(site, step.cell_voltage):
        raise NoControl(LATCHED)
    insertion.place(site, situation)
    start_s, watch = site.loop.now_s, _Watch.of(site)
    seen = watch.to_the_end()
    end_s = site.loop.now_s
    goes_on = seen.kind in CHARGED
    if seen.kind == "precharges" and role == "start, raised":
        goes_on = _raise(site, step, cell_V)
    if seen.kind == "precharges" and role == "hold":
        goes_on = _hold(site, step, watch)
    insertion.take_out(site)
    void = not goes_on and not controlled(site, step.cell_voltage)
    site.loop.event(
        "low-start",
        role=role,
        cell_V=cell_V,
        cell=cell,
        pack_V=round(site.pack.cells * situation.cell_V, 5),
        start_s=round(start_s, 3),
        end_s=round(end_s, 3),
        watched_s=watch.watch_s,
        label=seen.kind,
        void=void,
    )
    return seen.kind


@dataclass
class _Watch:
    """Looks at one low start, fast throughout: a probe pulse may last no longer than a scan."""

    site: Site
    full_A: float
    watch_s: float
    times_s: list[float] = field(default_factory=list)
    current_A: list[float] = field(default_factory=list)
    _full_s: float | None = None
    _changed_s: float = 0.0

    @classmethod
    def of(cls, site: Site) -> _Watch:
        delays_s = insertion.START_DELAYS * site.specification.dwell.start_delay
        return cls(site, full_above_A(site.nominal_current()[0]), max(delays_s, insertion.SHORTEST_WATCH_s))

    def to_the_end(self) -> Response:
        """Watch until nothing new is to be expected; full current needs no more than to settle and be measured."""
        loop = self.site.loop
        loop.look_around_next()  # the cells are read before the charger begins
        loop.look_closely()
        full = loop.observe(self.watch_s + insertion.MARGIN_s, self._sees)
        late_s = self._changed_s + LATE_s - loop.now_s
        if not full and late_s > 0:
            loop.observe(late_s, self._sees)
        return response_of(self.times_s, self.current_A, full_A=self.full_A, watched_s=self.watch_s)

    def _sees(self, scan: Scan) -> bool:
        self.site.loop.look_closely()
        if not scan.current_A.good or (self.times_s and scan.time_s <= self.times_s[-1]):
            return False
        value_A = scan.current_A.value
        if self.current_A and (value_A > PULSE_A) is not (self.current_A[-1] > PULSE_A):
            self._changed_s = scan.time_s
        self.times_s.append(scan.time_s)
        self.current_A.append(value_A)
        if value_A <= self.full_A:
            self._full_s = None
        elif self._full_s is None:
            self._full_s = scan.time_s
        return self._full_s is not None and scan.time_s - self._full_s >= insertion.SETTLE_s + insertion.MEAN_s


def _raise(site: Site, step: StartLow, from_V: float) -> bool:
    """Raise the pack's voltage in small steps until full current flows; whether a current flows at the end."""
    loop, full_A = site.loop, full_above_A(site.nominal_current()[0])
    low = site.specification.low_start
    threshold = low.precharge.threshold_per_cell if low is not None and low.precharge is not None else None
    assert loop.stand_in is not None
    for level_V in threshold_levels(step, threshold, from_V):
        begun_s = loop.now_s
        loop.stand_in.stand_at(level_V)
        loop.look_closely()
        came = loop.observe(
            DWELLS * site.specification.dwell.response,
            lambda scan: scan.current_A.good and scan.current_A.value > full_A,
        )
        if came:
            loop.observe(insertion.SETTLE_s + insertion.MEAN_s)
        loop.event("low-step", cell_V=level_V, start_s=round(begun_s, 3), end_s=round(loop.now_s, 3), came=came)
        if came:
            break
    return _flows(site)


def _hold(site: Site, step: StartLow, watch: _Watch) -> bool:
    """Wait, the pack's voltage held, until the precharge ends by itself or the step's time has passed.

    Returns whether a current flows at the end. Where none does, mains that were gone for a while let it begin again.
    """
    loop, begun_s = site.loop, site.loop.now_s

    def ends(scan: Scan) -> bool:
        return scan.current_A.good and not NOTHING_A < scan.current_A.value < watch.full_A

    came = loop.observe(step.hold, ends)
    loop.observe(insertion.SETTLE_s + insertion.MEAN_s)
    if came and not _flows(site):
        loop.observe(watch.watch_s, lambda scan: scan.current_A.good and scan.current_A.value > PULSE_A)
    loop.event("low-hold", start_s=round(begun_s, 3), end_s=round(loop.now_s, 3), came=came)
    return _flows(site)


def _flows(site: Site) -> bool:
    """Whether the last scan shows a current; what it does not show may be the mains' doing, and takes a control."""
    last = site.loop.last
    return last is not None and last.current_A.good and last.current_A.value > NOTHING_A
