"""Sweeps by insertions: ID bands with their edges, temperatures at which a charge starts. As lab instructions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from drivers.text.measures import Band
from sequencer.analysis.edges import EdgeSearch
from sequencer.engine.points import Shown, controlled, show
from sequencer.engine.site import Site, Situation
from sequencer.model.signals import IdBand
from sequencer.model.steps import SweepId, SweepTemperature

Show = Callable[[float, str], Shown]


def sweep_id(site: Site, step: SweepId) -> str:
    """Every band at its ends and middle, points outside, edges, open and short."""
    base = site.nominal(step.cell_voltage)
    if not controlled(site, step.cell_voltage):
        return "no good control at the start; nothing was swept"

    def at(ohm: float | str, role: str) -> Shown:
        return show(site, "id", replace(base, id=ohm), role=role, ohm=ohm)

    for number, band in enumerate(site.specification.id_bands, 1):
        _sweep_band(site, step, number, band, at)
    at("open", "open")
    at("short", "short")
    return "swept"


def _sweep_band(site: Site, step: SweepId, number: int, band: IdBand, at: Show) -> None:
    middle = at(band.middle_ohm, f"band{number}.middle")
    low, high = at(band.low_ohm, f"band{number}.low"), at(band.high_ohm, f"band{number}.high")
    for side, end_ohm, end, beyond_ohm in (
        ("lower", band.low_ohm, low, band.low_ohm / (1 + step.outside)),
        ("upper", band.high_ohm, high, band.high_ohm * (1 + step.outside)),
    ):
        if _in_a_band(site, beyond_ohm):
            continue
        role = f"band{number}.{side}_edge"
        outside = at(beyond_ohm, f"band{number}.{side}_outside")
        if middle.label == end.label != outside.label and not outside.void:
            _find_edge(side, end_ohm, end.label, beyond_ohm, outside.label, step.resolution, role, at)


def _in_a_band(site: Site, ohm: float) -> bool:
    return any(band.low_ohm <= ohm <= band.high_ohm for band in site.specification.id_bands)


def _find_edge(
    side: str, end_ohm: float, inside: str, beyond_ohm: float, outside: str, resolution: float, role: str, at: Show
) -> None:
    if side == "lower":
        search = EdgeSearch.between(beyond_ohm, end_ohm, outside, inside, resolution=resolution, unit="Ω")
    else:
        search = EdgeSearch.between(end_ohm, beyond_ohm, inside, outside, resolution=resolution, unit="Ω")
    _drive(search, lambda ohm: at(ohm, role))


def _drive(search: EdgeSearch, at: Callable[[float], Shown]) -> None:
    """Ask, show, tell, until the bracket is narrow enough or the search gives up."""
    while (setting := search.ask()) is not None:
        shown = at(setting)
        search = search.told(shown.watched.seen.label)
        if not shown.watched.began:
            search = search.controlled(not shown.void)


def sweep_starts(site: Site, step: SweepTemperature) -> str:
    """Limits for starting, by insertions; then open and short."""
    window = site.specification.temperature
    assert window is not None
    assert site.curve is not None
    base = site.nominal(step.cell_voltage)
    if not controlled(site, step.cell_voltage):
        return "no good control at the start; nothing was swept"

    def at(celsius: float, role: str) -> Shown:
        ohm = site.ohm_at(celsius)
        return show(site, "temperature", _with(base, ohm), role=role, celsius=round(celsius, 4), ohm=ohm)

    for side, band in zip(("start_low", "start_high"), window.start or (), strict=False):
        inner_C, outer_C = ends(band, side.endswith("low"), step)
        inside, outside = at(inner_C, f"{side}_inside"), at(outer_C, f"{side}_outside")
        if inside.label != outside.label and not outside.void:
            low, high = sorted(((inner_C, inside.label), (outer_C, outside.label)))
            search = EdgeSearch.between(
                low[0], high[0], low[1], high[1], resolution=step.resolution, scale="arithmetic", unit="°C"
            )
            _drive(search, lambda celsius, side=side: at(celsius, side))  # type: ignore[misc]
    for fault in ("open", "short"):
        show(site, "temperature", _with(base, fault), role=fault, ohm=fault)
    return "swept"


def _with(base: Situation, ohm: float | str) -> Situation:
    return replace(base, thermistor=ohm)


def ends(band: Band, cold: bool, step: SweepTemperature) -> tuple[float, float]:
    """Temperatures just inside and well outside a declared limit, °C."""
    low = band.low if band.low is not None else band.nominal or 0.0
    high = band.high if band.high is not None else band.nominal or 0.0
    return (high + step.resolution, low - step.beyond) if cold else (low - step.resolution, high + step.beyond)
