"""The table of measurands (findings.yaml), and the limits that a specification sets on them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Literal

from pydantic import BaseModel, ConfigDict, Field

from drivers.text.binding import Written, bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.text.measures import Band, Rule
from sequencer.model.specification import Specification

Kind = Literal["quantity", "interval", "state", "class", "absence"]
FILE = "findings.yaml"


class Definition(BaseModel):
    """One measurand."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    kind: Kind
    unit: str = ""
    per: Literal["cell"] | None = None
    each: Literal["stage"] | None = None
    measures: str
    when: str
    statistic: str
    repeats: int = Field(1, ge=1)
    inconclusive: str


class Findings(Written):
    findings: dict[str, Definition]


def findings_text() -> bytes:
    """The shipped table, as bytes (goes into every record)."""
    return (files("sequencer.model") / FILE).read_bytes()


@cache
def definitions() -> dict[str, Definition]:
    """Every finding by name."""
    faults = Faults()
    bound = bind(Findings, compose(findings_text(), FILE), "findings", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model.findings


@dataclass(frozen=True)
class LimitRow:
    """One thing to be judged: `band` for a quantity, `expected` for a state or a class; neither: not declared."""

    name: str
    finding: str
    kind: Kind
    unit: str
    rule: Rule
    band: Band | None = None
    expected: str | None = None
    stage: int | None = None

    @property
    def declared(self) -> bool:
        return self.band is not None or self.expected is not None


def limit_rows(spec: Specification, judged: tuple[str, ...], rule: Rule | None = None) -> list[LimitRow]:
    """The limits behind the findings that a procedure judges, in its order; `rule` overrides every rule."""
    return [row for name in judged for row in _rows(spec, name, rule)]


def _rows(spec: Specification, name: str, rule: Rule | None) -> list[LimitRow]:
    definition = definitions()[name]
    if definition.each == "stage":
        return [_stage_row(spec, name, number, rule) for number in range(1, len(spec.charge.stages) + 1)]
    band, expected = _declared(spec, name)
    return [_row(spec, name, name, band, expected, rule, None)]


def _row(
    spec: Specification,
    label: str,
    name: str,
    band: Band | None,
    expected: str | None,
    rule: Rule | None,
    stage: int | None,
) -> LimitRow:
    definition = definitions()[name]
    own = band.rule if band is not None and band.rule is not None else spec.rule
    return LimitRow(label, name, definition.kind, definition.unit, rule or own, band, expected, stage)


def _stage_row(spec: Specification, name: str, number: int, rule: Rule | None) -> LimitRow:
    stage = spec.charge.stages[number - 1]
    what = name.rpartition(".")[2]
    band = stage.current if what == "current" else stage.threshold_per_cell
    return _row(spec, f"charge.stage{number}.{what}", name, band, None, rule, number)


def _declared(spec: Specification, name: str) -> tuple[Band | None, str | None]:
    charge = spec.charge
    match name:
        case "charges":
            return None, "charges"
        case "charge.algorithm":
            return None, charge.algorithm
        case "charge.ends":
            return None, None if charge.ends is None else "ends" if charge.ends else "does not end"
        case "charge.voltage":
            return charge.voltage_per_cell, None
        case "charge.end_voltage":
            return charge.end_voltage_per_cell, None
        case "charge.cutoff":
            return charge.cutoff, None
        case "charge.current_after_end":
            return charge.current_after_end, None
    raise KeyError(name)


def declared_elsewhere(spec: Specification, judged: tuple[str, ...]) -> list[str]:
    """Limits that the specification declares and the procedure does not judge."""
    others = tuple(name for name in definitions() if name not in judged)
    return [row.name for row in limit_rows(spec, others) if row.declared and row.finding != "charges"]
