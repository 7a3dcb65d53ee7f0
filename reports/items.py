"""The pytest nodes of a judgement: a file of verdicts, and one item a verdict."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import pytest

from reports.rows import node_name
from reports.wording import clean, sentence, verdict_word

Json = Mapping[str, Any]


class Refused(Exception):
    """The charger failed a limit; the message is the verdict's reason."""


class Inconclusive(Exception):
    """A limit could not be judged; the message says why."""


class VerdictFile(pytest.File):
    """A file whose items are verdicts.

    What a subclass lists in `limits` is known on collecting; `verdict` is asked only after `setup`, so that a file
    whose verdicts come from a bench can run that bench there, and collecting never energises anything.
    """

    def limits(self) -> list[str]:
        """The limit that each item will judge, in order."""
        raise NotImplementedError

    def verdict(self, number: int) -> Json:
        """The verdict of the item with this number, from 1."""
        raise NotImplementedError

    def collect(self) -> Iterator[LimitItem]:
        for number, limit in enumerate(self.limits(), 1):
            yield LimitItem.from_parent(self, name=node_name(number), number=number, limit=limit)


class JudgementFile(VerdictFile):
    """The verdicts.json of a judgement folder: judged already, nothing is run."""

    _verdicts: list[Json]

    def limits(self) -> list[str]:
        from reports.source import read_json

        self._verdicts = list(read_json(self.path)["verdicts"])
        for verdict in self._verdicts:
            verdict_word(verdict["verdict"])
        return [str(verdict["limit"]) for verdict in self._verdicts]

    def verdict(self, number: int) -> Json:
        return self._verdicts[number - 1]


class LimitItem(pytest.Item):
    """One limit, with the outcome in pytest that belongs to its verdict."""

    parent: VerdictFile

    def __init__(self, *, number: int, limit: str, **node: Any) -> None:
        super().__init__(**node)
        self.number = number
        self.limit = limit

    def setup(self) -> None:
        verdict = self.parent.verdict(self.number)
        self.user_properties += properties(verdict)
        why = sentence(verdict.get("why"))
        if verdict["verdict"] == "inconclusive":
            raise Inconclusive(why)
        if verdict["verdict"] in ("not run", "not applicable"):
            pytest.skip(why)

    def runtest(self) -> None:
        verdict = self.parent.verdict(self.number)
        if verdict["verdict"] not in ("pass", "conditional pass"):
            raise Refused(f"{verdict['verdict']}: {sentence(verdict.get('why'))}")

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """The reason as one sentence; a fault of ours keeps its traceback."""
        if isinstance(excinfo.value, Refused | Inconclusive):
            return str(excinfo.value)
        return super().repr_failure(excinfo, style)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        return self.path, None, sentence(self.limit)


def properties(verdict: Json) -> list[tuple[str, object]]:
    """A verdict as flat texts for JUnit and other reporters, what is null left out; numbers are not rounded."""
    flat: list[tuple[str, object]] = []
    for name, value in verdict.items():
        if isinstance(value, list | tuple):
            flat.append((name, " ".join(clean(part) for part in value)))
        elif value is not None:
            flat.append((name, clean(value)))
    return flat


def verdict_of(report: pytest.TestReport | pytest.CollectReport) -> str:
    """The verdict word that an item of ours left in its report; empty for any other report."""
    found: Mapping[str, object] = dict(getattr(report, "user_properties", ()))
    return str(found["verdict"]) if "verdict" in found and "limit" in found else ""
