"""A judged record of an invented charger: real files in the shapes that a run and a judgement write."""

import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

Json = dict[str, Any]

CELLS = 5
START_S, PRECHARGE_END_S, KNEE_S, END_S, LAST_S = 17.0, 47.0, 1600.0, 2590.0, 2680.0
# The sentence for which a page must show text and nothing else: markup, quotes, script, Cyrillic, Arabic with an
# override, emoji, a control character, a template's braces.
HOSTILE = (
    "<b>bold</b> \"quoted\" 'single' </style></script><script>document.title='ran'</script>"
    "<img src=x onerror=\"document.title='ran'\">"
    " садовый насос مضخة \u202eabc\u202c 🌱 \x1b[31m {{ 7*7 }} {% raw %} $x$ &amp; null"
)
PACK = """packmime: pack 1
name: sprayer pack 5S1P
cells: 5
capacity: 2 Ah
ocv: [[0 %, 3.0 V], [50 %, 3.7 V], [100 %, 4.2 V]]
resistance: 150 mΩ
rated_current: 4 A
"""
LONG = "verylongwordwithoutanybreak" * 12


def synthetic(seed: int = 1) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Time (s), voltage (V) and current (A) of a CC-CV charge of 5 cells with precharge and a stop at 0.15 A."""
    noise = np.random.default_rng(seed)
    time_s = np.concatenate([np.arange(0, 60, 0.1), np.arange(60, LAST_S, 1.0)])
    current = np.select(
        [time_s < START_S, time_s < PRECHARGE_END_S, time_s < KNEE_S, time_s < END_S],
        [0.0, 0.2, 2.0, 2.0 * np.exp(-(time_s - KNEE_S) / 382.0)],
        0.0,
    )
    rise = np.clip((time_s - PRECHARGE_END_S) / (KNEE_S - PRECHARGE_END_S), 0, 1)
    voltage = np.where(time_s < START_S, 15.2, 15.2 + 0.4 * (time_s > START_S) + 5.4 * rise**0.85)
    voltage = np.where(time_s >= KNEE_S, 21.0, voltage)
    voltage = np.where(time_s >= END_S, 20.93, voltage)
    voltage = np.where(time_s >= LAST_S - 12, 0.0, voltage)
    return time_s, voltage + noise.normal(0, 0.002, time_s.size), current + noise.normal(0, 0.003, time_s.size)


def classification() -> Json:
    def stage(kind: str, start_s: float, end_s: float, current_A: float, voltage_V: float, charge_Ah: float) -> Json:
        return {
            "kind": kind,
            "start_s": start_s,
            "end_s": end_s,
            "current_A": {"value": current_A, "u": 0.0021},
            "voltage_V": {"value": voltage_V, "u": 0.0016},
            "charge_Ah": charge_Ah,
        }

    return {
        "algorithm": "cc-cv",
        "confidence": 0.987,
        "stages": [
            stage("precharge", START_S, PRECHARGE_END_S, 0.2003, 15.61, 0.00167),
            stage("cc", PRECHARGE_END_S, KNEE_S, 2.0004, 18.52, 0.8628),
            stage("cv", KNEE_S, END_S, 0.712, 20.9996, 0.1964),
            stage("rest", END_S, LAST_S - 12, 0.0002, 20.93, 0.0),
        ],
        "voltage_limit_V": {"value": 20.9996, "u": 0.0016},
        "step_ratios": [],
        "cutoff_current_A": {"value": 0.1502, "u": 0.0021},
        "precharge": True,
        "flags": [],
        "why": "The current stood at 2.000 A until the voltage reached 21.00 V, then fell while the voltage stood.",
    }


def verdict(limit: str, word: str, why: str, kind: str = "quantity", **more: Any) -> Json:
    blank = dict.fromkeys(
        ("value", "unit", "u", "k", "n", "low", "high", "expected", "rule", "guard_band", "p_conform", "evidence")
    )
    return {
        "limit": limit,
        "kind": kind,
        "finding": limit.replace("stage1", "stage").replace("stage2", "stage"),
        "verdict": word,
        "why": why,
        **blank,
        **more,
    }


def _of_quantity(
    value: float, unit: str, u: float, low: float | None, high: float | None, p: float, **more: Any
) -> Json:
    part = {"value": value, "unit": unit, "u": u, "k": 2.0, "n": 120, "low": low, "high": high, "rule": "guarded"}
    return part | {"guard_band": 2 * u, "p_conform": p, "evidence": [KNEE_S, END_S]} | more


def seven_words() -> Json:
    """verdicts.json with each of the seven words, and two passes."""
    q = _of_quantity
    listed = [
        verdict(
            "charges",
            "pass",
            "It charged 2.1 s after the mains came on.",
            "state",
            value="charges",
            expected="charges",
            rule="simple",
            evidence=[15.0, 60.0],
        ),
        verdict(
            "charge.algorithm",
            "pass",
            "Constant current, then constant voltage.",
            "class",
            value="cc-cv",
            expected="cc-cv",
            rule="simple",
            p_conform=0.987,
            evidence=[START_S, END_S],
        ),
        verdict(
            "charge.voltage",
            "conditional pass",
            "4.2211 V per cell is inside the limits, by less than the guard band of 6 mV.",
            **q(4.2211, "V", 0.003, 4.175, 4.225, 0.903),
        ),
        verdict(
            "charge.end_voltage",
            "conditional fail",
            "4.2266 V per cell is above 4.225 V, by less than the guard band of 6 mV.",
            **q(4.2266, "V", 0.003, None, 4.225, 0.297),
        ),
        verdict(
            "charge.stage1.current",
            "fail",
            "2.41 A is above 2.1 A by more than the guard band of 4.2 mA.",
            **q(2.41, "A", 0.0021, 1.9, 2.1, 0.0),
        ),
        verdict(
            "charge.cutoff",
            "pass",
            "150.2 mA is inside the limits by at least the guard band.",
            **q(0.1502, "A", 0.0021, 0.12, 0.18, 0.9999),
        ),
        verdict(
            "charge.stage1.threshold",
            "inconclusive",
            "The lag of the stand-in (0.41 s) exceeds a third of the charger's response time (0.5 s).",
        ),
        verdict("charge.current_after_end", "not run", "The run was stopped before the charge ended."),
        verdict("charge.stage2.current", "not applicable", "The specification declares one stage."),
    ]
    return {"overall": "fail", "rehearsal": True, "verdicts": listed}


def budget(limit: str) -> Json:
    def line(name: str, u: float, contribution: float, shape: str, dof: float | None, source: str) -> Json:
        return {
            "name": name,
            "u": u,
            "sensitivity": contribution / u,
            "contribution": contribution,
            "distribution": shape,
            "dof": dof,
            "source": source,
        }

    return {
        "value": 4.2211,
        "unit": "V",
        "u": 0.003,
        "dof": 61.3,
        "k": 2.0,
        "U": 0.006,
        "shape": "normal",
        "contributions": [
            line("meter accuracy", 0.0139, 0.00278, "rectangular", None, "dialect scpi-meter: 0.1 % of reading + 3 mV"),
            line("resolution", 0.00029, 0.000058, "rectangular", None, "1 mV digit"),
            line("repeatability", 0.0052, 0.00104, "normal", 119, "120 readings"),
            line(f"wiring of {limit}", 0.0021, 0.00042, "rectangular", None, "declared"),
        ],
    }


def manifest() -> Json:
    def file(kind: str, name: str, key: str = "name") -> Json:
        return {key: name, "file": f"data/inputs/{kind}.yaml", "sha256": (kind * 64).encode().hex()[:64]}

    def instrument(name: str, role: str, port: int, certificate: Json | None) -> Json:
        return {
            "name": name,
            "role": role,
            "dialect": f"scpi-{role}",
            "address": f"TCPIP::127.0.0.1::{port}::SOCKET",
            "identity": f"virtual,{role},{port},1.0",
            "certificate": certificate,
        }

    return {
        "packmime": "0.1.0",
        "format": 1,
        "run": "2026-12-01-a1b2c3",
        "rehearsal": True,
        "seed": 7,
        "started_utc": "2026-12-01T08:00:00Z",
        "ended_utc": "2026-12-01T08:44:40.250Z",
        "duration_s": LAST_S,
        "ended": "complete",
        "safe": True,
        "procedure": file("procedure", "charge-profile")
        | {"purpose": "Shows how the charger charges, and when it stops."},
        "specification": file("specification", "greenhouse sprayer charger, 5 cells", "model"),
        "pack": file("pack", "sprayer pack 5S1P"),
        "bench": file("bench", "virtual bench"),
        "charger": "sprayer-cc-cv",
        "instruments": [
            instrument("node_supply", "supply", 5025, None),
            instrument("node_load", "load", 5026, None),
            instrument("meter_v", "meter", 5027, {"number": "C-77", "due": "2027-03-01"}),
            instrument("meter_i", "meter", 5028, {"number": "C-78", "due": "2027-03-01"}),
        ],
        "hardware": {"emergency_stop": "none", "node_clamp": "28 V", "fuse": "15 A", "watchdog_relay": "none"},
        "missing_hardware": [
            "emergency stop: none declared",
            "watchdog relay: none declared; a dead computer leaves the outputs as they are",
        ],
        "deviations": ["charge.voltage judged with high = 4.225 V in place of 4.220 V (--set)"],
        "environment": {
            "python": "3.11.9",
            "platform": "Linux x86_64",
            "packages": {"pyvisa": "1.16.2", "numpy": "2.4.6"},
        },
        "standin": {"Rp_ohm": 0.1124, "Rv_ohm": 0.0376, "delay_scans": 2, "gain": 0.42, "lag_s": 0.238},
        "performance": {"virtual_s_per_wall_s": 61.2, "exchanges_per_scan": 5.0},
        "person": None,
        "files": {},
    }


def judgement() -> Json:
    return {
        "number": 1,
        "utc": "2026-12-01T08:44:41Z",
        "rule": "as specified",
        "specification_sha256": "0" * 64,
        "packmime": "0.1.0",
        "person": None,
        "reason": None,
        "deviations": [],
        "changed": [],
    }


def events() -> list[Json]:
    return [
        {"t": 0.0, "event": "run-start"},
        {"t": 10.0, "event": "step-start", "step": 0, "does": "insert", "words": "insert the pack"},
        {"t": 15.0, "event": "mains", "on": True},
        {
            "t": LAST_S - 12,
            "event": "finding-window",
            "finding": "charge",
            "start_s": 15.0,
            "end_s": LAST_S - 13,
            "ended": "ended",
        },
        {"t": LAST_S - 1, "event": "safe-state", "verified": True, "words": "node at 0.00 V by readback and meter"},
        {"t": LAST_S, "event": "run-end", "ended": "complete", "why": None},
    ]


def parts() -> Json:
    """Everything that a judged record consists of, free to be changed before it is written."""
    verdicts = seven_words()
    return {
        "verdicts": verdicts,
        "findings": {
            "classification": classification(),
            "findings": [
                {
                    "name": "charge.end_voltage",
                    "kind": "quantity",
                    "value": 4.2266,
                    "unit": "V",
                    "u": 0.003,
                    "start_s": KNEE_S,
                    "end_s": END_S,
                    "words": "largest 1 s mean at the charger's contacts, per cell",
                },
                {
                    "name": "charge.start_delay",
                    "kind": "quantity",
                    "value": 2.1,
                    "unit": "s",
                    "u": 0.06,
                    "start_s": 15.0,
                    "end_s": 17.1,
                    "words": "from mains on to half of the current",
                },
            ],
        },
        "budgets": {name: budget(name) for name in ("charge.voltage", "charge.end_voltage")},
        "judgement": judgement(),
        "manifest": manifest(),
        "events": events(),
    }


def added_everywhere(value: Any, text: str) -> Any:
    """The same document with a text added to each free field; words of closed lists, hashes and times stay."""
    closed = {
        "verdict",
        "overall",
        "kind",
        "rule",
        "event",
        "finding",
        "started_utc",
        "ended_utc",
        "utc",
        "sha256",
        "unit",
    }
    if isinstance(value, dict):
        return {
            key: item if key in closed and isinstance(item, str) else added_everywhere(item, text)
            for key, item in value.items()
        }
    if isinstance(value, list):
        return [added_everywhere(item, text) for item in value]
    return f"{value} {text}" if isinstance(value, str) else value


def write_record(folder: Path, content: Json, traces: tuple[np.ndarray, np.ndarray, np.ndarray]) -> Path:
    """Write and seal a record, add its first judgement without a report; returns the judgement's folder."""
    from sequencer.engine.record import RecordFolder
    from sequencer.engine.sealing import seal
    from sequencer.model.findings import findings_text

    with RecordFolder.create(folder) as record:
        record.add_input("findings.yaml", findings_text())
        record.add_input("pack.yaml", PACK.encode())
        for event in content["events"]:
            record.event(event["t"], event["event"], **{k: v for k, v in event.items() if k not in ("t", "event")})
        journal = record.start_journal(start_utc="2026-12-01T08:00:00Z", wall_s=lambda: 0.0)
        for moment, level_V, level_A in zip(*(trace.tolist() for trace in traces), strict=True):
            journal.append("charger.voltage", moment, level_V)
            journal.append("charger.current", moment, level_A)
            journal.append("pack.compression", moment, 4.0)
    seal(record, content["manifest"])
    judged = folder / "judged" / "001"
    judged.mkdir(parents=True)
    for name in ("verdicts", "findings", "budgets", "judgement"):
        (judged / f"{name}.json").write_text(json.dumps(content[name], ensure_ascii=True), encoding="utf-8")
    return judged


@pytest.fixture
def content() -> Json:
    return parts()


@pytest.fixture(scope="session")
def traces() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    return synthetic()


@pytest.fixture
def everywhere() -> Callable[[Any, str], Any]:
    return added_everywhere


@pytest.fixture
def hostile_text() -> str:
    return f"{HOSTILE} {LONG}"


@pytest.fixture
def write(tmp_path: Path) -> Callable[..., Path]:
    """Write a record with a judgement; give it changed parts, or another name."""

    def _write(content: Json | None = None, name: str = "record") -> Path:
        return write_record(tmp_path / name, content or parts(), synthetic())

    return _write


@pytest.fixture(scope="session")
def reported(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One judgement with all seven words, its report written."""
    from reports.runner import write_report

    judged = write_record(tmp_path_factory.mktemp("reported") / "record", parts(), synthetic())
    write_report(judged)
    return judged


@pytest.fixture
def copied(reported: Path, tmp_path: Path) -> Path:
    """A copy of that record without its report."""
    shutil.copytree(reported.parent.parent, tmp_path / "copy")
    judged = tmp_path / "copy" / "judged" / "001"
    for name in ("report.html", "junit.xml"):
        (judged / name).unlink()
    return judged
