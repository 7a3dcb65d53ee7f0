"""What a sweep must show, worked out from the specification: for the sweep, its prediction and its judging. Pure."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from drivers.text.measures import Band
from sequencer.analysis.classes import Seen
from sequencer.model.signals import IdBand
from sequencer.model.specification import Specification
from sequencer.model.steps import StartLow, Step, SweepTemperature

SideName = Literal["lower", "upper"]


def passed_over(step: Step, specification: Specification) -> str | None:
    """Why a step shows nothing that this specification speaks of, and is not carried out; None where it is.

    A charger for a pack without cell taps declares no trip: nothing would be judged by raising a cell, or by watching.
    """
    if step.raise_cell is not None and specification.tap_trip is None:
        return "the specification declares no tap_trip"
    if step.watch_taps is not None and specification.balancing is None:
        return "the specification declares nothing about balancing"
    if step.start_low is not None and specification.low_start is None:
        return "the specification declares no low_start"
    return None


@dataclass(frozen=True)
class Side:
    """One side of an ID band: its end, and how far out the edge is looked for, both in Ω.

    neighbour : what lies there is the near end of the next band; no resistance between the two is declared to be
    refused, so none is shown as one that must not charge.
    """

    band: int
    side: SideName
    end_ohm: float
    beyond_ohm: float
    neighbour: bool

    @property
    def name(self) -> str:
        return f"band{self.band}.{self.side}"

    @property
    def roles(self) -> tuple[str, ...]:
        """Roles of the points on this side, from the middle of the band outward."""
        end = "low" if self.side == "lower" else "high"
        return f"band{self.band}.middle", f"band{self.band}.{end}", f"{self.name}_edge", f"{self.name}_outside"


def sides(specification: Specification, outside: float) -> list[Side]:
    """Both sides of every band; the edge is looked for up to `outside` (a share) beyond all that is declared for it."""
    bands = specification.id_bands
    return [
        side
        for number, band in enumerate(bands, 1)
        for side in (_lower(number, band, bands, outside), _upper(number, band, bands, outside))
    ]


def _lower(number: int, band: IdBand, bands: tuple[IdBand, ...], outside: float) -> Side:
    declared = band.lower_edge.low if band.lower_edge is not None and band.lower_edge.low else band.low_ohm
    reach_ohm = min(declared, band.low_ohm) / (1 + outside)
    below = max((one for one in bands if one.high_ohm < band.low_ohm), key=lambda one: one.high_ohm, default=None)
    if below is not None and reach_ohm <= max(below.high_ohm, _high(below.upper_edge)):
        return Side(number, "lower", band.low_ohm, below.high_ohm, True)
    return Side(number, "lower", band.low_ohm, reach_ohm, False)


def _upper(number: int, band: IdBand, bands: tuple[IdBand, ...], outside: float) -> Side:
    reach_ohm = max(_high(band.upper_edge), band.high_ohm) * (1 + outside)
    above = min((one for one in bands if one.low_ohm > band.high_ohm), key=lambda one: one.low_ohm, default=None)
    if above is not None:
        declared = above.lower_edge.low if above.lower_edge is not None and above.lower_edge.low else above.low_ohm
        if reach_ohm >= min(declared, above.low_ohm):
            return Side(number, "upper", band.high_ohm, above.low_ohm, True)
    return Side(number, "upper", band.high_ohm, reach_ohm, False)


def _high(edge: Band | None) -> float:
    return edge.high if edge is not None and edge.high is not None else 0.0


def ends(band: Band, cold: bool, step: SweepTemperature) -> tuple[float, float]:
    """Temperatures just inside and well outside a declared limit, °C. A limit open at one end stands for both."""
    known = [value for value in (band.low, band.high, band.nominal) if value is not None]
    low, high = min(known, default=0.0), max(known, default=0.0)
    return (high + step.resolution, low - step.beyond) if cold else (low - step.resolution, high + step.beyond)


COARSE = 5  # times the small step: on the way to where the threshold is declared


def threshold_levels(step: StartLow, threshold: Band | None, from_V: float) -> list[float]:
    """Open-circuit voltages per cell through which a precharged pack is raised, V; small steps where none is declared.

    from_V : the start voltage, at which it precharges already.
    """
    near_V = from_V if threshold is None or threshold.low is None else threshold.low - step.by
    coarse = max(0, int((near_V - from_V) / (COARSE * step.by) + 1e-6))
    levels = [from_V + number * COARSE * step.by for number in range(1, coarse + 1)]
    base_V = levels[-1] if levels else from_V
    fine = int((step.end - base_V) / step.by + 1e-6)
    return [round(level, 6) for level in (*levels, *(base_V + number * step.by for number in range(1, fine + 1)))]


def weak_offsets(cells: int, weak: int, weak_V: float, others_V: float) -> tuple[float, tuple[float, ...]]:
    """Mean voltage of the cells, and each cell's offset from it, of a pack in which cell `weak` (from 1) is low; V."""
    mean_V = (weak_V + (cells - 1) * others_V) / cells
    return mean_V, tuple((weak_V if cell == weak else others_V) - mean_V for cell in range(1, cells + 1))


def weak_cells(step: StartLow, specification: Specification, cells: int) -> range:
    """Cells, from 1, that are shown weak; none where nothing is declared for one."""
    low = specification.low_start
    shown = step.weak_cell is not None and low is not None and low.weak_cell is not None
    return range(1, cells + 1 if shown else 1)


def starts(seen: Seen) -> str:
    """The class of a point where only one thing matters: whether a charge starts, with whatever current."""
    return "charges" if seen.flows else seen.kind
