"""Walks while charging: the thermistor moved outward, one cell raised, step by step until the charge stops.

The way to where the search begins is walked too, in larger and shorter steps: no pack warms by 20 K at once, and a
charge that stops on that way has told something.
"""

from __future__ import annotations

import math

from sequencer.engine import insertion, resistors
from sequencer.engine.points import LATCHED, controlled, cycle_mains, give_up, is_good
from sequencer.engine.site import NOMINAL_C, Setpoint, Site
from sequencer.engine.targets import ends
from sequencer.model.steps import RaiseCell, SweepTemperature

STOPPED = 0.05  # of the control's current
GOES_ON = 0.5  # of the control's current
DWELLS = 3.0  # response times watched at each step
RELEASE_STEP_K = 1.0
RELEASE_SPAN_K = 12.0
APPROACH_K = 2.5  # per move on the way from 25 °C to the first step, each watched for one response time
OVER_V = 0.02  # beyond the step at which a cell stopped the charge: a step that clearly passes the trip
APPROACH_V = 0.05  # per move on the way from the nominal cell voltage to the first step
APPROACH_s = 0.3


def _stops(site: Site, dwell_s: float) -> bool:
    """Watch one step; returns whether the charge stopped."""
    floor_A = STOPPED * (site.control_A or 0.0)
    return site.loop.observe(dwell_s, lambda scan: scan.current_A.good and scan.current_A.value < floor_A)


def _goes_on(site: Site, dwell_s: float) -> bool:
    """Watch a charge that has stopped; returns whether it goes on."""
    charging_A = GOES_ON * (site.control_A or 0.0)
    return site.loop.observe(dwell_s, lambda scan: scan.current_A.good and scan.current_A.value > charging_A)


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
            return give_up(site, "walk", LATCHED)
        settings = _walk_out(site, step, side, *ends(band, side.endswith("low"), step))
        insertion.take_out(site)
        assert site.bench.signals.thermistor is not None
        resistors.measure_again(site, site.bench.signals.thermistor, settings)
    return "walked" if controlled(site, step.cell_voltage) else give_up(site, "walk", LATCHED)


def _walk_out(site: Site, step: SweepTemperature, side: str, inner_C: float, outer_C: float) -> tuple[Setpoint, ...]:
    """Outward until the charge stops, and back until it goes on.

    Returns the settings in Ω on both sides of the stop and of the way back, as far as there were any.
    """
    towards = -1.0 if outer_C < inner_C else 1.0
    response_s = site.specification.dwell.response
    # The smallest step first, far inside: what stops a charge there is not the temperature.
    last_C = NOMINAL_C + towards * step.resolution
    if _temperature_step(site, side, last_C, DWELLS * response_s, "probe"):
        return ()
    for celsius in approach_C(inner_C, towards):
        if _temperature_step(site, side, celsius, response_s, "approach"):
            return site.ohm_at(last_C), site.ohm_at(celsius), *_walk_back(site, side, celsius, -towards)
    for number in range(out_steps(inner_C, outer_C, step.resolution) + 1):
        celsius = inner_C + towards * min(number * step.resolution, abs(outer_C - inner_C))
        if _temperature_step(site, side, celsius, DWELLS * response_s, "out"):
            return site.ohm_at(last_C), site.ohm_at(celsius), *_walk_back(site, side, celsius, -towards)
        last_C = celsius
    return ()


def approach_C(inner_C: float, towards: float) -> list[float]:
    """Temperatures on the way from 25 °C to where the search begins."""
    count = int(max(0.0, towards * (inner_C - NOMINAL_C) - 1e-9) / APPROACH_K)
    return [NOMINAL_C + towards * number * APPROACH_K for number in range(1, count + 1)]


def out_steps(inner: float, outer: float, by: float) -> int:
    """How many steps lead from the first setting of a search to its last; the last step may be a smaller one."""
    return math.ceil(abs(outer - inner) / by - 1e-6)


def _temperature_step(site: Site, side: str, celsius: float, dwell_s: float, way: str) -> bool:
    """One setting of the thermistor while charging; returns whether the charge stopped (back: went on)."""
    line = site.bench.signals.thermistor
    assert line is not None
    begun_s = site.loop.now_s
    ohm = site.ohm_at(celsius)
    resistors.set_resistor(site, line, ohm)
    came = _goes_on(site, dwell_s) if way == "back" else _stops(site, dwell_s)
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


