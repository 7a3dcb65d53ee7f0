"""The predicted bench time against the run itself: within 10 %, as the plan promises."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from sequencer.engine.inputs import Asked, gather
from sequencer.engine.plan import plan_of

LONG = {"start": "3.3 V", "compression": "5", "after": "300 s"}


@pytest.mark.parametrize(("spec", "changes"), [("sprayer", {}), ("lantern", {"start": "3.9 V"}), ("sprayer", LONG)])
def test_the_run_lies_within_ten_per_cent(rehearse: Callable[..., Any], spec: str, changes: dict[str, str]) -> None:
    plan = plan_of(gather(Asked("charge-profile", spec, bench="virtual-mains-in-process", changes=changes)))
    run_s = rehearse(spec=spec, changes=changes).ended.performance["run_s"]
    print(f"{spec} {changes}: predicted {plan.bench_s:.0f} s, took {run_s:.0f} s")
    assert run_s == pytest.approx(plan.bench_s, rel=0.10)
    assert plan.insertions == 1
    assert [kind for kind, _ in plan.steps] == ["insert", "charge", "remove"]


def test_roles_and_notes() -> None:
    plan = plan_of(gather(Asked("charge-profile", bench="virtual-mains-in-process")))
    assert ("node.supply", "node_supply", "scpi-supply") in plan.roles
    assert len(plan.roles) == 6
    assert any("compressed charge" in note for note in plan.notes)
    real = plan_of(gather(Asked("charge-profile", bench="virtual-mains-in-process", changes={"compression": "1"})))
    assert not any("compressed" in note for note in real.notes)


def test_from_the_empty_end_in_real_time() -> None:
    """The declared capacity over the declared current, and the taper (computed)."""
    inputs = gather(
        Asked("charge-profile", bench="virtual-mains-in-process", changes={"start": "3.00 V", "compression": "1"})
    )
    plan = plan_of(inputs)
    # 2.5 Ah at 3 A take 3000 s; the taper lengthens it, the longest time of the step ends it.
    assert 3000.0 < plan.bench_s < 4 * 3600.0
