"""Makes the JUnit XML of a judgement tell of the judgement: its times, its limits, its words.

pytest stamps it with the moment and the machine of the writing. Element and attribute rules: the widely used JUnit
schema (windyroad JUnit.xsd): `timestamp` without zone or fraction, `failure` and `error` with `type` and `message`.
`properties` inside a `testcase` are not in that schema; readers of pytest's files know them.
"""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from collections import Counter
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from reports.wording import sentence

Json = Mapping[str, Any]


def restamp(path: Path, verdicts: Sequence[Json], judgement: Json, manifest: Json) -> None:
    """Rewrite a file of pytest's in place, for the same bytes from the same judgement.

    The suite's time is the run's duration, a case's time the length of its evidence, in s; the host name is dropped
    for "bench" and its name. ValueError where the file does not hold one case a verdict, in order.
    """
    tree = ET.parse(path)
    suite = tree.getroot()[0]
    cases = suite.findall("testcase")
    if len(cases) != len(verdicts):
        raise ValueError(f"{path}: {len(cases)} test cases for {len(verdicts)} verdicts")
    procedure = sentence((manifest.get("procedure") or {}).get("name"))
    tree.getroot().set("name", "packmime")
    suite.set("name", procedure)
    suite.set("timestamp", stamp(judgement.get("utc")))
    suite.set("hostname", sentence((manifest.get("bench") or {}).get("name")))
    suite.set("time", f"{float(manifest.get('duration_s') or 0.0):.3f}")
    seen: Counter[str] = Counter()
    for case, verdict in zip(cases, verdicts, strict=True):
        limit = sentence(verdict["limit"])
        seen[limit] += 1
        case.set("classname", procedure)
        case.set("name", limit if seen[limit] == 1 else f"{limit} ({seen[limit]})")
        case.set("time", f"{_length_s(verdict.get('evidence')):.3f}")
        _outcome(case, verdict)
    tree.write(path, encoding="utf-8", xml_declaration=True)


def stamp(utc: object) -> str:
    """An ISO 8601 time of UTC without fraction and zone; the epoch's start for anything else."""
    found = re.match(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d", str(utc))
    return found[0] if found else "1970-01-01T00:00:00"


def _length_s(evidence: Sequence[float] | None) -> float:
    if not evidence or None in evidence:
        return 0.0
    return max(0.0, float(evidence[1]) - float(evidence[0]))


def _outcome(case: ET.Element, verdict: Json) -> None:
    """The verdict's own word and reason in the element that pytest chose for its outcome."""
    for element in case:
        if element.tag in ("failure", "error", "skipped"):
            element.set("type", str(verdict["verdict"]))
            element.set("message", sentence(verdict.get("why")))
            element.text = f"{verdict['verdict']}: {sentence(verdict.get('why'))}"
