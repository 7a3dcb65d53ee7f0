"""Sweeps by insertions: ID bands with their edges, temperatures at which a charge starts. As lab instructions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise

from sequencer.analysis.classes import Seen
from sequencer.analysis.edges import UNDECIDED, EdgeSearch, Scale
from sequencer.engine.points import LATCHED, NoControl, Shown, controlled, give_up, show
from sequencer.engine.site import NOMINAL_C, Site
from sequencer.engine.targets import Side, ends, sides, starts
from sequencer.model.signals import IdBand
from sequencer.model.steps import SweepId, SweepTemperature

Show = Callable[[float | str, str], Shown]
Label = Callable[[Seen], str]
Chain = list[tuple[float, Shown]]


def sweep_id(site: Site, step: SweepId) -> str:
    """Every band at its middle and both ends, points outside, edges, open and short."""
    base = site.nominal(step.cell_voltage)

    def at(ohm: float | str, role: str) -> Shown:
        return show(site, "id", replace(base, id=ohm), role=role, ohm=ohm)

    if not controlled(site, step.cell_voltage):
        return give_up(site, "id", LATCHED)
    try:
        outward = sides(site.specification, step.outside)
        for number, band in enumerate(site.specification.id_bands, 1):
            _sweep_band(band, [side for side in outward if side.band == number], step, at)
        at("open", "open")
        at("short", "short")
    except NoControl as none:
        return give_up(site, "id", str(none))
    return "swept"


def _sweep_band(band: IdBand, outward: list[Side], step: SweepId, at: Show) -> None:
    name = f"band{outward[0].band}"
    middle = at(band.middle_ohm, f"{name}.middle")
    at_ends = [at(side.end_ohm, side.roles[1]) for side in outward]
    for side, end in zip(outward, at_ends, strict=True):
        role = side.roles[2 if side.neighbour else 3]
        chain = [(band.middle_ohm, middle), (side.end_ohm, end), (side.beyond_ohm, at(side.beyond_ohm, role))]
        _find_edge(chain, _band_of, step.resolution, "geometric", lambda ohm, role=side.roles[2]: at(ohm, role))  # type: ignore[misc]


def _band_of(seen: Seen) -> str:
    return seen.label


def sweep_starts(site: Site, step: SweepTemperature) -> str:
    """Limits for starting, by insertions; then open and short."""
    window = site.specification.temperature
    assert window is not None
    base = site.nominal(step.cell_voltage)

    def at(celsius: float | str, role: str) -> Shown:
        if isinstance(celsius, str):
            return show(site, "temperature", replace(base, thermistor=celsius), role=role, ohm=celsius)
        ohm = site.ohm_at(celsius)
        situation = replace(base, thermistor=ohm)
        return show(site, "temperature", situation, role=role, celsius=round(celsius, 4), ohm=ohm)

    if not controlled(site, step.cell_voltage):
        return give_up(site, "temperature", LATCHED)
    try:
        for side, band in zip(("start_low", "start_high"), window.start or (), strict=False):
            _sweep_limit(side, *ends(band, side.endswith("low"), step), step.resolution, at)
        for fault in ("open", "short"):
            at(fault, fault)
    except NoControl as none:
        return give_up(site, "temperature", str(none))
    return "swept"


def _sweep_limit(side: str, inner_C: float, outer_C: float, resolution_K: float, at: Show) -> None:
    inside, outside = at(inner_C, f"{side}_inside"), at(outer_C, f"{side}_outside")
    chain = [(inner_C, inside), (outer_C, outside)]
    if not inside.watched.seen.flows:
        chain.insert(0, (NOMINAL_C, at(NOMINAL_C, f"{side}_nominal")))
    _find_edge(chain, starts, resolution_K, "arithmetic", lambda celsius: at(celsius, side))


def _find_edge(chain: Chain, label: Label, resolution: float, scale: Scale, at: Callable[[float], Shown]) -> None:
    """Narrow the first change of class, from the inside of a band outward; nothing where there is none."""
    sure = [(value, label(shown.watched.seen)) for value, shown in chain if not shown.void]
    known = [(value, seen) for value, seen in sure if seen != UNDECIDED]
    for (near, seen), (far, other) in pairwise(known):
        if seen != other:
            low, high = sorted(((near, seen), (far, other)))
            unit = "Ω" if scale == "geometric" else "°C"
            search = EdgeSearch.between(low[0], high[0], low[1], high[1], resolution=resolution, scale=scale, unit=unit)
            _drive(search, label, at)
            return


def _drive(search: EdgeSearch, label: Label, at: Callable[[float], Shown]) -> None:
    """Ask, show, tell, until the bracket is narrow enough or the search gives up."""
    while (setting := search.ask()) is not None:
        shown = at(setting)
        search = search.told(label(shown.watched.seen))
        if not shown.watched.began:
            search = search.controlled(not shown.void)
