"""The table of measurands, and the limits that a specification sets on them."""

from __future__ import annotations

import pytest

from drivers.text.faults import Faults, Place
from drivers.text.measures import Band
from sequencer.engine.inputs import Asked, gather
from sequencer.model.curves import load_curve
from sequencer.model.findings import definitions
from sequencer.model.limits import Declared
from sequencer.model.specification import Specification


@pytest.fixture(params=["sprayer", "lantern"])
def spec(request: pytest.FixtureRequest) -> Specification:
    return gather(Asked("charge-profile", request.param, bench="virtual-mains-in-process")).specification.model


def declared(specification: Specification) -> Declared:
    bound = load_curve("ntc-10k-3435", Faults(), Place("test"))
    assert bound is not None
    return Declared(specification, 5, bound.model)


def test_every_measurand_says_what_where_when_and_what_makes_it_inconclusive() -> None:
    """Terms of a measurand's definition: JCGM 200:2012, 2.3 (from memory), and what a repeat of the test needs."""
    for name, definition in definitions().items():
        assert all((definition.measures, definition.when, definition.statistic, definition.inconclusive)), name
        assert (definition.unit != "") == (definition.kind in ("quantity", "interval", "absence")), name


def test_rows_follow_the_procedures_order_one_a_stage(spec: Specification) -> None:
    rows = declared(spec).rows(("charge.ends", "charge.stage.current", "charges"))
    stages = [f"charge.stage{number}.current" for number in range(1, len(spec.charge.stages) + 1)]
    assert [row.name for row in rows] == ["charge.ends", *stages, "charges"]
    assert rows[-1].expected == "charges"


def test_a_limits_own_rule_wins_over_the_specifications_and_a_person_over_both(spec: Specification) -> None:
    own = Band(None, 0.01, rule="simple", text="below 10 mA")
    changed = spec.model_copy(update={"charge": spec.charge.model_copy(update={"current_after_end": own})})
    judged = ("charge.current_after_end", "charge.end_voltage")
    assert [row.rule for row in declared(changed).rows(judged)] == ["simple", "guarded"]
    assert [row.rule for row in declared(changed).rows(judged, "guarded")] == ["guarded", "guarded"]


def test_what_is_not_declared_is_a_row_without_a_limit(spec: Specification) -> None:
    rows = {row.name: row for row in declared(spec).rows(tuple(definitions()))}
    stepped = spec.charge.algorithm == "stepped-cc"
    assert rows["charge.voltage"].declared is not stepped
    assert rows["charge.stage1.threshold"].declared is stepped


def test_limits_that_the_procedure_leaves_out_are_named(spec: Specification) -> None:
    everything = tuple(definitions())
    assert declared(spec).elsewhere(everything) == []
    assert declared(spec).elsewhere(("charges",)) != []
    left = declared(spec).elsewhere(tuple(name for name in everything if name != "charge.ends"))
    assert left == ["charge.ends"]
