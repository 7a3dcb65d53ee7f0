"""The procedure: steps in order and the findings it judges. Speaks of pack and charger, never of an instrument."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, WithJsonSchema, model_validator

from drivers.text.binding import Bound, Written, bind
from drivers.text.document import Document, Mapped, Scalar, scalars, substitute
from drivers.text.faults import Faults, Place
from drivers.text.measures import PositiveSeconds, PositiveVolts, Seconds, refuse
from drivers.text.nearest import unknown

MAX_COMPRESSION = 100.0


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _times(value: Any) -> float:
    """How many times faster: a plain number from 1 to MAX_COMPRESSION."""
    try:
        number = float(value)
    except (TypeError, ValueError) as reason:
        raise refuse(f'"{value}" is not a number; expected such as 10 (ten times faster than the pack)') from reason
    if not 1.0 <= number <= MAX_COMPRESSION:
        raise refuse(f'"{value}" must lie between 1 and {MAX_COMPRESSION:g}')
    return number


# As the file may hold it: a number, or the $name of a parameter.
_TIMES_SCHEMA = WithJsonSchema(
    {"anyOf": [{"type": "number", "minimum": 1, "maximum": MAX_COMPRESSION}, {"type": "string"}]}
)


class Insert(_Part):
    """Put a pack in: its cells at this open-circuit voltage."""

    cell_voltage: PositiveVolts


class FullCharge(_Part):
    """Charge until the charger ends it."""

    compression: Annotated[float, BeforeValidator(_times), _TIMES_SCHEMA] = Field(
        1.0, description="at most so many times faster than the pack's capacity, away from declared events"
    )
    after: Seconds = Field(30.0, description="watched so long after the end")
    longest: PositiveSeconds = Field(4 * 3600.0, description="given up after so long")


class Remove(_Part):
    """Take the pack out."""


class Step(_Part):
    """One step: exactly one of insert, charge, remove."""

    insert: Insert | None = None
    charge: FullCharge | None = None
    remove: Remove | None = None
    expect: Literal["charges"] | None = Field(None, description="what must be seen; if not, a fail, and the run ends")
    finding: str | None = Field(None, description="name under which the step's findings are judged")

    @model_validator(mode="after")
    def _one_kind(self) -> Step:
        kinds = [kind for kind in ("insert", "charge", "remove") if getattr(self, kind) is not None]
        if len(kinds) != 1:
            raise refuse(f"a step does one thing: insert, charge or remove; this one has {kinds or 'none of them'}")
        if self.expect and self.insert is None:
            raise refuse("'expect' belongs to an insert step")
        if self.finding and self.charge is None:
            raise refuse("'finding' belongs to a charge step")
        return self

    @property
    def kind(self) -> str:
        return next(kind for kind in ("insert", "charge", "remove") if getattr(self, kind) is not None)


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
            if step.insert is not None and inserted:
                raise refuse(f"step {number} inserts a pack while one is in: a 'remove' was expected before it")
            if step.insert is None and not inserted:
                raise refuse(f"step {number} ({step.kind}) needs a pack: an 'insert' was expected before it")
            inserted = step.remove is None
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
    filled = substitute(root, values)
    for scalar in scalars(filled):
        if scalar.text is not None and scalar.text.startswith("$"):
            faults.add(scalar.place, unknown(scalar.text.removeprefix("$"), values, "parameter"))
    return bind(Procedure, document, "procedure", faults, root=filled)
