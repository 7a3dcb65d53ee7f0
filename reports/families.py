"""Many verdicts in an order that people can take in: by family, each with a line that sums it up; the worst first."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from reports import wording
from reports.rows import VerdictRow
from reports.wording import Word, clean

_TITLES: Mapping[str, str] = {
    "charges": "Charge",
    "charge": "Charge",
    "id": "ID resistor",
    "temperature": "Temperature window",
    "tap_trip": "Cell taps",
    "balancing": "Balancing, screened",
    "low_start": "Deep-discharge start",
}
_URGENT = ("fail", "conditional fail", "inconclusive")
MOST = 15  # rows named at the top; more than these are no summary


@dataclass(frozen=True)
class Family:
    """The verdicts about one thing. node : of its heading.   worst : of its words.   tally : how many of each."""

    node: str
    title: str
    worst: Word
    tally: str
    rows: tuple[VerdictRow, ...]


@dataclass(frozen=True)
class Summary:
    """What a reader must know first. urgent : the worst rows, worst first.   further : how many more there are."""

    urgent: tuple[VerdictRow, ...]
    further: int


def families(rows: Sequence[VerdictRow]) -> tuple[Family, ...]:
    """The rows in groups, in the order in which each family first occurs; within a family their own order stays."""
    groups: dict[str, list[VerdictRow]] = {}
    for row in rows:
        groups.setdefault(_title(row.limit), []).append(row)
    return tuple(_family(number, title, group) for number, (title, group) in enumerate(groups.items(), 1))


def counted(limits: Iterable[object]) -> tuple[str, ...]:
    """How many limits of each family a list names: "Cell taps (15)"."""
    found = Counter(_title(str(limit)) for limit in limits)
    return tuple(f"{title} ({count})" for title, count in found.items())


def _title(limit: str) -> str:
    first = limit.partition(".")[0]
    return _TITLES.get(first, clean(first.replace("_", " ").capitalize()))


def _family(number: int, title: str, rows: Sequence[VerdictRow]) -> Family:
    words = [row.verdict.text for row in rows]
    worst = next(word for word in wording.VERDICTS if word in words)
    return Family(f"f{number:02d}", title, wording.VERDICTS[worst], wording.tally(words), tuple(rows))


def summary(rows: Sequence[VerdictRow]) -> Summary:
    """What failed or could not be told."""
    urgent = [row for word in _URGENT for row in rows if row.verdict.text == word]
    return Summary(tuple(urgent[:MOST]), len(urgent) - len(urgent[:MOST]))
