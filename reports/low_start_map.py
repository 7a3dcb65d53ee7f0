"""What figure and rows of deep-discharge starts show: each by its response, and what was declared; no drawing."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports.insertions import Bracket, brackets, number
from reports.wording import NOTHING, clean, si

if TYPE_CHECKING:
    from sequencer.model.specification import Specification

Json = Mapping[str, Any]
# From the top: what is worst for a discharged cell.
RESPONSES = ("full current", "precharges", "probes and refuses", "refuses")
UNDECIDED = "undecided"


@dataclass(frozen=True)
class Start:
    """One start. cell : the weak one, from 1; None for a whole pack.   level : its response, or "undecided".

    current : of a precharge, of full current, or the largest of a probe, in words; empty where none flowed.
    allowed : whether the response is a declared one; None where nothing is declared, or nothing can be told.
    """

    cell_V: float
    cell: int | None
    level: str
    current: str
    void: bool
    allowed: bool | None
    words: str


@dataclass(frozen=True)
class Owed:
    """Voltages per cell, and the responses that are declared for a pack put in there."""

    low_V: float
    high_V: float
    responses: tuple[str, ...]


@dataclass(frozen=True)
class StartRow:
    """One line of the table of starts."""

    start: str
    response: str
    current: str
    declared: str
    words: str


@dataclass(frozen=True)
class LowStartMap:
    """All that the figure shows. weak_V : of the weak cells; weak_owed : the responses declared for them."""

    starts: tuple[Start, ...]
    weak: tuple[Start, ...]
    owed: tuple[Owed, ...]
    weak_owed: tuple[str, ...]
    threshold: Bracket | None
    rows: tuple[StartRow, ...]
    caption: str

    @property
    def levels(self) -> tuple[str, ...]:
        """Rows of the figure from the top; one more where something could not be told."""
        unsure = any(start.level == UNDECIDED for start in (*self.starts, *self.weak))
        return (*RESPONSES, UNDECIDED) if unsure else RESPONSES

    @property
    def span_V(self) -> tuple[float, float]:
        """Lowest and highest voltage per cell shown, with a margin."""
        seen = [start.cell_V for start in self.starts] + [end for one in self.owed for end in (one.low_V, one.high_V)]
        if self.threshold is not None:
            ends = (self.threshold.low, self.threshold.high, self.threshold.limit_low, self.threshold.limit_high)
            seen += [end for end in ends if end is not None]
        low, high = (min(seen), max(seen)) if seen else (0.0, 3.0)
        margin = max(0.05 * (high - low), 0.05)
        return low - margin, high + margin


def low_start_map(
    points: Sequence[Json], verdicts: Iterable[Json], specification: Specification | None
) -> LowStartMap | None:
    """The figure of deep-discharge starts; None where none was made."""
    shown = [point for point in points if number(point.get("cell_V")) is not None]
    if not shown:
        return None
    owed, weak_owed = _owed(specification)
    starts = tuple(_start(point, owed, weak_owed) for point in shown if point.get("role") != "hold")
    whole = tuple(sorted((one for one in starts if one.cell is None), key=lambda one: one.cell_V))
    weak = tuple(one for one in starts if one.cell is not None)
    rows = tuple(_row(one, owed, weak_owed) for one in (*whole, *weak))
    threshold = brackets(verdicts).get("low_start.threshold")
    return LowStartMap(whole, weak, owed, weak_owed, threshold, rows, _caption(whole, weak, owed, threshold))


def _owed(specification: Specification | None) -> tuple[tuple[Owed, ...], tuple[str, ...]]:
    low = None if specification is None else specification.low_start
    if low is None:
        return (), ()
    made = tuple(
        Owed(one.cell_voltage.low or 0.0, one.cell_voltage.high or 0.0, tuple(one.response.split(" or ")))
        for one in low.starts
    )
    return made, () if low.weak_cell is None else tuple(low.weak_cell.split(" or "))


def _declared(cell_V: float, cell: int | None, owed: Sequence[Owed], weak_owed: tuple[str, ...]) -> tuple[str, ...]:
    if cell is not None:
        return weak_owed
    inside = (one for one in owed if one.low_V - 1e-9 <= cell_V <= one.high_V + 1e-9)
    return next((one.responses for one in inside), ())


def _start(point: Json, owed: Sequence[Owed], weak_owed: tuple[str, ...]) -> Start:
    cell_V, cell = number(point.get("cell_V")) or 0.0, point.get("cell")
    cell = cell if isinstance(cell, int) else None
    kind = point.get("kind")
    level = str(kind) if kind in RESPONSES else UNDECIDED
    flows = (
        number(point.get("current_A")) if number(point.get("current_A")) is not None else number(point.get("peak_A"))
    )
    responses = _declared(cell_V, cell, owed, weak_owed)
    told = bool(responses) and level != UNDECIDED and not point.get("void")
    return Start(
        cell_V=cell_V,
        cell=cell,
        level=level,
        current="" if flows is None else si(flows, "A", 3),
        void=bool(point.get("void")),
        allowed=level in responses if told else None,
        words=clean(point.get("words")),
    )


def _row(start: Start, owed: Sequence[Owed], weak_owed: tuple[str, ...]) -> StartRow:
    where = f"pack at {start.cell_V:.2f} V per cell"
    responses = _declared(start.cell_V, start.cell, owed, weak_owed)
    return StartRow(
        start=where if start.cell is None else f"cell {start.cell} alone at {start.cell_V:.2f} V",
        response=f"{start.level}, void" if start.void else start.level,
        current=start.current or NOTHING,
        declared=" or ".join(responses) or NOTHING,
        words=start.words,
    )


def _caption(starts: Sequence[Start], weak: Sequence[Start], owed: Sequence[Owed], threshold: Bracket | None) -> str:
    wrong = sum(start.allowed is False for start in (*starts, *weak))
    parts = [
        "Each mark is a start of its own, the pack held at its voltage: the row says what the charger did,"
        " the number beside it the current (of a probe its largest reading).",
        "Shaded: the responses declared." if owed else "No response is declared.",
        "Bar: between its ends a precharge goes over to full current; dashed: the limits of that voltage."
        if threshold is not None
        else "",
        f"Not as declared: {wrong} of {len(starts) + len(weak)} starts." if wrong else "",
    ]
    return " ".join(part for part in parts if part)
