"""From a sealed record to verdicts in a numbered folder. Needs no bench; the same record gives the same verdicts."""

from __future__ import annotations

import json
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from drivers.text.measures import Rule
from drivers.text.si import si
from sequencer.analysis.decision import (
    Decision,
    decide,
    decide_class,
    decide_screening,
    decide_state,
    exit_status,
    overall,
)
from sequencer.analysis.intervals import decide_interval
from sequencer.analysis.uncertainty import Budget
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.balanced import as_data, balance_findings, beyond_screening
from sequencer.engine.evidence import Evidence, Window, open_evidence
from sequencer.engine.found import Found
from sequencer.engine.judgements import changes, latest, new_judgement, write_json
from sequencer.engine.low_found import low_start_findings
from sequencer.engine.low_points import LowStarts
from sequencer.engine.manifest import program_version, sha256
from sequencer.engine.measured import ChargeStep, measure_charges
from sequencer.engine.swept import Points, id_findings, start_findings
from sequencer.engine.walked import Walks, walk_findings
from sequencer.model.limits import LimitRow
from sequencer.model.low_start import OR

# What a trip of the charger's own doing says something about; the first of them that is declared.
TRIP_LIMITS = {
    "charger voltage": ("charge.end_voltage", "charge.voltage"),
    "node voltage": ("charge.end_voltage", "charge.voltage"),
    "charger current": ("charge.stage1.current",),
    "supply current": ("charge.stage1.current",),
    "charge": ("charge.ends",),
}

#: How the limits begin that a kind of step gives findings for.
GIVES = {
    "charge": "charge.",
    "sweep_id": "id.",
    "sweep_temperature": "temperature.",
    "raise_cell": "tap_trip.",
    "watch_taps": "balancing.",
    "start_low": "low_start.",
}
#: What a charger need not show: where it shows none, its limits are not applicable.
OPTIONAL = ("charge.current_after_end", "tap_trip.release", "low_start.probe_current", "low_start.probe_time")


@dataclass(frozen=True)
class Rejudging:
    """What is asked for beside the record: nothing, or a deviation from it."""

    specification: tuple[str, bytes] | None = None
    rule: Rule | None = None
    reason: str | None = None
    person: str | None = None


@dataclass(frozen=True)
class Judgement:
    """A judgement folder with its verdicts; the report is written into it next."""

    folder: Path
    document: dict[str, Any]
    exit_status: int
    bench_trip: bool


def judge(record: Path, asked: Rejudging, utc: str) -> Judgement:
    """Judge a sealed record into a new numbered folder. Raises RecordError, BadInput; the record is not touched."""
    evidence = open_evidence(record, asked.specification)
    previous = latest(record)
    rows = evidence.declared.rows(evidence.procedure.judge, asked.rule)
    found, classification = _findings(evidence, rows)
    verdicts = [_verdict(row, found.get(row.name) or _not_made(row, evidence)) for row in rows]
    words = [verdict["verdict"] for verdict in verdicts]
    counted = [one["verdict"] for one in verdicts if not beyond_screening(one, evidence)]
    document = {"overall": overall(counted), "rehearsal": bool(evidence.manifest["rehearsal"]), "verdicts": verdicts}
    folder = new_judgement(record)
    (folder / "specification.yaml").write_bytes(evidence.specification_bytes)
    write_json(folder / "verdicts.json", document)
    write_json(folder / "findings.json", {**_findings_document(found, classification), **_maps(evidence)})
    write_json(folder / "budgets.json", {name: one.budget.as_dict() for name, one in found.items() if one.budget})
    write_json(folder / "judgement.json", _judgement_document(evidence, asked, folder, document, previous, utc))
    left_out = sum(
        beyond_screening(one, evidence) or (one["verdict"] == "not run" and _given_up(one["limit"], evidence))
        for one in verdicts
    )
    trip = evidence.trip
    return Judgement(folder, document, exit_status(words, left_out=left_out), bool(trip and trip["cause"] == "bench"))


