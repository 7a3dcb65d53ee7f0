"""All that a report says, chosen, ordered and rounded; the template only places it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from reports import header, rows, wording
from reports.cell_map import CellMap, cell_map
from reports.families import Family, Summary, counted, families, summary
from reports.id_map import IdMap, id_map
from reports.low_start_map import LowStartMap, low_start_map
from reports.profile import Profile, charge_profile
from reports.rows import Budget, Pair, StageRow, VerdictRow
from reports.source import Source
from reports.tap_map import TapMap, tap_map
from reports.temperature_map import TemperatureMap, temperature_map
from reports.wording import Word, clean


@dataclass(frozen=True)
class View:
    """One report. Every text is plain (not yet escaped for HTML), every number is already written out."""

    rehearsal: bool
    overall: Word
    tally: str
    model: str
    procedure: str
    purpose: str
    dated: str
    duration: str
    run: str
    number: str
    judged: str
    person: str
    reason: str
    ending: str
    safe: bool
    alarms: tuple[str, ...]
    way_to_safety: tuple[str, ...]
    deviations: tuple[str, ...]
    changed: tuple[str, ...]
    verdicts: tuple[VerdictRow, ...]
    families: tuple[Family, ...]
    summary: Summary
    elsewhere: tuple[str, ...]
    id_map: IdMap | None
    temperature_map: TemperatureMap | None
    cell_map: CellMap | None
    low_start_map: LowStartMap | None
    tap_map: TapMap | None
    has_charge: bool
    algorithm: str
    algorithm_note: str
    profile: Profile | None
    profile_note: str
    stages: tuple[StageRow, ...]
    findings: tuple[Pair, ...]
    budgets: tuple[Budget, ...]
    order: tuple[Pair, ...]
    order_lacks: tuple[str, ...]
    inputs: tuple[tuple[str, str, str, str], ...]
    instruments: tuple[tuple[str, str, str, str, str], ...]
    surroundings: tuple[Pair, ...]
    protections: tuple[Pair, ...]
    missing_hardware: tuple[str, ...]
    integrity: tuple[str, ...]
    notes: tuple[str, ...]
    measurands: tuple[Pair, ...]
    rules: tuple[str, ...]
    cautions: tuple[str, ...]
    not_covered: tuple[str, ...]


def build(source: Source) -> View:
    """The view of a judgement. Same source, same view: no clock, no machine, no randomness is read.

    KeyError or ValueError where the judgement lacks what the report needs of it.
    """
    manifest, judgement = source.manifest, source.judgement
    verdicts = source.verdicts["verdicts"]
    judged = tuple(
        rows.verdict_row(number, one, source.measurands, source.curve) for number, one in enumerate(verdicts, 1)
    )
    classification = source.findings.get("classification") or {}
    profile = _profile(source, classification)
    rehearsal = bool(source.verdicts["rehearsal"]) or bool(manifest.get("rehearsal"))
    return View(
        rehearsal=rehearsal,
        overall=wording.verdict_word(source.verdicts["overall"]),
        tally=wording.tally([str(verdict["verdict"]) for verdict in verdicts]),
        model=clean(header.part(manifest, "specification").get("model")),
        procedure=clean(header.part(manifest, "procedure").get("name")),
        purpose=clean(header.part(manifest, "procedure").get("purpose")),
        dated=header.dated(manifest, virtual=rehearsal),
        duration=wording.clock_time(float(manifest.get("duration_s") or 0.0)),
        run=clean(manifest.get("run")),
        number=clean(source.name),
        judged=wording.utc(judgement.get("utc")),
        person=clean(judgement.get("person") or manifest.get("person")),
        reason=clean(judgement["reason"]) if judgement.get("reason") is not None else "",
        ending=header.ending(manifest, source.events),
        safe=manifest.get("safe") is True,
        alarms=header.alarms(source.events),
        way_to_safety=header.way_to_safety(source.events),
        deviations=header.unique(judgement.get("deviations"), manifest.get("deviations")),
        changed=header.unique(judgement.get("changed")),
        verdicts=judged,
        families=families(judged),
        summary=summary(judged),
        elsewhere=counted(judgement.get("not_part_of_procedure") or ()),
        **_maps(source),
        has_charge=_has_charge(source),
        algorithm=_algorithm(classification),
        algorithm_note=_sentence(clean(classification.get("why"))) if classification.get("why") else "",
        profile=profile,
        profile_note=_profile_note(source, profile),
        stages=rows.stage_rows(classification),
        findings=rows.finding_rows(source.findings.get("findings") or ()),
        budgets=_budgets(source),
        order=header.order(manifest),
        order_lacks=header.order_lacks(manifest),
        inputs=header.inputs(manifest),
        instruments=header.instruments(manifest),
        surroundings=header.surroundings(manifest),
        protections=header.protections(manifest),
        missing_hardware=header.unique(manifest.get("missing_hardware")),
        integrity=header.unique(source.notes),
        notes=header.unique(event.get("text") for event in source.events if event.get("event") == "note"),
        measurands=rows.measurand_rows(verdicts, source.measurands),
        rules=_rules(verdicts),
        cautions=wording.CAUTIONS,
        not_covered=wording.NOT_COVERED,
    )


def _maps(source: Source) -> dict[str, Any]:
    """What the figures of sweeps and walks show; None for each that was not made."""
    verdicts, findings, declared = source.verdicts["verdicts"], source.findings, source.specification
    return {
        "id_map": id_map(findings.get("points") or (), verdicts, declared),
        "temperature_map": temperature_map(findings, verdicts, declared, source.curve),
        "cell_map": cell_map(findings.get("walks") or (), verdicts, declared),
        "low_start_map": low_start_map(findings.get("low_starts") or (), verdicts, declared),
        "tap_map": tap_map(findings.get("balancing"), declared),
    }


def _has_charge(source: Source) -> bool:
    """Whether the record holds a charge, or at least nothing else that a figure could show in its place."""
    begun = any(event.get("event") == "step-start" and event.get("does") == "charge" for event in source.events)
    shown = any(source.findings.get(name) for name in ("points", "walks", "low_starts", "balancing"))
    return bool(begun or source.findings.get("classification") or not shown)


def _profile(source: Source, classification: Mapping[str, Any]) -> Profile | None:
    """The charge figure's content; None for a record that ended before any charge was watched."""
    voltage, current = source.series("charger.voltage"), source.series("charger.current")
    if voltage is None or current is None:
        return None
    return charge_profile(voltage, current, classification, source.events, limits_V=_pack_limits(source))


