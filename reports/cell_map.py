"""What the figure of the cell taps shows: a row for each cell, declared window, steps, trip; no drawing."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports.insertions import Bracket, brackets, number
from reports.wording import clean, si

if TYPE_CHECKING:
    from sequencer.model.specification import Specification

Json = Mapping[str, Any]
GIVEN_UP = "given up while it charged"
_RELEASE = {"resumes": "goes on by itself", "stays off": "stays off"}


@dataclass(frozen=True)
class Row:
    """One cell, number from 1. charging_V, stopped_V : voltages of the cell at the steps of the walk, V.

    words : how fast it stopped, and what followed.   failed : whether its trip voltage is a fail.
    given_up : it still charged when the walk was left, so that nothing is known of where it stops.
    """

    cell: int
    charging_V: tuple[float, ...]
    stopped_V: float | None
    found: Bracket | None
    words: tuple[str, ...]
    failed: bool
    given_up: bool = False


@dataclass(frozen=True)
class CellMap:
    """All that the figure shows. declared_V : limits of the trip voltage, None where there is none."""

    rows: tuple[Row, ...]
    declared_V: tuple[float | None, float | None]
    caption: str

    @property
    def span_V(self) -> tuple[float, float]:
        """Lowest and highest voltage shown, with a margin."""
        seen = [level for row in self.rows for level in row.charging_V]
        seen += [row.stopped_V for row in self.rows if row.stopped_V is not None]
        seen += [end for row in self.rows if row.found for end in (row.found.low, row.found.high)]
        seen += [level for level in self.declared_V if level is not None]
        low, high = (min(seen), max(seen)) if seen else (4.0, 4.4)
        margin = max(0.06 * (high - low), 0.005)
        return low - margin, high + margin


def cell_map(walks: Sequence[Json], verdicts: Iterable[Json], specification: Specification | None) -> CellMap | None:
    """The figure of the cells that were raised; None where none was."""
    legs = [walk for walk in walks if walk.get("finding") == "tap_trip" and isinstance(walk.get("cell"), int)]
    if not legs:
        return None
    judged = {str(verdict["limit"]): verdict for verdict in verdicts}
    rows = tuple(
        _row(cell, [leg for leg in legs if leg["cell"] == cell], judged)
        for cell in sorted({leg["cell"] for leg in legs})
    )
    trip = None if specification is None else specification.tap_trip
    declared = (None, None) if trip is None else (trip.voltage.low, trip.voltage.high)
    return CellMap(rows, declared, _caption(rows, declared))


def _row(cell: int, legs: Sequence[Json], judged: Mapping[str, Json]) -> Row:
    out = [leg for leg in legs if leg.get("way") == "out"]
    charging = [number(leg.get("cell_V")) for leg in out if leg.get("stop_s") is None]
    # It may stop on the quick way to the search too; a setting that it let pass there stands too briefly for a dot.
    upward = [leg for leg in legs if leg.get("way") == "approach"] + out
    stopped = next((leg for leg in upward if leg.get("stop_s") is not None), None)
    name = f"tap_trip.cell{cell}.voltage"
    voltage = [judged[name]] if name in judged else []
    left = stopped is None and any(one["verdict"] in ("inconclusive", "not run") for one in voltage)
    return Row(
        cell=cell,
        charging_V=tuple(level for level in charging if level is not None),
        stopped_V=None if stopped is None else number(stopped.get("cell_V")),
        found=brackets(voltage).get(name),
        words=_words(cell, judged) if stopped is not None else (GIVEN_UP if left else "did not stop",),
        failed=any(one["verdict"] in ("fail", "conditional fail") for one in voltage),
        given_up=left,
    )


def _words(cell: int, judged: Mapping[str, Json]) -> tuple[str, ...]:
    stop_s = number(judged.get(f"tap_trip.cell{cell}.stop_time", {}).get("value"))
    release = judged.get(f"tap_trip.cell{cell}.release", {}).get("value")
    told = f"stops in {si(stop_s, 's', 3)}" if stop_s is not None else "stops"
    return (told,) if release is None else (told, _RELEASE.get(str(release), clean(release)))


def _caption(rows: Sequence[Row], declared: tuple[float | None, float | None]) -> str:
    went_on = [str(row.cell) for row in rows if row.stopped_V is None and not row.given_up]
    left = [str(row.cell) for row in rows if row.given_up]
    parts = [
        "One cell at a time is raised in steps, the pack's voltage unchanged."
        " Dots: steps at which the charge went on; cross: the step at which it stopped;"
        " bar: the trip lies between its ends.",
        "Shaded: the voltages at which it is declared to stop." if declared != (None, None) else "",
        f"Where the charge did not stop: cell{'s' * (len(went_on) > 1)} {', '.join(went_on)}." if went_on else "",
        f"Left before anything was known: cell{'s' * (len(left) > 1)} {', '.join(left)}." if left else "",
    ]
    return " ".join(part for part in parts if part)
