"""What an assay is made of: products, defects drawn onto them, claims; and every fault of what was asked."""

from __future__ import annotations

import re
import shutil
from fnmatch import fnmatchcase
from pathlib import Path

import pytest

from drivers.text.faults import BadInput
from drivers.virtual.defects import shipped_defects
from sequencer.cli.assay_plan import plan_assay, shipped_products
from sequencer.engine.inputs import FOLDERS
from sequencer.model.limits import Declared


def test_products_ship_as_specification_and_charger() -> None:
    assert {"sprayer", "lantern", "barrow", "bellows"} <= set(shipped_products())
    assert "sprayer-power" not in shipped_products()  # a charger without a specification of its name


def test_every_shipped_defect_is_tried_and_can_be_found_by_acceptance() -> None:
    """A pattern that matches no limit of the charger it is tried on could never be met."""
    plan = plan_assay("acceptance", [], "all", range(1, 4))
    tried = [trial for trial in plan.trials if trial.defect is not None]
    assert {trial.defect.name for trial in tried if trial.defect} == set(shipped_defects())
    assert plan.untried == ()
    for trial in tried:
        inputs = trial.inputs
        pack, specification = inputs.pack.model, inputs.specification.model
        curve = inputs.curve.model if inputs.curve else None
        rows = Declared(specification, pack.cells, curve).rows(inputs.procedure.model.judge)
        names = [row.name for row in rows if row.declared]
        assert trial.defect is not None
        for pattern in trial.defect.limits:
            assert any(fnmatchcase(name, pattern) for name in names), (trial.words, pattern)


def test_the_same_seeds_give_the_same_trials() -> None:
    one, other = (plan_assay("charge-profile", [], "all", [7]) for _ in range(2))
    assert [(t.words, t.charger.model) for t in one.trials] == [(t.words, t.charger.model) for t in other.trials]


def claiming(folder: Path, claims: str) -> str:
    """acceptance with other claims."""
    text = (FOLDERS["procedure"] / "acceptance.yaml").read_text("utf-8")
    said = re.search(r"^claims: \{.*?\}", text, re.DOTALL | re.MULTILINE)
    assert said is not None
    path = folder / "p.yaml"
    path.write_text(text.replace(said[0], f"claims: {claims}"), "utf-8")
    return str(path)


def test_claims_count_from_their_size_on(tmp_path: Path) -> None:
    asked = "regulation-high,no-termination,dead"
    procedure = claiming(tmp_path, "{regulation-high: 60 mV, no-termination: any}")
    plan = plan_assay(procedure, ["sprayer"], asked, range(12))
    claimed = {True: set(), False: set()}
    for trial in plan.trials:
        if trial.defect is not None and trial.defect.name == "regulation-high":
            assert trial.size is not None
            claimed[trial.claimed].add(trial.size.value >= 0.060)
        elif trial.defect is not None:
            assert trial.claimed == (trial.defect.name == "no-termination")
    assert claimed == {True: {True}, False: {False}}


def test_a_claim_that_no_size_reaches_is_untried(tmp_path: Path) -> None:
    plan = plan_assay(claiming(tmp_path, "{regulation-high: 1 V}"), ["sprayer"], "all", [1])
    assert plan.untried == ("regulation-high",)


def test_claims_left_out_on_purpose_are_not_untried(tmp_path: Path) -> None:
    procedure = claiming(tmp_path, "{regulation-high: 30 mV, no-termination: any}")
    assert plan_assay(procedure, ["lantern"], "all", [1]).untried == ()  # a charger without a regulated voltage
    assert plan_assay(procedure, [], "dead", [1]).untried == ()


@pytest.mark.parametrize(
    ("claims", "words"),
    [
        ("{regulation-hgh: 30 mV}", "p.yaml:4:10: unknown kind of defect 'regulation-hgh'; did you mean"),
        ("{regulation-high: 3 s}", '"3 s" is a time; sizes of this kind are: voltage'),
        ("{regulation-high: much}", 'or "any"'),
        ("{no-termination: 3 s}", "defects of this kind have no size"),
    ],
)
def test_claims_that_mean_nothing(tmp_path: Path, claims: str, words: str) -> None:
    with pytest.raises(BadInput) as bad:
        plan_assay(claiming(tmp_path, claims), ["sprayer"], "all", [1])
    assert words in str(bad.value)


@pytest.mark.parametrize(
    ("procedure", "spec", "defects", "words"),
    [
        ("acceptence", [], "all", "did you mean 'acceptance'?"),
        ("acceptance", ["sprayr"], "all", "--spec: unknown specification 'sprayr'; did you mean 'sprayer'?"),
        ("acceptance", [], "deed,regulation-low", "--defects: unknown defect 'deed'; did you mean 'dead'?"),
        ("acceptance", [], ",", "--defects: 'all', or names"),
    ],
)
def test_bad_words(procedure: str, spec: list[str], defects: str, words: str) -> None:
    with pytest.raises(BadInput) as bad:
        plan_assay(procedure, spec, defects, [1])
    assert words in str(bad.value)


def test_a_defect_that_fits_no_charger_is_said() -> None:
    plan = plan_assay("charge-profile", ["sprayer"], "step-threshold-high", [1])
    assert [trial.defect for trial in plan.trials] == [None]
    assert plan.notes == ("step-threshold-high was not tried: none of these chargers is what it is for",)


def test_a_specification_by_path_takes_the_charger_of_its_name(tmp_path: Path) -> None:
    shutil.copy(FOLDERS["specification"] / "lantern.yaml", tmp_path)
    plan = plan_assay("charge-profile", [str(tmp_path / "lantern.yaml")], "dead", [1])
    assert {trial.product for trial in plan.trials} == {"lantern"}