def _pack_limits(source: Source) -> tuple[float, ...]:
    """The limits of the voltage that the charger holds, for the whole pack, V; empty where the cells are unknown."""
    for verdict in source.verdicts["verdicts"]:
        if verdict["limit"] == "charge.voltage" and source.cells is not None:
            return tuple(
                source.cells * float(verdict[side]) for side in ("low", "high") if verdict.get(side) is not None
            )
    return ()


def _profile_note(source: Source, profile: Profile | None) -> str:
    """What a reader must know of the figure: gaps, thinning, scaled capacity."""
    if profile is None:
        return "The record holds no voltage and current of a charge."
    parts = ["Voltage at the charger's own contacts, for the whole pack; current is positive into the pack."]
    if _pack_limits(source):
        parts.append("Dotted: the limits of the voltage that the charger holds.")
    parts.append("Drawn from the lowest and highest sample of each short stretch of time; the record holds them all.")
    if profile.left_out:
        parts.append(f"Left out: {profile.left_out} samples flagged as stale, overloaded or not a number.")
    compression = source.series("pack.compression")
    fastest = 1.0 if compression is None else float(np.fmax.reduce(compression.value, initial=1.0))
    if fastest > 1.0:
        parts.append(
            f"The pack's capacity was scaled: its state of charge moved up to {fastest:.3g} times faster"
            " than the real pack's, so times and charges here are not those of a real charge."
        )
    return " ".join(parts)


def _algorithm(classification: Mapping[str, Any]) -> str:
    """How the charge was classified, how surely, with what flags."""
    if not classification.get("algorithm"):
        return ""
    confidence = classification.get("confidence")
    words = f"Read as {clean(classification['algorithm'])}"
    if confidence is not None:
        words += f", confidence {wording.probability(float(confidence))} ({wording.BY_RULE})"
    flags = ", ".join(clean(flag) for flag in classification.get("flags") or ())
    return words + (f"; flags: {flags}." if flags else ".")


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:].removesuffix(".") + "."


def _budgets(source: Source) -> tuple[Budget, ...]:
    """In the order of the verdicts, then any other."""
    judged = [str(verdict["limit"]) for verdict in source.verdicts["verdicts"]]
    order = [limit for limit in dict.fromkeys(judged) if source.budgets.get(limit)]
    order += [limit for limit, budget in source.budgets.items() if budget and limit not in order]
    intervals = {verdict["limit"]: verdict.get("interval") for verdict in source.verdicts["verdicts"]}
    return tuple(rows.budget_table(limit, source.budgets[limit], intervals.get(limit)) for limit in order)


def _rules(verdicts: list[dict[str, Any]]) -> tuple[str, ...]:
    """The decision rules in use, each in a sentence with its source."""
    used = dict.fromkeys(str(verdict["rule"]) for verdict in verdicts if verdict.get("rule"))
    return tuple(wording.RULES.get(rule, clean(rule)) for rule in used)
