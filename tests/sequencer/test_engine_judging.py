"""From what was found to verdicts: a missing stage, a class of another kind, a trip of either cause."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from sequencer.engine.inputs import FOLDERS
from sequencer.engine.judging import Rejudging, judge

UTC = "2026-01-01T00:00:00.000Z"
STEPPED = "[{current: 2.0 A, until: 4.20 V}]"


def test_a_declared_stage_that_is_missing_is_a_fail(rehearse: Callable[..., Any]) -> None:
    done = rehearse(
        spec="lantern", charger={"algorithm": "cc-only", "stages": STEPPED}, changes={"start": "3.9 V", "after": "20 s"}
    )
    assert {"charge.stage2.current", "charge.stage2.threshold", "charge.algorithm"} <= done.failing
    assert done.verdict("charge.stage2.current")["why"].startswith("no constant-current stage 2 was seen")
    assert done.verdict("charge.stage2.current")["value"] is None
    assert done.verdicts["charge.stage1.current"] == "pass"
    assert done.verdicts["charge.ends"] == "pass"


def test_a_stepped_charger_sold_as_cc_cv(rehearse: Callable[..., Any], tmp_path: Path) -> None:
    (tmp_path / "lantern.yaml").write_bytes((FOLDERS["specification"] / "sprayer.yaml").read_bytes())
    stages = "[{current: 3.0 A, until: 4.20 V}, {current: 1.5 A, until: 4.20 V}]"
    charger = {"cells": "5", "stages": stages}
    spec = str(tmp_path / "lantern.yaml")
    done = rehearse(spec=spec, charger=charger, changes={"start": "4.00 V", "after": "20 s"})
    assert {"charge.algorithm", "charge.voltage", "charge.cutoff"} <= done.failing
    assert done.judged.exit_status == 1


@pytest.mark.parametrize("rule", ["simple", "guarded"])
def test_findings_do_not_depend_on_the_rule(rehearse: Callable[..., Any], rule: Any) -> None:
    done = rehearse(changes={"start": "4.00 V", "after": "10 s"})
    again = judge(done.record, Rejudging(rule=rule), UTC)
    for name in ("findings.json", "budgets.json"):
        assert (again.folder / name).read_bytes() == (done.judged.folder / name).read_bytes()


def test_what_a_judgement_holds(rehearse: Callable[..., Any]) -> None:
    done = rehearse(changes={"start": "4.00 V", "after": "10 s"})
    folder = done.judged.folder
    verdicts = json.loads((folder / "verdicts.json").read_text("utf-8"))
    keys = "limit kind finding verdict why value unit u k n low high expected rule guard_band p_conform evidence"
    keys += " interval declared"  # of findings that are intervals, and limits that are written in another quantity
    for verdict in verdicts["verdicts"]:
        assert set(verdict) == set(keys.split())
    assert verdicts["overall"] == "pass"
    assert verdicts["rehearsal"] is True
    shown = json.loads((folder / "findings.json").read_text("utf-8"))["classification"]
    assert shown["algorithm"] == "cc-cv"
    told = json.loads((folder / "judgement.json").read_text("utf-8"))
    assert (told["number"], told["rule"], told["utc"]) == (1, "as specified", UTC)


def test_a_dead_charger_fails_and_nothing_else_is_said_of_it(rehearse: Callable[..., Any]) -> None:
    done = rehearse(charger={"works": "false"})
    assert done.failing == {"charges"}
    assert {word for limit, word in done.verdicts.items() if limit != "charges"} == {"not run", "not applicable"}
