"""Procedures: parameters put in, one pack at a time, a control first."""

from __future__ import annotations

import pytest

from drivers.text.document import compose
from drivers.text.faults import Faults
from sequencer.engine.inputs import FOLDERS
from sequencer.model.findings import definitions
from sequencer.model.procedure import Procedure, load_procedure

HEAD = "packmime: procedure 1\nname: n\npurpose: p\nparameters: {start: 3.7 V}\n"
FIRST = "  - insert: {cell_voltage: $start}\n    expect: charges\n"


def loaded(steps: str, judge: str = "[charges]", **changes: str) -> tuple[Procedure | None, list[str]]:
    faults = Faults()
    text = f"{HEAD}steps:\n{steps}judge: {judge}\n"
    bound = load_procedure(compose(text.encode(), "p.yaml"), changes, faults)
    return (None if bound is None else bound.model), [str(fault) for fault in faults.found]


def test_parameters_and_their_changes() -> None:
    for changes, volts in (({}, 3.7), ({"start": "3.2 V"}, 3.2)):
        procedure, faults = loaded(FIRST, **changes)
        assert faults == []
        assert procedure is not None
        assert procedure.steps[0].insert is not None
        assert procedure.steps[0].insert.cell_voltage == volts


@pytest.mark.parametrize(
    ("steps", "said"),
    [
        (FIRST + "  - charge: {}\n    remove: {}\n", "a step does one thing"),
        (FIRST + "  - expect: charges\n", "a step does one thing"),
        (FIRST + "  - remove: {}\n    expect: charges\n", "'expect' belongs to an insert step"),
        (FIRST + "  - remove: {}\n    finding: charge\n", "'finding' belongs to a step that finds something"),
        (FIRST + FIRST, "step 2 inserts a pack while one is in"),
        (FIRST + "  - remove: {}\n  - remove: {}\n", "step 3 (remove) needs a pack"),
        ("  - charge: {}\n", "the first step must be an insert"),
        (FIRST + "  - charge: {compression: 101}\n", "between 1 and 100"),
        (FIRST + "  - charge: {compression: nan}\n", "between 1 and 100"),
        (FIRST + "  - charge: {after: -1 s}\n", "must not be below 0 s"),
        (FIRST + "  - insert: {cell_voltage: $strt}\n", "did you mean 'start'?"),
    ],
)
def test_what_no_procedure_may_do(steps: str, said: str) -> None:
    _, faults = loaded(steps)
    assert any(said in fault for fault in faults), faults


@pytest.mark.parametrize("path", sorted(FOLDERS["procedure"].glob("*.yaml")), ids=lambda path: path.stem)
def test_what_ships_judges_only_what_is_defined(path: object) -> None:
    faults = Faults()
    content = path.read_bytes()  # type: ignore[attr-defined]
    bound = load_procedure(compose(content, "p.yaml"), {}, faults)
    assert faults.found == []
    assert bound is not None
    assert set(bound.model.judge) <= set(definitions())
