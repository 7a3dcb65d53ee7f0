"""The four zones of ILAC-G8:09/2019, 4.2.3 (guard band w = U) and simple acceptance, 4.2.1, on whole rehearsals.

The bench is ideal, so that a charger's regulation lies where its file puts it: the declared limit is 4.225 V per cell
and U is some 0.3 mV. Exit statuses are those that the command line promises.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

from sequencer.engine.judging import Judgement, Rejudging, judge

LIMIT_V = 4.225
UTC = "2026-01-01T00:00:00.000Z"
IDEAL = {"errors: 1": "errors: 0", "5 Ah}": "5 Ah, equal_readings: 0}"}
ZONES = [
    (4.2240, "pass", 0, "pass", 0),
    (4.2249, "conditional pass", 5, "pass", 0),
    (4.2251, "conditional fail", 1, "fail", 1),
    (4.2260, "fail", 1, "fail", 1),
]


def verdict_of(judgement: Judgement, limit: str = "charge.voltage") -> dict[str, Any]:
    return next(verdict for verdict in judgement.document["verdicts"] if verdict["limit"] == limit)


@pytest.mark.parametrize(("regulation_V", "guarded", "status", "simple", "simple_status"), ZONES)
def test_zones(
    rehearse: Callable[..., Any], regulation_V: float, guarded: str, status: int, simple: str, simple_status: int
) -> None:
    charger = {"voltage_per_cell": f"{regulation_V} V"}
    done = rehearse(charger=charger, bench=IDEAL, changes={"start": "4.00 V", "after": "10 s"})
    seen = done.verdict("charge.voltage")
    assert seen["value"] == pytest.approx(regulation_V, abs=1e-6)
    assert seen["guard_band"] == pytest.approx(seen["k"] * seen["u"])  # w = U
    assert seen["verdict"] == guarded
    assert done.judged.exit_status == status
    assert (seen["p_conform"] > 0.5) == (regulation_V < LIMIT_V)

    again = judge(done.record, Rejudging(), UTC)
    assert again.folder.name == "002"
    assert again.document == done.judged.document  # the same record, the same verdicts
    assert json.loads((again.folder / "judgement.json").read_text("utf-8"))["changed"] == []

    by_simple = judge(done.record, Rejudging(rule="simple", reason="what would simple acceptance say"), UTC)
    assert by_simple.folder.name == "003"
    assert verdict_of(by_simple)["verdict"] == simple
    assert verdict_of(by_simple)["guard_band"] == 0.0
    assert by_simple.exit_status == simple_status
    told = json.loads((by_simple.folder / "judgement.json").read_text("utf-8"))
    assert any("simple" in said for said in told["deviations"])
    assert told["rule"] == "simple"
    assert (any("charge.voltage" in said and simple in said for said in told["changed"])) == (simple != guarded)
    # nothing is overwritten
    assert json.loads((done.judged.folder / "verdicts.json").read_text("utf-8")) == done.judged.document


def test_another_specification_is_a_deviation(rehearse: Callable[..., Any]) -> None:
    done = rehearse(bench=IDEAL, changes={"start": "4.00 V", "after": "10 s"})
    own = (done.record / "data" / "inputs" / "specification.yaml").read_bytes()
    stricter = own.replace("4.20 V ± 25 mV".encode(), "4.22 V ± 5 mV".encode())
    assert stricter != own
    judgement = judge(done.record, Rejudging(specification=("stricter.yaml", stricter)), UTC)
    assert verdict_of(judgement)["verdict"] == "fail"
    assert judgement.exit_status == 1
    assert (judgement.folder / "specification.yaml").read_bytes() == stricter
    told = json.loads((judgement.folder / "judgement.json").read_text("utf-8"))
    assert any("another specification" in said for said in told["deviations"])
