"""Sweeps by insertions: ID bands with their edges, temperatures at which a charge starts. As lab instructions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
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
Answer = tuple[float, str]


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
            _sweep_band(site, band, [side for side in outward if side.band == number], step, at)
        at("open", "open")
        at("short", "short")
    except NoControl as none:
        return give_up(site, "id", str(none))
    return "swept"


def _sweep_band(site: Site, band: IdBand, outward: list[Side], step: SweepId, at: Show) -> None:
    name = f"band{outward[0].band}"
    middle = _inside(site, step, at, band.middle_ohm, f"{name}.middle")
    at_ends = [_inside(site, step, at, side.end_ohm, side.roles[1]) for side in outward]
    for side, end in zip(outward, at_ends, strict=True):
        role = side.roles[2 if side.neighbour else 3]
        chain = [(band.middle_ohm, middle), (side.end_ohm, end), (side.beyond_ohm, at(side.beyond_ohm, role))]
        edge = _Edge(_band_of, step.resolution, "geometric", step.repeats)
        edge.find(chain, lambda ohm, role=side.roles[2]: at(ohm, role))  # type: ignore[misc]


def _inside(site: Site, step: SweepId, at: Show, ohm: float, role: str) -> Shown:
    """A point that must charge; where it does not, shown once more, a nominal pack having been charged between.

    Mains that are gone for a while look like a charger that refuses, or breaks off; they do not come back to do it
    twice.
    """
    shown = at(ohm, role)
    if shown.void or shown.watched.seen.kind == "charges":
        return shown
    if shown.watched.began and not controlled(site, step.cell_voltage):
        raise NoControl(LATCHED)
    return at(ohm, role)


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
            edge = _Edge(starts, step.resolution, "arithmetic", step.repeats)
            _sweep_limit(side, *ends(band, side.endswith("low"), step), edge, at)
        for fault in ("open", "short"):
            at(fault, fault)
    except NoControl as none:
        return give_up(site, "temperature", str(none))
    return "swept"


def _sweep_limit(side: str, inner_C: float, outer_C: float, edge: _Edge, at: Show) -> None:
    inside, outside = at(inner_C, f"{side}_inside"), at(outer_C, f"{side}_outside")
    chain = [(inner_C, inside), (outer_C, outside)]
    if not inside.watched.seen.flows:
        chain.insert(0, (NOMINAL_C, at(NOMINAL_C, f"{side}_nominal")))
    edge.find(chain, lambda celsius: at(celsius, side))


@dataclass(frozen=True)
class _Edge:
    """How one edge is looked for: what is told apart, how narrow, and how often both its sides are shown."""

    label: Label
    resolution: float
    scale: Scale
    repeats: int

    def find(self, chain: Chain, at: Callable[[float], Shown]) -> None:
        """Narrow the first change of class, from the inside of a band outward; nothing where there is none."""
        sure = [(value, self.label(shown.watched.seen)) for value, shown in chain if not shown.void]
        known = [(value, seen) for value, seen in sure if seen != UNDECIDED]
        for (near, seen), (far, other) in pairwise(known):
            if seen != other:
                self._show_again(self._narrowed((near, seen), (far, other), at), seen, at)
                return

    def _narrowed(self, near: Answer, far: Answer, at: Callable[[float], Shown]) -> EdgeSearch:
        """Ask, show, tell, until the bracket is narrow enough or the search gives up."""
        low, high = sorted((near, far))
        unit = "Ω" if self.scale == "geometric" else "°C"
        search = EdgeSearch.between(
            low[0], high[0], low[1], high[1], resolution=self.resolution, scale=self.scale, unit=unit
        )
        while (setting := search.ask()) is not None:
            shown = at(setting)
            search = search.told(self.label(shown.watched.seen))
            if not shown.watched.began:
                search = search.controlled(not shown.void)
        return search

    def _show_again(self, search: EdgeSearch, inside: str, at: Callable[[float], Shown]) -> None:
        """Both sides once more, now from outside inward: an edge that holds in both directions, with another setting
        of the resistor, is the charger's and no chance.
        """
        if search.trouble is not None:
            return
        found = search.interval
        inward = (found.high, found.low) if search.low_class == inside else (found.low, found.high)
        for _ in range(self.repeats - 1):
            for setting in inward:
                at(setting)
