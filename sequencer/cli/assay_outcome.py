"""What the trials of an assay come to: false alarms, defects found by the right limits, the exit status. Pure."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fnmatch import fnmatchcase
from typing import Any

from sequencer.cli.assay_plan import Trial

FAILED = ("fail", "conditional fail")
MET, MISSED, UNCLEAR = 0, 1, 4


@dataclass(frozen=True)
class Outcome:
    """One trial with its verdicts, limit by limit. `on_purpose`: what was not run is left out on purpose."""

    trial: Trial
    verdicts: dict[str, str]
    ended: str  # in the run's own words
    why: str
    on_purpose: bool = True
    fault: str | None = None  # of packmime itself: a traceback

    @property
    def failing(self) -> list[str]:
        return [limit for limit, word in self.verdicts.items() if word in FAILED]

    @property
    def inconclusive(self) -> list[str]:
        """Limits without an answer."""
        words = ("inconclusive",) if self.on_purpose else ("inconclusive", "not run")
        return [limit for limit, word in self.verdicts.items() if word in words]

    @property
    def by(self) -> list[str]:
        """The limits that failed and are among those the defect must be found by."""
        return [limit for limit in self.failing if _matches(limit, self._patterns)]

    @property
    def found(self) -> bool:
        """Each of the defect's limits was met by one that failed."""
        return self.trial.defect is not None and all(_matched(pattern, self.failing) for pattern in self._patterns)

    @property
    def unclear(self) -> bool:
        """Not found, and the limits that should have found it have no answer."""
        missing = [pattern for pattern in self._patterns if not _matched(pattern, self.failing)]
        return bool(missing) and all(_matched(pattern, self.inconclusive) for pattern in missing)

    @property
    def _patterns(self) -> tuple[str, ...]:
        return self.trial.defect.limits if self.trial.defect else ()


def _matches(limit: str, patterns: Iterable[str]) -> bool:
    return any(fnmatchcase(limit, pattern) for pattern in patterns)


def _matched(pattern: str, limits: Iterable[str]) -> bool:
    return any(fnmatchcase(limit, pattern) for limit in limits)


def exit_status(outcomes: Sequence[Outcome], untried: Sequence[str]) -> int:
    """0: every claimed defect found, no false alarm; 1: not so; 4: not known where it matters."""
    sound = [one for one in outcomes if one.trial.defect is None]
    missed = [one for one in outcomes if one.trial.claimed and not one.found]
    if any(one.failing for one in sound) or any(not one.unclear for one in missed):
        return MISSED
    if missed or untried or any(one.inconclusive for one in sound):
        return UNCLEAR
    return MET


def document(procedure: str, outcomes: Sequence[Outcome]) -> dict[str, Any]:
    """What `assay --json` prints."""
    return {
        "procedure": procedure,
        "sound": [_sound(one) for one in outcomes if one.trial.defect is None],
        "defects": [_defect(one) for one in outcomes if one.trial.defect is not None],
    }


def _sound(one: Outcome) -> dict[str, Any]:
    return {
        "charger": one.trial.product,
        "seed": one.trial.seed,
        "false_alarms": one.failing,
        "inconclusive": one.inconclusive,
    }


def _defect(one: Outcome) -> dict[str, Any]:
    defect = one.trial.defect
    assert defect is not None
    return {
        "name": defect.name,
        "harm": defect.harm,
        "size": None if one.trial.size is None else str(one.trial.size),
        "claimed": one.trial.claimed,
        "found": one.found,
        "by": one.by,
    }
