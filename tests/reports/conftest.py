"""A judged record of an invented charger: real files in the shapes that a run and a judgement write."""

import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from reports.inputs import curve, specification
from sequencer.model.curves import Curve
from sequencer.model.specification import Specification

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
SPECIFICATION = """packmime: specification 1
model: greenhouse sprayer charger, 5 cells
pack: sprayer
rule: guarded
dwell: {start_delay: 2 s, clear: 2 s, response: 1 s}
charge: {algorithm: cc-cv, stages: [{current: 2.0 A ± 5 %}]}
id_bands:
  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}
  - {id: [2.70 kΩ, 3.30 kΩ], current: 3.0 A ± 5 %}
  - {id: [9.0 kΩ, 11.0 kΩ], current: 4.0 A ± 5 %}
temperature: {curve: ntc-10k-3435, start: [3 °C ± 2 °C, 45 °C ± 2 °C], run: [0 °C ± 2 °C, 50 °C ± 2 °C]}
tap_trip: {voltage: [4.20 V, 4.28 V], stop_time: {below: 2 s}, release: resumes, rule: simple}
balancing: {none_above: 1 mA}
low_start:
  starts:
    - {cell_voltage: [0.7 V, 1.4 V], response: refuses}
    - {cell_voltage: [1.5 V, 2.95 V], response: [precharges, probes and refuses]}
  precharge: {current: 0.25 A ± 20 %, threshold_per_cell: 3.00 V ± 50 mV}
  weak_cell: refuses
"""
CURVE = """packmime: curve 1
name: ntc-10k-3435
source: invented for this record
span: [-40 °C, 110 °C]
beta: {resistance: 10 kΩ, at: 25 °C, beta: 3435 K}
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


def breadth_parts() -> Json:
    """An acceptance with everything in it: the same charge, and ID bands, temperatures, cell taps (breadth.json).

    Every value is invented: an edge inside its band, a shorted ID that pulses, a cell that stops nothing, a void point.
    """
    content, more = parts(), json.loads(Path(__file__).with_name("breadth.json").read_text(encoding="utf-8"))
    content["verdicts"]["verdicts"] += more["verdicts"]
    content["findings"]["findings"] += more["findings"]
    content["findings"] |= {name: more[name] for name in ("points", "walks", "low_starts", "balancing")}
    content["budgets"] |= more["budgets"]
    content["judgement"]["not_part_of_procedure"] = ["charge.cutoff"]
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
        "way",
        "role",
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
        record.add_input("curve.yaml", CURVE.encode())
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
    (judged / "specification.yaml").write_text(SPECIFICATION, encoding="utf-8")
    for name in ("verdicts", "findings", "budgets", "judgement"):
        (judged / f"{name}.json").write_text(json.dumps(content[name], ensure_ascii=True), encoding="utf-8")
    return judged


@pytest.fixture
def content() -> Json:
    return parts()


@pytest.fixture
def breadth() -> Json:
    return breadth_parts()


@pytest.fixture(scope="session")
def declared() -> Specification:
    """What the charger of the breadth is declared to do."""
    read = specification(SPECIFICATION.encode())
    assert read is not None
    return read


@pytest.fixture(scope="session")
def sensor() -> Curve:
    """The thermistor of the breadth."""
    read = curve(CURVE.encode())
    assert read is not None
    return read


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


@pytest.fixture(scope="session")
def accepted(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """One judgement of an acceptance with everything in it, its report written."""
    from reports.runner import write_report

    judged = write_record(tmp_path_factory.mktemp("accepted") / "record", breadth_parts(), synthetic())
    write_report(judged)
    return judged


@pytest.fixture(scope="session")
def hostile_judgement(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The same acceptance with the hostile text in every free field, without a report."""
    folder = tmp_path_factory.mktemp("hostile") / "record"
    return write_record(folder, added_everywhere(breadth_parts(), f"{HOSTILE} {LONG}"), synthetic())


@pytest.fixture
def copied(reported: Path, tmp_path: Path) -> Path:
    """A copy of that record without its report."""
    shutil.copytree(reported.parent.parent, tmp_path / "copy")
    judged = tmp_path / "copy" / "judged" / "001"
    for name in ("report.html", "junit.xml"):
        (judged / name).unlink()
    return judged
