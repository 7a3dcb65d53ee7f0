"""Walks while charging: the thermistor moved outward, one cell raised, step by step until the charge stops."""

from __future__ import annotations

from sequencer.engine import insertion
from sequencer.engine.insertion import set_resistor
from sequencer.engine.points import controlled, cycle_mains, is_good
from sequencer.engine.scan import Scan
from sequencer.engine.site import Site
from sequencer.engine.sweeps import ends
from sequencer.model.steps import RaiseCell, SweepTemperature

STOPPED = 0.05  # of the control's current
DWELLS = 3.0  # response times watched at each step
RELEASE_STEP_K = 1.0
RELEASE_SPAN_K = 12.0
APPROACH_V = 0.05  # per move on the way from the nominal cell voltage to the first step


def _stopped(site: Site) -> float:
    return STOPPED * (site.control_A or 0.0)


def _dwell(site: Site, dwell_s: float) -> bool:
    """Watch one step; returns whether the charge stopped."""
    floor_A = _stopped(site)
    return site.loop.observe(dwell_s, lambda scan: scan.current_A.good and scan.current_A.value < floor_A)


def begin(site: Site, cell_V: float) -> bool:
    """Insert a nominal pack and leave it in; a good control, with one cycle of the mains, or False."""
    for attempt in range(2):
        insertion.place(site, site.nominal(cell_V))
        watched = insertion.watch(site)
        good = is_good(site, watched)
        site.loop.event("control", start_s=round(watched.start_s, 3), end_s=round(watched.end_s, 3), good=good)
        if good:
            return True
        insertion.take_out(site)
        if attempt == 0:
            cycle_mains(site)
    return False


def walk_temperatures(site: Site, step: SweepTemperature) -> str:
    """From 25 °C outward to each limit for going on, and back until the charge goes on again."""
    window = site.specification.temperature
    assert window is not None
    for side, band in zip(("run_low", "run_high"), window.run or (), strict=False):
        if not begin(site, step.cell_voltage):
            return "no good control before a walk; the rest was not walked"
        inner_C, outer_C = ends(band, side.endswith("low"), step)
        _walk_out(site, step, side, inner_C, outer_C)
        insertion.take_out(site)
    good = controlled(site, step.cell_voltage)
    return "walked" if good else "the control after the walk failed"


def _walk_out(site: Site, step: SweepTemperature, side: str, inner_C: float, outer_C: float) -> None:
    towards = -1.0 if outer_C < inner_C else 1.0
    count = round(abs(outer_C - inner_C) / step.resolution)
    dwell_s = DWELLS * site.specification.dwell.response
    for number in range(count + 1):
        celsius = inner_C + towards * number * step.resolution
        if _temperature_step(site, side, celsius, dwell_s, "out"):
            _walk_back(site, side, celsius, -towards)
            return


def _temperature_step(site: Site, side: str, celsius: float, dwell_s: float, way: str) -> bool:
    """One setting of the thermistor while charging; returns whether the charge stopped (out) or went on (back)."""
    line = site.bench.signals.thermistor
    assert line is not None
    begun_s = site.loop.now_s
    ohm = site.ohm_at(celsius)
    set_resistor(site, line, ohm)
    if way == "out":
        came = _dwell(site, dwell_s)
    else:
        charging_A = 0.5 * (site.control_A or 0.0)
        came = site.loop.observe(dwell_s, lambda scan: scan.current_A.good and scan.current_A.value > charging_A)
    site.loop.event(
        "walk",
        finding=f"temperature.{side}",
        way=way,
        celsius=round(celsius, 4),
        ohm=ohm,
        start_s=round(begun_s, 3),
        end_s=round(site.loop.now_s, 3),
        came=came,
    )
    return came


def _walk_back(site: Site, side: str, celsius: float, towards: float) -> None:
    """Back inward in steps of 1 K until the charge goes on, for at most RELEASE_SPAN_K."""
    dwell_s = site.specification.dwell.start_delay + DWELLS * site.specification.dwell.response
    for number in range(1, round(RELEASE_SPAN_K / RELEASE_STEP_K) + 1):
        if _temperature_step(site, side, celsius + towards * number * RELEASE_STEP_K, dwell_s, "back"):
            return


def raise_cells(site: Site, step: RaiseCell) -> str:
    """Each cell in turn; the pack's voltage stays where it is."""
    for cell in range(1, site.pack.cells + 1):
        if not begin(site, step.cell_voltage):
            site.loop.event("note", text=f"no good control before cell {cell}; the rest was not raised")
            return "no good control before a cell; the rest was not raised"
        _raise_one(site, step, cell)
        insertion.take_out(site)
    return "raised" if controlled(site, step.cell_voltage) else "the control after the last cell failed"


def _raise_one(site: Site, step: RaiseCell, cell: int) -> None:
    loop = site.loop
    assert loop.last is not None
    mean_V = loop.last.charger_V.value / site.pack.cells
    rise_V = 0.0
    while mean_V + rise_V + APPROACH_V < step.begin:
        rise_V += APPROACH_V
        _set_offsets(site, cell, rise_V)
        loop.observe(0.3)
    count = round((step.end - step.begin) / step.by)
    for number in range(count + 1):
        if _cell_step(site, cell, step.begin + number * step.by):
            _release(site, cell)
            return


def _set_offsets(site: Site, cell: int, rise_V: float) -> None:
    """One cell raised, the others lowered by what keeps the sum."""
    cells = site.pack.cells
    others_V = -rise_V / (cells - 1)
    site.loop.tap_offsets_V = tuple(rise_V if number == cell else others_V for number in range(1, cells + 1))
    assert site.loop.last is not None
    site.loop.move_taps(site.loop.last.charger_V.value)
    site.loop.look_closely()


def _cell_step(site: Site, cell: int, cell_V: float) -> bool:
    """One step of one cell; returns whether the charge stopped."""
    loop = site.loop
    assert loop.last is not None
    begun_s = loop.now_s
    # The other cells share what is left of the pack's voltage as it stands now.
    mean_V = loop.last.charger_V.value / site.pack.cells
    _set_offsets(site, cell, cell_V - mean_V)
    loop.look_around_next()
    came = _dwell(site, DWELLS * site.specification.dwell.response)
    loop.event(
        "walk",
        finding="tap_trip",
        way="out",
        cell=cell,
        cell_V=round(cell_V, 5),
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        came=came,
    )
    return came


def _release(site: Site, cell: int) -> None:
    """Back to equal cells: does the charge go on by itself?"""
    loop = site.loop
    begun_s = loop.now_s
    _set_offsets(site, cell, 0.0)
    watch_s = max(insertion.START_DELAYS * site.specification.dwell.start_delay, insertion.SHORTEST_WATCH_s)
    charging_A = 0.5 * (site.control_A or 0.0)

    def resumed(scan: Scan) -> bool:
        return scan.current_A.good and scan.current_A.value > charging_A

    came = loop.observe(watch_s, resumed)
    if came:
        loop.observe(insertion.MEAN_s)
    loop.event(
        "walk",
        finding="tap_trip",
        way="back",
        cell=cell,
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        came=came,
    )