def _findings(evidence: Evidence, rows: list[LimitRow]) -> tuple[dict[str, Found], dict[str, Any] | None]:
    found = {"charges": measure_charges(evidence), **_signal_findings(evidence)}
    window = evidence.window("charge")
    if window is not None:
        step = ChargeStep(evidence, window)
        return {**found, **step.findings()}, step.classification.as_dict()
    trip = evidence.trip
    if trip is not None and trip["cause"] == "charger":
        name, tripped = _tripped(evidence, trip, rows)
        found[name] = tripped
    return found, _unfinished(evidence)


def _signal_findings(evidence: Evidence) -> dict[str, Found]:
    """What sweeps and walks found; nothing where there were none."""
    accuracy = _accuracy(evidence)
    starts = start_findings(evidence, accuracy)
    swept = {**id_findings(evidence, accuracy), **starts, **walk_findings(evidence, accuracy)}
    return {**swept, **low_start_findings(evidence, accuracy), **balance_findings(evidence, accuracy)}


def _maps(evidence: Evidence) -> dict[str, Any]:
    """Points and walks as data, for the figures of a report."""
    accuracy = _accuracy(evidence)
    points = [one for name in ("id", "temperature") for one in Points.of(evidence, accuracy, name).as_list(name)]
    walks = Walks(evidence, accuracy).as_list() if evidence.events("walk") else []
    balancing = as_data(evidence, accuracy)
    low = LowStarts.of(evidence, accuracy).as_list() if evidence.events("low-start") else []
    return {
        "points": points,
        "walks": walks,
        "low_starts": low,
        **({} if balancing is None else {"balancing": balancing}),
    }


def _accuracy(evidence: Evidence) -> Accuracy:
    highest_V = min(evidence.bench.bench.limits.node, evidence.pack.cells * evidence.pack.cell_bound_V)
    return Accuracy(evidence.bench, highest_V)


def _unfinished(evidence: Evidence) -> dict[str, Any] | None:
    """The classification of a charge that was cut short: for the figure, not for a verdict."""
    begun_s = evidence.begun("charge")
    current = evidence.trace("charger.current")
    if begun_s is None or current.value.size < 10:
        return None
    try:
        return ChargeStep(evidence, Window(begun_s, float(current.time_s[-1]), {})).classification.as_dict()
    except ValueError:
        return None  # too little of it to read anything


def _tripped(evidence: Evidence, trip: dict[str, Any], rows: list[LimitRow]) -> tuple[str, Found]:
    """The finding behind a trip that was the charger's doing: what was read last before it."""
    concerned = TRIP_LIMITS[trip["quantity"]]
    thresholds = [row.name for row in rows if row.finding == "charge.stage.threshold"][::-1]
    declared = {row.name for row in rows if row.declared}
    candidates = (*concerned, *thresholds) if concerned[0] == "charge.end_voltage" else concerned
    name = next((one for one in candidates if one in declared), concerned[0])
    words = f"the guard ended the run: {trip['quantity']} {si(trip['value'], trip['unit'])}; {trip['why']}"
    moment_s = float(trip["t"])
    if name == "charge.ends":
        return name, Found(seen="does not end", start_s=0.0, end_s=moment_s, words=words)
    accuracy = _accuracy(evidence)
    if concerned[0] == "charge.end_voltage":
        return name, _tripped_voltage(evidence, accuracy, moment_s, words)
    return name, _tripped_current(evidence, accuracy, moment_s, words)


def _tripped_current(evidence: Evidence, accuracy: Accuracy, moment_s: float, words: str) -> Found:
    """The last reading: a mean would take in what flowed before the charger went too far."""
    current = evidence.trace("charger.current").within(moment_s - 2.0, moment_s)
    if current.value.size == 0:
        return Found(trouble=f"no reading before the trip; {words}")
    last_A, last_s = float(current.value[-1]), float(current.time_s[-1])
    budget = Budget(last_A, "A", tuple(accuracy.current(last_A)))
    return Found(budget=budget, n=1, start_s=last_s, end_s=moment_s, words=words)


