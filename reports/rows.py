"""The rows of a report's tables: chosen, ordered and rounded text from the record's numbers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports import wording
from reports.inputs import Measurand
from reports.insertions import bracket_of
from reports.limit_bar import Bar, limit_bar
from reports.limit_words import limit_words
from reports.temperature_map import celsius_span
from reports.wording import Word, clean, si

if TYPE_CHECKING:
    from sequencer.model.curves import Curve

Json = Mapping[str, Any]
# Stages whose voltage the classifier states as a mean.
_MEAN_VOLTAGE = ("cv", "float", "pulse")


@dataclass(frozen=True)
class VerdictRow:
    """One limit: the verdict and its reason first, then what was measured against what."""

    node: str
    limit: str
    words: str
    verdict: Word
    why: str
    result: str
    also: str
    per: str
    coverage: str
    demanded: str
    bar: Bar | None
    basis: tuple[str, ...]
    evidence: str


@dataclass(frozen=True)
class StageRow:
    """One stage of the charge."""

    number: int
    words: str
    span: str
    duration: str
    current: str
    voltage: str
    charge: str


@dataclass(frozen=True)
class Contribution:
    """One line of an uncertainty budget, each value with its unit."""

    name: str
    u: str
    sensitivity: str
    share: str
    distribution: str
    dof: str
    source: str


@dataclass(frozen=True)
class Budget:
    """The uncertainty budget of one finding (JCGM 100, clause 7.2.7)."""

    limit: str
    result: str
    summary: str
    contributions: tuple[Contribution, ...]


@dataclass(frozen=True)
class Pair:
    """A name and what it is."""

    name: str
    text: str


def verdict_row(
    number: int, verdict: Json, measurands: Mapping[str, Measurand], curve: Curve | None = None
) -> VerdictRow:
    """The row of one entry of verdicts.json; ValueError for a verdict that is none of the seven words."""
    unit = str(verdict.get("unit") or "")
    U = expanded(verdict)
    value, low, high = verdict.get("value"), verdict.get("low"), verdict.get("high")
    number_like = isinstance(value, int | float) and not isinstance(value, bool)
    ends = bracket_of(verdict)
    shown = ends or (float(value) if number_like and value is not None else None)
    guard = float(verdict.get("guard_band") or 0.0)
    k, evidence = verdict.get("k"), verdict.get("evidence")
    finding = measurands.get(str(verdict.get("finding")))
    return VerdictRow(
        node=node_name(number),
        limit=clean(verdict["limit"]),
        words=limit_words(verdict),
        verdict=wording.verdict_word(verdict["verdict"]),
        why=clean(verdict.get("why")),
        result=wording.measured(value, U, unit) if ends is None else wording.bracket(*ends, U, unit),
        also=_temperatures(verdict, ends, curve),
        per="per cell" if number_like and finding is not None and finding.per_cell else "",
        coverage=f"k = {k:.2f}" if U is not None and k is not None else "",
        demanded=wording.limits(low, high, verdict.get("expected"), unit, verdict.get("declared")),
        bar=None if shown is None else limit_bar(shown, U or 0.0, low, high, guard),
        basis=_basis(verdict, unit),
        evidence=_span(*evidence) if evidence else "",
    )


def _temperatures(verdict: Json, ends: tuple[float, float] | None, curve: Curve | None) -> str:
    """A limit of the thermistor, judged in ohms, as temperatures by the declared curve; empty for any other."""
    if ends is None or verdict.get("unit") != "Ω" or not str(verdict.get("finding")).startswith("temperature."):
        return ""
    span = celsius_span(curve, *ends)
    return "" if span is None else f"that is {wording.celsius(*span)}"


def measurand_rows(verdicts: Sequence[Json], measurands: Mapping[str, Measurand]) -> tuple[Pair, ...]:
    """What each judged finding measures, when, and by which statistic; each once, in the order of the verdicts."""
    names = dict.fromkeys(str(verdict.get("finding")) for verdict in verdicts)
    return tuple(
        Pair(clean(name), clean(f"{one.measures}. When: {one.when}. Statistic: {one.statistic}."))
        for name in names
        if (one := measurands.get(name)) is not None
    )


def node_name(number: int) -> str:
    """The id of a verdict in pytest, from 1: v001. Opaque, for an outside word in an id crashes pytest-html."""
    return f"v{number:03d}"


def expanded(verdict: Json) -> float | None:
    """U = k u of a verdict, None where it has no uncertainty."""
    u, k = verdict.get("u"), verdict.get("k")
    return None if u is None or k is None else float(u) * float(k)


def _basis(verdict: Json, unit: str) -> tuple[str, ...]:
    """Rule, guard band, number of readings, probability of conformity: what of them there is."""
    parts = []
    if verdict.get("rule") is not None:
        parts.append(clean(verdict["rule"]))
    if verdict.get("guard_band"):
        parts.append(f"w = {si(float(verdict['guard_band']), unit, 2)}")
    if verdict.get("n") is not None:
        parts.append(f"n = {clean(verdict['n'])}")
    if verdict.get("p_conform") is not None:
        p = wording.probability(float(verdict["p_conform"]))
        parts.append(f"p {p}" if p[0] in "<>" else f"p = {p}")
        if verdict.get("kind") == "class":  # the classifier's rules give it; no set of known charges was counted for it
            parts += wording.BY_RULE.split(", ")  # a part is never wrapped, and the column is narrow
    return tuple(parts)


def stage_rows(classification: Json) -> tuple[StageRow, ...]:
    """The stages of a classification, numbered from 1."""
    return tuple(
        StageRow(
            number=number,
            words=wording.stage_words(stage["kind"]),
            span=_span(stage.get("start_s"), stage.get("end_s")) or wording.NOTHING,
            duration=_duration(stage.get("start_s"), stage.get("end_s")),
            current=_estimate(stage.get("current_A"), "A"),
            voltage=_stage_voltage(stage),
            charge=_stage_charge(stage),
        )
        for number, stage in enumerate(classification.get("stages") or (), 1)
    )


def _stage_charge(stage: Json) -> str:
    """With its expanded uncertainty; a record judged by an older program has none."""
    charge, u = stage.get("charge_Ah"), stage.get("charge_u_Ah")
    if charge is None:
        return wording.NOTHING
    return si(float(charge), "Ah", 4) if u is None else _estimate({"value": charge, "u": u}, "Ah")


def _stage_voltage(stage: Json) -> str:
    """The mean where the voltage is held or returns, else the voltage to which the stage led, and that it is this."""
    voltage = _estimate(stage.get("voltage_V"), "V")
    return voltage if voltage == wording.NOTHING or stage["kind"] in _MEAN_VOLTAGE else f"{voltage} at its end"


def _span(start_s: float | None, end_s: float | None) -> str:
    """Two moments on the clock of the run, empty where one is not known."""
    if start_s is None or end_s is None:
        return ""
    return f"{wording.since_start(float(start_s))} to {wording.since_start(float(end_s))}"


def _duration(start_s: float | None, end_s: float | None) -> str:
    return wording.NOTHING if start_s is None or end_s is None else wording.clock_time(float(end_s) - float(start_s))


def _estimate(estimate: Json | None, unit: str) -> str:
    """A value with its standard uncertainty, as "u": a classification states no coverage factor."""
    if not estimate or estimate.get("value") is None:
        return wording.NOTHING
    return wording.measured(estimate["value"], estimate.get("u"), unit).replace(" ± ", ", u = ")


def budget_table(limit: str, budget: Json, interval: Sequence[float] | None = None) -> Budget:
    """One entry of budgets.json as a table; of an interval, the budget is that of its ends."""
    unit = str(budget.get("unit") or "")
    dof, k, u = budget.get("dof"), budget.get("k"), budget.get("u")
    parts = [
        f"u = {si(float(u), unit, 3)}" if u is not None else "",
        f"effective degrees of freedom {_dof(dof)}",
        f"k = {float(k):.2f}" if k is not None else "",
        f"shape {clean(budget.get('shape'))}" if budget.get("shape") is not None else "",
    ]
    return Budget(
        limit=clean(limit),
        result=wording.bracket(interval[0], interval[1], budget.get("U"), unit)
        if interval
        else wording.measured(budget.get("value"), budget.get("U"), unit),
        summary=", ".join(part for part in parts if part),
        contributions=tuple(_contribution(line, unit, float(u or 0.0)) for line in budget.get("contributions") or ()),
    )


def _contribution(line: Json, unit: str, total: float) -> Contribution:
    share = float(line.get("contribution") or 0.0)
    variance = f" ({100 * (share / total) ** 2:.0f} %)" if total > 0 else ""
    sensitivity = line.get("sensitivity")
    return Contribution(
        name=clean(line.get("name")),
        u=f"{float(line['u']):.3g}" if line.get("u") is not None else wording.NOTHING,
        sensitivity=f"{float(sensitivity):.4g}" if sensitivity is not None else wording.NOTHING,
        share=si(share, unit, 3) + variance,
        distribution=clean(line.get("distribution")),
        dof=_dof(line.get("dof")),
        source=clean(line.get("source")),
    )


def _dof(dof: float | None) -> str:
    """Degrees of freedom; ∞ for a contribution taken as exactly known (JCGM 100, G.4.3)."""
    if dof is None or float(dof) > 9999:
        return "∞"
    return f"{float(dof):.3g}"


def finding_rows(findings: Sequence[Json]) -> tuple[Pair, ...]:
    """Everything that the analysis read off the traces, judged or not."""
    rows = []
    for finding in findings:
        value = _estimate({"value": finding.get("value"), "u": finding.get("u")}, str(finding.get("unit") or ""))
        words = finding.get("words")
        rows.append(Pair(clean(finding.get("name")), f"{value}: {clean(words)}" if words else value))
    return tuple(rows)
