"""What the figure of the tap currents shows: each cell's exchange, its uncertainty and detection limit; no drawing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports.insertions import number
from reports.wording import si

if TYPE_CHECKING:
    from sequencer.model.specification import Specification

Json = Mapping[str, Any]
WAYS = ("high", "low")
MOST_CELLS = 20


@dataclass(frozen=True)
class Exchanged:
    """What a cell exchanges when it stands `way`, A: positive out of it. U_A : expanded.   limit_A : its L_D."""

    way: str
    out_A: float
    U_A: float
    limit_A: float
    found: bool


@dataclass(frozen=True)
class TapRow:
    """One cell, number from 1, and what it exchanges: high, low, or (of two cells) one of them."""

    cell: int
    exchanged: tuple[Exchanged, ...]


@dataclass(frozen=True)
class Pattern:
    """One pattern: signs of the cells from the lowest, current out of each tap against its baselines, A."""

    signs: tuple[int, ...]
    taps_A: tuple[float, ...]


@dataclass(frozen=True)
class TapMap:
    """All that the figure shows. declared_A : what is declared of a cell, (None, most) or (least, most) or neither."""

    rows: tuple[TapRow, ...]
    patterns: tuple[Pattern, ...]
    limit_A: float
    declared_A: tuple[float | None, float | None]
    caption: str

    @property
    def reach_A(self) -> float:
        """The largest current shown, with a margin; never less than three detection limits."""
        seen = [abs(one.out_A) + one.U_A for row in self.rows for one in row.exchanged]
        seen += [level for level in self.declared_A if level is not None]
        return max(1.6 * max(seen, default=0.0), 3.0 * self.limit_A)


def tap_map(balancing: object, specification: Specification | None) -> TapMap | None:
    """The figure of a screening for balancing; None where there was none, or nothing that can be drawn."""
    if not isinstance(balancing, Mapping):
        return None
    limit_A = number(balancing.get("detectable_A"))
    rows = _rows(balancing.get("exchanges") or ())
    if limit_A is None or limit_A <= 0 or not rows:
        return None
    patterns = tuple(one for item in balancing.get("patterns") or () if (one := _pattern(item, len(rows))) is not None)
    declared = _declared(specification)
    return TapMap(rows, patterns, limit_A, declared, _caption(balancing, limit_A, declared, bool(patterns)))


def _rows(exchanges: Sequence[Json]) -> tuple[TapRow, ...]:
    cells = sorted({one["cell"] for one in exchanges if isinstance(one.get("cell"), int) and one["cell"] >= 1})
    return tuple(
        TapRow(cell, tuple(shown for one in exchanges if one.get("cell") == cell and (shown := _exchanged(one))))
        for cell in cells[:MOST_CELLS]
    )


def _exchanged(one: Json) -> Exchanged | None:
    out_A, U_A, limit_A = (number(one.get(key)) for key in ("out_A", "U_A", "detectable_A"))
    if out_A is None or U_A is None or limit_A is None or one.get("way") not in WAYS:
        return None
    return Exchanged(str(one["way"]), out_A, U_A, limit_A, bool(one.get("found")))


def _pattern(item: Json, cells: int) -> Pattern | None:
    signs = tuple(sign for sign in item.get("signs") or () if sign in (-1, 0, 1))
    taps_A = tuple(level for level in map(number, item.get("taps_A") or ()) if level is not None)
    return Pattern(signs, taps_A) if len(signs) == cells == len(taps_A) + 1 else None


def _declared(specification: Specification | None) -> tuple[float | None, float | None]:
    balancing = None if specification is None else specification.balancing
    if balancing is None:
        return None, None
    return (
        (None, balancing.none_above) if balancing.current is None else (balancing.current.low, balancing.current.high)
    )


def _caption(balancing: Json, limit_A: float, declared: tuple[float | None, float | None], patterns: bool) -> str:
    offset_V, longest_s = number(balancing.get("offset_V")), number(balancing.get("longest_s"))
    parts = [
        "A screening: it shows differences between cells, and no absence.",
        f"Cells stood ±{si(offset_V, 'V', 3)} from their mean," if offset_V is not None else "Cells stood apart,",
        f"for periods up to {longest_s:g} s." if longest_s is not None else "in patterns.",
        "Marks: the current out of a cell that stands high, and one that stands low (less than zero: into it), with U.",
        f"Shaded: below the detection limit, at most {si(limit_A, 'A', 2)} (alpha = beta = 5 %);"
        " linear there, logarithmic outside.",
        "Dashed: what is declared." if declared != (None, None) else "",
        "Beside: how the cells stood, and between two the current out of their tap, against its baselines."
        if patterns
        else "",
    ]
    return " ".join(part for part in parts if part)
