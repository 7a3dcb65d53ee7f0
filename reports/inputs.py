"""What a record's own input files say that a report needs: measurands, cells, declared bands, thermistor curve."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeVar

if TYPE_CHECKING:
    from drivers.text.binding import Written
    from sequencer.model.curves import Curve
    from sequencer.model.specification import Specification

    M = TypeVar("M", bound=Written)


@dataclass(frozen=True)
class Measurand:
    """One finding as it was defined when it was measured."""

    measures: str
    when: str
    statistic: str
    per_cell: bool


def measurands(content: bytes) -> Mapping[str, Measurand]:
    """The findings of a record's findings.yaml by name; none where this program cannot read them."""
    from sequencer.model.findings import FILE, Findings

    bound = _bound(Findings, content, FILE, "findings")
    if bound is None:
        return {}
    return {
        name: Measurand(one.measures, one.when, one.statistic, one.per == "cell")
        for name, one in bound.findings.items()
    }


def cells(content: bytes) -> int | None:
    """The number of cells of a record's pack.yaml; None where this program cannot read it."""
    from sequencer.model.pack import Pack

    bound = _bound(Pack, content, "pack.yaml", "pack")
    return None if bound is None else bound.cells


def specification(content: bytes) -> Specification | None:
    """The declared behaviour in a specification.yaml; None where this program cannot read it."""
    from sequencer.model.specification import Specification

    return _bound(Specification, content, "specification.yaml", "specification")


def curve(content: bytes) -> Curve | None:
    """The thermistor's curve in a record's curve.yaml; None where this program cannot read it."""
    from sequencer.model.curves import Curve

    return _bound(Curve, content, "curve.yaml", "curve")


def _bound(model: type[M], content: bytes, name: str, kind: str) -> M | None:
    """A file of the record by its model. The record was checked before its run: what cannot be read is of another
    version, and costs the report an explanation, not its verdicts."""
    from drivers.text.binding import bind
    from drivers.text.document import compose
    from drivers.text.faults import BadInput, Faults

    try:
        bound = bind(model, compose(content, name), kind, Faults())
    except BadInput:
        return None
    return None if bound is None else bound.model
