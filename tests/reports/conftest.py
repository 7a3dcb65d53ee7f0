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


def parts() -> Json:
    """Everything that a judged record consists of (parts.json), free to be changed before it is written.

    Each of the seven verdict words occurs; every value is invented.
    """
    content: Json = json.loads(Path(__file__).with_name("parts.json").read_text(encoding="utf-8"))
    return content


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