def _tripped_voltage(evidence: Evidence, accuracy: Accuracy, moment_s: float, words: str) -> Found:
    voltage = evidence.trace("charger.voltage").within(moment_s - 2.0, moment_s)
    if voltage.value.size == 0:
        return Found(trouble=f"no reading before the trip; {words}")
    share = 1.0 / evidence.pack.cells
    largest_V = float(np.max(voltage.value))
    budget = Budget(largest_V * share, "V", tuple(accuracy.volts("node.charger_voltage", largest_V, share)))
    return Found(budget=budget, n=voltage.value.size, start_s=float(voltage.time_s[0]), end_s=moment_s, words=words)


def _not_made(row: LimitRow, evidence: Evidence) -> Found:
    """A finding that the bench tripped on the way to is inconclusive; one that was not looked for was not run."""
    if _given_up(row.name, evidence):
        return Found(absent="its step was left out (--only)")
    trip, why = evidence.trip, _why_absent(evidence)
    if trip is not None and trip["cause"] == "bench" and row.finding != "charges" and evidence.begun("charge"):
        return Found(trouble=why)
    return Found(absent=why)


def _why_absent(evidence: Evidence) -> str:
    match evidence.ended:
        case "complete":
            return str(evidence.manifest.get("why") or "the procedure did not get so far")
        case "trip":
            return f"the run was ended by the guard: {evidence.manifest.get('why')}"
        case "stopped":
            return f"the run was {evidence.manifest.get('why')}"
        case ended:
            return f"the run ended early ({ended}): {evidence.manifest.get('why') or 'no reason was recorded'}"


def _left_out(evidence: Evidence) -> list[str]:
    """Kinds of step that a person left out (--only), each once, in the order of the procedure."""
    kinds = dict.fromkeys(one["does"] for one in evidence.events("step-left-out"))
    return [kind for kind in kinds if evidence.begun(kind) is None]


def _given_up(limit: str, evidence: Evidence) -> bool:
    """Whether a person chose not to have a verdict on this limit."""
    return any(limit.startswith(GIVES[kind]) for kind in _left_out(evidence) if kind in GIVES)


# verdicts


def _verdict(row: LimitRow, found: Found) -> dict[str, Any]:
    decision = _decision(row, found)
    budget = found.budget
    shown = None if budget is None or decision.verdict in ("not run", "not applicable") else budget
    band = row.band
    return {
        "limit": row.name,
        "kind": row.kind,
        "finding": row.finding,
        "verdict": decision.verdict,
        "why": decision.why,
        "value": shown.value if shown else found.seen,
        "unit": row.unit or None,
        "u": shown.u if shown else None,
        "k": shown.k if shown else None,
        "n": found.n,
        "low": band.low if band else None,
        "high": band.high if band else None,
        "expected": row.expected,
        "rule": row.rule if row.kind in ("quantity", "interval") or decision.guard_band is not None else None,
        "interval": None if found.interval is None or shown is None else list(found.interval),
        "declared": row.words,
        "guard_band": decision.guard_band,
        "p_conform": decision.p_conform,
        "evidence": None if found.start_s is None else [_number(found.start_s), _number(found.end_s)],
    }


