"""One finding of a record, or why there is none."""

from __future__ import annotations

from dataclasses import dataclass

from sequencer.analysis.uncertainty import Budget


@dataclass(frozen=True)
class Found:
    """One finding: a quantity with its budget, an interval with that of its ends, a state or a class.

    `trouble`: it was looked for and cannot be told (inconclusive). `absent`: it was not made (not run).
    `none`: the charger shows no such thing. `detectable`: of a screening, what would have been found.
    """

    budget: Budget | None = None
    seen: str | None = None
    probability: float | None = None
    n: int | None = None
    start_s: float | None = None
    end_s: float | None = None
    trouble: str | None = None
    absent: str | None = None
    none: str | None = None
    words: str = ""
    interval: tuple[float, float] | None = None
    detectable: float | None = None
