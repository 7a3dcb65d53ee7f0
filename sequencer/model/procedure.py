"""The procedure: steps in order and the findings it judges. Speaks of pack and charger, never of an instrument."""

from __future__ import annotations

from collections.abc import Mapping

from pydantic import Field, model_validator

from drivers.text.binding import Bound, Written, bind
from drivers.text.document import Document, Mapped, Scalar, scalars, substitute
from drivers.text.faults import Faults, Place
from drivers.text.measures import refuse
from drivers.text.nearest import unknown
from sequencer.model.steps import (
    MAX_COMPRESSION,
    SWEEPS,
    FullCharge,
    Insert,
    RaiseCell,
    Remove,
    StartLow,
    Step,
    SweepId,
    SweepTemperature,
    WatchTaps,
)

__all__ = [
    "MAX_COMPRESSION",
    "FullCharge",
    "Insert",
    "Procedure",
    "RaiseCell",
    "Remove",
    "StartLow",
    "Step",
    "SweepId",
    "SweepTemperature",
    "WatchTaps",
    "load_procedure",
]


class Procedure(Written):
    """Steps in order, and the findings to judge."""

    name: str
    purpose: str
    claims: dict[str, str] = Field(default_factory=dict, description="kinds of defect, from which size on")
    parameters: dict[str, str] = Field(default_factory=dict, description="values for $name in the steps")
    steps: tuple[Step, ...]
    judge: tuple[str, ...]

    @model_validator(mode="after")
    def _opens_with_a_control(self) -> Procedure:
        first = self.steps[0] if self.steps else None
        if first is None or first.insert is None or first.expect != "charges":
            raise refuse(
                "the first step must be an insert with 'expect: charges': else a dead charger looks like a safe one"
            )
        return self

    @model_validator(mode="after")
    def _handles_one_pack(self) -> Procedure:
        inserted = False
        for number, step in enumerate(self.steps, 1):
            own = step.insert is not None or step.kind in SWEEPS
            if own and inserted:
                raise refuse(f"step {number} inserts a pack while one is in: a 'remove' was expected before it")
            if not own and not inserted:
                raise refuse(f"step {number} ({step.kind}) needs a pack: an 'insert' was expected before it")
            inserted = step.remove is None and step.kind not in SWEEPS
        return self


def load_procedure(document: Document, changes: Mapping[str, str], faults: Faults) -> Bound[Procedure] | None:
    """Read a procedure with its parameters put in; `changes` are --set values. Faults are added to `faults`."""
    root = document.root
    if not isinstance(root, Mapped):
        return bind(Procedure, document, "procedure", faults)
    parameters = root.entries.get("parameters")
    values = dict(parameters.entries) if isinstance(parameters, Mapped) else {}
    for name, text in changes.items():
        if name not in values:
            faults.add(Place(f"--set {name}={text}"), unknown(name, values, "parameter"))
        else:
            values[name] = Scalar(Place(f"--set {name}={text}"), text)
    filled = substitute(root, values, changes)
    for scalar in scalars(filled):
        if scalar.text is not None and scalar.text.startswith("$"):
            faults.add(scalar.place, unknown(scalar.text.removeprefix("$"), values, "parameter"))
    return bind(Procedure, document, "procedure", faults, root=filled)