def _number(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else round(value, 3)


def _decision(row: LimitRow, found: Found) -> Decision:
    if not row.declared:
        return Decision("not applicable", None, None, "the specification declares nothing for it")
    if found.absent is not None:
        return Decision("not run", None, None, found.absent)
    if found.trouble is not None:
        return Decision("inconclusive", None, None, found.trouble)
    if found.none is not None:
        return _none_seen(row, found.none)
    return _with_words(_judged(row, found), found.words)


def _none_seen(row: LimitRow, none: str) -> Decision:
    """The charger shows no such thing: a declared stage, phase or trip that is missing is a fail of its limit."""
    if row.finding in OPTIONAL:
        return Decision("not applicable", None, None, none)
    declared = row.words or (row.band.text if row.band is not None else row.expected)
    return Decision("fail", None, None, f"{none}; declared is {declared}")


def _judged(row: LimitRow, found: Found) -> Decision:
    if row.kind == "state":
        assert row.expected is not None
        allowed = row.expected.split(OR)
        return decide_state(found.seen, found.seen if found.seen in allowed and found.seen else row.expected)
    if row.kind == "class":
        assert row.expected is not None
        assert found.seen is not None
        return decide_class(found.seen, found.probability or 0.0, row.expected)
    if row.kind == "absence":
        return _screened(row, found)
    assert found.budget is not None
    assert row.band is not None
    budget = found.budget
    if found.interval is not None:
        low, high = found.interval
        return decide_interval(low, high, budget.u, budget.k, row.band.low, row.band.high, row.rule, unit=row.unit)
    return decide(budget.value, budget.u, budget.k, row.band.low, row.band.high, row.rule, unit=row.unit)


def _screened(row: LimitRow, found: Found) -> Decision:
    assert found.detectable is not None
    budget = found.budget
    amount = None if budget is None else (budget.value, budget.u, budget.k)
    most = None if row.band is None else row.band.high
    return decide_screening(amount, found.detectable, most, row.least or 0.0, row.rule, row.unit)


def _with_words(decision: Decision, words: str) -> Decision:
    if not words:
        return decision
    return Decision(decision.verdict, decision.guard_band, decision.p_conform, f"{decision.why}; {words}")


# documents


def _findings_document(found: dict[str, Found], classification: dict[str, Any] | None) -> dict[str, Any]:
    listed = [
        {
            "name": name,
            "kind": _kind(one),
            "value": one.budget.value if one.budget else one.seen,
            "unit": one.budget.unit if one.budget else None,
            "u": one.budget.u if one.budget else one.probability,
            "interval": None if one.interval is None else list(one.interval),
            "start_s": _number(one.start_s),
            "end_s": _number(one.end_s),
            "words": one.trouble or one.absent or one.none or one.words,
        }
        for name, one in found.items()
    ]
    return {"classification": classification, "findings": listed}


def _kind(found: Found) -> str:
    if found.interval is not None:
        return "interval"
    return "quantity" if found.budget else "state" if found.probability is None else "class"


def _judgement_document(
    evidence: Evidence, asked: Rejudging, folder: Path, document: dict[str, Any], previous: Path | None, utc: str
) -> dict[str, Any]:
    before = None if previous is None else json.loads((previous / "verdicts.json").read_text("utf-8"))
    elsewhere = evidence.declared.elsewhere(evidence.procedure.judge)
    return {
        "number": int(folder.name),
        "utc": utc,
        "rule": asked.rule or "as specified",
        "specification_sha256": sha256(evidence.specification_bytes),
        "packmime": program_version(),
        "person": asked.person,
        "reason": asked.reason,
        "deviations": [*evidence.manifest.get("deviations", []), *_deviations(evidence, asked)],
        "changed": [] if before is None else changes(before, document),
        "not_part_of_procedure": elsewhere,
    }


def _deviations(evidence: Evidence, asked: Rejudging) -> list[str]:
    said = []
    if _left_out(evidence):
        said.append(f"steps were left out (--only): {', '.join(_left_out(evidence))}")
    if asked.rule is not None:
        said.append(f"every limit was judged by the rule '{asked.rule}', whatever the specification says")
    if (
        asked.specification is not None
        and sha256(asked.specification[1]) != evidence.manifest["specification"]["sha256"]
    ):
        said.append("judged against another specification than the one of the run")
    said += [
        f"step {one['step']} ({one['does']}) was broken off at {one['at_s']:.1f} s, when the link to "
        f"{one['instrument']} was lost; with the energy off the link was opened anew, the step repeated "
        "and the broken one not judged"
        for one in evidence.events("step-broken")
    ]
    if evidence.manifest.get("ended") == "abandoned":
        said.append("the run was cut off by a crash and sealed afterwards")
    return said + [f"the record: {note}" for note in evidence.record.notes]
