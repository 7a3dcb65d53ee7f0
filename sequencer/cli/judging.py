"""`packmime judge`, and the end of every run: verdicts, then the report that pytest writes."""

from __future__ import annotations

import json as json_text
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol

import typer

from drivers.clock import iso, utc_now, wall_seconds
from drivers.shipped import locate
from drivers.text.faults import BadInput, Fault, Faults, Place
from sequencer.engine.durable import RecordError
from sequencer.engine.inputs import FOLDERS
from sequencer.engine.judgements import publish
from sequencer.engine.judging import Judgement, Rejudging, judge


class Says(Protocol):
    def say(self, words: str) -> None: ...


class _Silent:
    def say(self, words: str) -> None:
        """For --json: nothing but the document goes to standard output."""


@dataclass(frozen=True)
class Judged:
    """A judgement with its report."""

    folder: Path
    document: dict[str, Any]
    exit_status: int
    bench_trip: bool
    report_s: float
    deviations: tuple[str, ...] = ()
    changed: tuple[str, ...] | None = None  # against the judgement before it; None where there was none


def judge_and_report(record: Path, says: Says, asked: Rejudging | None = None) -> Judged:
    """Judge, write the report, publish both. Raises RecordError, BadInput, ReportFault."""
    from reports.runner import write_report

    begun = wall_seconds()
    judgement: Judgement = judge(record, asked or Rejudging(), iso(utc_now()))
    says.say(f"judged as {judgement.folder.name}; writing the report")
    write_report(judgement.folder)
    publish(judgement.folder)
    spent = wall_seconds() - begun
    noted = json_text.loads((judgement.folder / "judgement.json").read_text("utf-8"))
    return Judged(
        judgement.folder,
        judgement.document,
        judgement.exit_status,
        judgement.bench_trip,
        spent,
        tuple(noted["deviations"]),
        tuple(noted["changed"]) if noted["number"] > 1 else None,
    )


def judge_command(
    record: Path, spec: str | None, rule: str | None, reason: str | None, person: str | None, as_json: bool
) -> None:
    """See `packmime judge --help`."""
    from sequencer.cli.terminal import Terminal

    if rule not in (None, "simple", "guarded"):
        raise BadInput([Fault(Place("--rule"), f"'{rule}': 'simple' or 'guarded' was expected")])
    asked = Rejudging(_specification(spec), rule, reason, person)  # type: ignore[arg-type]
    terminal = Terminal(0.0)
    says: Says = _Silent() if as_json else terminal
    _seal_if_abandoned(record, says)
    judged = judge_and_report(record, says, asked)
    if as_json:
        typer.echo(json_text.dumps(judged.document, ensure_ascii=False, allow_nan=False))
    else:
        terminal.verdicts(judged)
    raise typer.Exit(judged.exit_status)


def _specification(spec: str | None) -> tuple[str, bytes] | None:
    if spec is None:
        return None
    faults = Faults()
    path = locate(spec, FOLDERS["specification"], "specification", Place("--spec"), faults)
    faults.raise_if_any()
    assert path is not None
    return path.name, path.read_bytes()


def _seal_if_abandoned(record: Path, says: Says) -> None:
    """A record that a crash or a full disk left open is sealed first; a live one is refused."""
    from sequencer.engine.heartbeat import is_live, writer_of
    from sequencer.engine.record import is_record
    from sequencer.engine.sealing import seal_abandoned

    if not is_record(record):
        raise RecordError(f"{record}: holds no record; name the folder that a run wrote with --out")
    if (record / "data" / "manifest.json").exists():
        return
    if is_live(record):
        raise RecordError(f"{record}: is still being written by {writer_of(record)}; judge it when it has ended")
    says.say("the run was cut off; sealing what it wrote")
    seal_abandoned(record)
