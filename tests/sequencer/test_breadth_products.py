"""Every product on both families of instruments, and how long the prediction says that it takes."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

from sequencer.cli.assay_plan import shipped_products
from sequencer.engine.evidence import open_evidence
from sequencer.engine.inputs import Asked, gather
from sequencer.engine.plan import plan_of

Rehearse = Callable[..., Any]
IN_PROCESS = {"transport: sockets": "transport: in-process"}


@pytest.mark.benchmark
@pytest.mark.parametrize("spec", shipped_products())
def test_both_families_give_the_same_verdicts(rehearse_full: Rehearse, spec: str) -> None:
    one = rehearse_full("acceptance", spec=spec)
    other = rehearse_full("acceptance", spec=spec, on="virtual-plain", bench=IN_PROCESS)
    assert one.ended.ended == other.ended.ended == "complete"
    assert one.verdicts == other.verdicts
    assert set(one.verdicts.values()) <= {"pass", "not applicable", "not run"}
    assert {limit for limit, word in one.verdicts.items() if word == "not run"} <= {"balancing.none_above"}
    assert one.judged.exit_status == 0
    assert one.ended.safe.verified
    assert other.ended.safe.verified
    plan = plan_of(gather(Asked("acceptance", spec, bench="virtual-in-process")))
    print(f"{spec}: predicted {plan.bench_s:.0f} s, took {one.ended.performance['run_s']:.0f} s")
    assert plan.bench_s == pytest.approx(one.ended.performance["run_s"], rel=0.10)


@pytest.mark.parametrize(
    ("spec", "algorithm", "ratios"), [("barrow", "stepped-cc", [2 / 3, 1 / 2]), ("bellows", "cc-only", [])]
)
def test_three_levels_and_a_single_one(rehearse_full: Rehearse, spec: str, algorithm: str, ratios: list[float]) -> None:
    """Levels, thresholds, ratios and the end as the chargers' files have them, from a record of one charge."""
    run = rehearse_full("charge-profile", spec=spec, changes={"start": "3.86 V", "after": "20 s"})
    assert set(run.verdicts.values()) <= {"pass", "not applicable"}
    shown = json.loads((run.judged.folder / "findings.json").read_text("utf-8"))["classification"]
    assert (shown["algorithm"], shown["cutoff_current_A"], shown["flags"]) == (algorithm, None, [])
    assert shown["step_ratios"] == pytest.approx(ratios, rel=2e-3)
    assert run.verdicts["charge.ends"] == "pass"


def test_a_cell_is_not_raised_where_no_trip_is_declared(rehearse_full: Rehearse) -> None:
    """A pack without cell taps: nothing would be judged, and the bench stands still for it no longer than it must."""
    run = rehearse_full("tap-offset", spec="bellows")
    assert {limit: word for limit, word in run.verdicts.items() if limit != "charges"} == {
        f"tap_trip.{what}": "not applicable" for what in ("voltage", "stop_time", "release")
    }
    passed = open_evidence(run.record).events("step-passed-over")
    assert [(event["does"], event["why"]) for event in passed] == [
        ("raise_cell", "the specification declares no tap_trip")
    ]
    plan = plan_of(gather(Asked("tap-offset", "bellows", bench="virtual-in-process")))
    assert "raise_cell is passed over: the specification declares no tap_trip" in plan.notes
    assert plan.bench_s == pytest.approx(run.ended.performance["run_s"], rel=0.10)


@pytest.mark.parametrize("procedure", ["id-bands", "tap-offset"])
def test_sweeps_on_both_families_give_the_same_verdicts(rehearse_full: Rehearse, procedure: str) -> None:
    one = rehearse_full(procedure, spec="lantern")
    other = rehearse_full(procedure, spec="lantern", on="virtual-plain", bench=IN_PROCESS)
    assert one.verdicts == other.verdicts
    assert set(one.verdicts.values()) == {"pass"}


@pytest.mark.parametrize(
    "procedure",
    [
        "tap-offset",
        pytest.param("id-bands", marks=pytest.mark.benchmark),
        pytest.param("temperature-window", marks=pytest.mark.benchmark),
    ],
)
def test_the_prediction_of_bench_time_holds(rehearse_full: Rehearse, procedure: str) -> None:
    plan = plan_of(gather(Asked(procedure, "sprayer", bench="virtual-in-process")))
    run = rehearse_full(procedure)
    assert run.judged.exit_status == 0
    assert plan.bench_s == pytest.approx(run.ended.performance["run_s"], rel=0.10)