def _walk_back(site: Site, side: str, celsius: float, inward: float) -> tuple[Setpoint, ...]:
    """Back inward in steps of 1 K until the charge goes on, for at most RELEASE_SPAN_K and not beyond 25 °C.

    Returns the settings in Ω between which it went on, or none.
    """
    dwell_s = site.specification.dwell.start_delay + DWELLS * site.specification.dwell.response
    last_C = celsius
    for number in range(1, round(RELEASE_SPAN_K / RELEASE_STEP_K) + 1):
        back_C = celsius + inward * number * RELEASE_STEP_K
        if inward * (back_C - NOMINAL_C) > 0:
            break
        if _temperature_step(site, side, back_C, dwell_s, "back"):
            return site.ohm_at(last_C), site.ohm_at(back_C)
        last_C = back_C
    return ()


def raise_cells(site: Site, step: RaiseCell) -> str:
    """Each cell in turn; the pack's voltage stays where it is."""
    for cell in range(1, site.pack.cells + 1):
        if not begin(site, step.cell_voltage):
            return give_up(site, "tap_trip", LATCHED)
        stopped_V = _raise_one(site, step, cell)
        if stopped_V is not None and not _timed(site, step, cell, stopped_V):
            return give_up(site, "tap_trip", LATCHED)
        insertion.take_out(site)
    return "raised" if controlled(site, step.cell_voltage) else give_up(site, "tap_trip", LATCHED)


def _raise_one(site: Site, step: RaiseCell, cell: int) -> float | None:
    """Up in steps until the charge stops, and back; returns the voltage of the step at which it stopped."""
    reached_V = _approach(site, cell, step.begin)
    if reached_V is not None:
        _release(site, cell)
        return None  # on the way: which move did it cannot be told, so there is nothing to time
    for number in range(out_steps(step.begin, step.end, step.by) + 1):
        raised_V = min(step.begin + number * step.by, step.end)
        if _cell_step(site, cell, raised_V, DWELLS * site.specification.dwell.response, "out"):
            _release(site, cell)
            return raised_V
    return None


def _approach(site: Site, cell: int, to_V: float, way: str = "approach") -> float | None:
    """From equal cells to just below `to_V`; returns where the charge stopped on the way, None where it did not."""
    assert site.loop.last is not None
    cell_V = site.loop.last.charger_V.value / site.pack.cells + APPROACH_V
    while cell_V < to_V:
        if _cell_step(site, cell, cell_V, APPROACH_s, way):
            return cell_V
        cell_V += APPROACH_V
    return None


def _timed(site: Site, step: RaiseCell, cell: int, stopped_V: float) -> bool:
    """The stop once more, by a step that lies clearly on both sides of the trip; False where no control was to be had.

    In the search the cell may pass its trip late within a step, because the pack's voltage rises meanwhile: the time
    from the step would then say nothing of the charger.
    """
    loop = site.loop
    assert loop.last is not None
    goes_on = loop.last.current_A.good and loop.last.current_A.value > GOES_ON * (site.control_A or 0.0)
    if not goes_on:
        insertion.take_out(site)
        if not begin(site, step.cell_voltage):
            return False
    if _approach(site, cell, stopped_V - step.by - OVER_V, "again") is None:
        over_V = min(stopped_V + OVER_V, site.bench.file.bench.limits.tap - 0.01)
        _cell_step(site, cell, over_V, _longest_stop_s(site), "over")
        _set_offsets(site, cell, 0.0)
    return True


def _longest_stop_s(site: Site) -> float:
    """How long a timed stop is waited for: well past what is declared."""
    trip = site.specification.tap_trip
    limit_s = trip.stop_time.high if trip is not None and trip.stop_time is not None else None
    return max(DWELLS * site.specification.dwell.response, 1.5 * (limit_s or 0.0))


def _set_offsets(site: Site, cell: int, rise_V: float) -> None:
    """One cell raised, the others lowered by what keeps the sum."""
    cells = site.pack.cells
    others_V = -rise_V / (cells - 1)
    site.loop.tap_offsets_V = tuple(rise_V if number == cell else others_V for number in range(1, cells + 1))
    assert site.loop.last is not None
    site.loop.move_taps(site.loop.last.charger_V.value)
    site.loop.look_closely()


def _cell_step(site: Site, cell: int, cell_V: float, dwell_s: float, way: str) -> bool:
    """One step of one cell; returns whether the charge stopped."""
    loop = site.loop
    assert loop.last is not None
    begun_s = loop.now_s
    # The other cells share what is left of the pack's voltage as it stands now.
    mean_V = loop.last.charger_V.value / site.pack.cells
    _set_offsets(site, cell, cell_V - mean_V)
    loop.look_around_next()
    came = _stops(site, dwell_s)
    loop.event(
        "walk",
        finding="tap_trip",
        way=way,
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
    came = _goes_on(site, watch_s)
    if came:
        loop.observe(insertion.SETTLE_s + insertion.MEAN_s)
    loop.event(
        "walk",
        finding="tap_trip",
        way="back",
        cell=cell,
        start_s=round(begun_s, 3),
        end_s=round(loop.now_s, 3),
        came=came,
    )
