"""What the ID map shows: current over resistance, the declared bands, the edges that were found; no drawing."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports.insertions import Bracket, Mark, at_contact, brackets, counted, marks
from reports.wording import clean

if TYPE_CHECKING:
    from sequencer.model.specification import Specification


@dataclass(frozen=True)
class Band:
    """A declared band, number from 1: resistances in Ω, current with its limits in A, edges as they were found."""

    number: int
    low_ohm: float
    high_ohm: float
    current: str
    low_A: float | None
    high_A: float | None
    lower: Bracket | None
    upper: Bracket | None


@dataclass(frozen=True)
class IdMap:
    """All that the figure shows. marks : at a resistance.   open, short : without one."""

    bands: tuple[Band, ...]
    marks: tuple[Mark, ...]
    open: tuple[Mark, ...]
    short: tuple[Mark, ...]
    caption: str

    def span_ohm(self, margin: float) -> tuple[float, float]:
        """Lowest and highest resistance shown, with a margin at either side as a share of the logarithmic axis."""
        ohms = [mark.ohm for mark in self.marks if mark.ohm is not None]
        ohms += [end for band in self.bands for end in (band.low_ohm, band.high_ohm)]
        ohms += [
            end for band in self.bands for edge in (band.lower, band.upper) if edge for end in (edge.low, edge.high)
        ]
        low, high = (min(ohms), max(ohms)) if ohms else (1e3, 1e4)
        factor = max((high / low) ** (margin / (1 - 2 * margin)), 1.15)
        return low / factor, high * factor

    @property
    def top_A(self) -> float:
        """The largest current shown."""
        seen = [mark.current_A for mark in (*self.marks, *self.open, *self.short)]
        return max([0.1, *seen, *(band.high_A or 0.0 for band in self.bands)])


def id_map(
    points: Sequence[Mapping[str, Any]], verdicts: Iterable[Mapping[str, Any]], specification: Specification | None
) -> IdMap | None:
    """The map of an ID sweep; None where none was made. Without a readable specification it has no bands."""
    shown = marks(points, "id")
    if not shown:
        return None
    at_ohm = tuple(mark for mark in shown if mark.ohm is not None and mark.ohm > 0)
    return IdMap(
        bands=_bands(specification, brackets(verdicts)),
        marks=at_ohm,
        open=tuple(mark for mark in shown if mark.role == "open"),
        short=tuple(mark for mark in shown if mark.role == "short"),
        caption=_caption(shown, specification is not None),
    )


def _bands(specification: Specification | None, edges: Mapping[str, Bracket]) -> tuple[Band, ...]:
    declared = () if specification is None else specification.id_bands
    return tuple(
        Band(
            number=number,
            low_ohm=band.low_ohm,
            high_ohm=band.high_ohm,
            current=clean(band.current.text),
            low_A=band.current.low,
            high_A=band.current.high,
            lower=edges.get(f"id.band{number}.lower_edge"),
            upper=edges.get(f"id.band{number}.upper_edge"),
        )
        for number, band in enumerate(declared, 1)
    )


def _caption(shown: Sequence[Mark], declared: bool) -> str:
    parts = [
        "Above: charger current over ID resistance, each mark an insertion of its own.",
        "Boxes: the declared bands, as wide as their resistances and as high as the limits of their currents."
        " Below: the same bands, and each edge as it was found: it lies between the ends of its bar."
        if declared
        else "The declared bands could not be read from the specification.",
        counted(shown),
        at_contact(shown, "ID contact"),
    ]
    return " ".join(part for part in parts if part)
