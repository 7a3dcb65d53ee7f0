"""The table of measurands (findings.yaml): what each finding is, defined before it is measured."""

from __future__ import annotations

from functools import cache
from importlib.resources import files
from typing import Literal

from pydantic import BaseModel, ConfigDict, Field

from drivers.text.binding import Written, bind
from drivers.text.document import compose
from drivers.text.faults import Faults

Kind = Literal["quantity", "interval", "state", "class", "absence"]
FILE = "findings.yaml"


class Definition(BaseModel):
    """One measurand."""

    model_config = ConfigDict(extra="forbid", frozen=True)
    kind: Kind
    unit: str = ""
    per: Literal["cell"] | None = None
    each: Literal["stage", "band", "cell", "start"] | None = None
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
