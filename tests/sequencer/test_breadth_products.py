"""Both demo products on both families of instruments, and how long the prediction says that it takes."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

Rehearse = Callable[..., Any]
IN_PROCESS = {"transport: sockets": "transport: in-process"}


@pytest.mark.benchmark
@pytest.mark.parametrize("spec", ["sprayer", "lantern"])
def test_both_families_give_the_same_verdicts(rehearse_full: Rehearse, spec: str) -> None:
    one = rehearse_full("acceptance", spec=spec)
    other = rehearse_full("acceptance", spec=spec, on="virtual-plain", bench=IN_PROCESS)
    assert one.ended.ended == other.ended.ended == "complete"
    assert one.verdicts == other.verdicts
    assert set(one.verdicts.values()) <= {"pass", "not applicable"}
    assert one.ended.safe.verified
    assert other.ended.safe.verified


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
    from sequencer.engine.inputs import Asked, gather
    from sequencer.engine.plan import plan_of

    plan = plan_of(gather(Asked(procedure, "sprayer", bench="virtual-in-process")))
    run = rehearse_full(procedure)
    assert run.judged.exit_status == 0
    assert plan.bench_s == pytest.approx(run.ended.performance["run_s"], rel=0.10)
