"""Writes a judgement's report.html and junit.xml by a pytest of its own, apart from the user's settings."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from reports.source import read_json

TIMEOUT_S = 300
_PARTS = {"report.html": "report.html.part", "junit.xml": "junit.xml.part"}
_PLUGINS = ("pytest_html.plugin", "pytest_html.fixtures", "pytest_metadata.plugin", "reports.plugin")
_NOTHING_COLLECTED = 5  # pytest's exit code for a run without tests


class ReportFault(Exception):
    """A report could not be written; the message holds what pytest said. The record and the verdicts are untouched."""


def write_report(judgement: Path) -> None:
    """Write report.html and junit.xml into RECORD/judged/NNN/, from its JSON files and RECORD/data/.

    Both appear whole or not at all. ReportFault where they cannot be written, or are there already: a judgement is
    never written over.
    """
    judgement = judgement.resolve()
    for name in _PARTS:
        if (judgement / name).exists():
            raise ReportFault(f"{judgement / name} exists; a judgement is never written over, judge the record again")
    try:
        verdicts = read_json(judgement / "verdicts.json")["verdicts"]
        _run_pytest(judgement, verdicts)
        _finish(judgement, verdicts)
    except (OSError, ValueError, KeyError, TypeError) as fault:
        raise ReportFault(f"report of {judgement}: {type(fault).__name__}: {fault}") from fault
    finally:
        for part in _PARTS.values():
            (judgement / part).unlink(missing_ok=True)


def _run_pytest(judgement: Path, verdicts: Sequence[Any]) -> None:
    """Run pytest; its exit codes 0 and 1 (some verdict is no pass) are a report, all others are a fault."""
    try:
        done = subprocess.run(
            command(judgement),
            cwd=judgement,
            env=environment(os.environ),
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            encoding="utf-8",
            errors="replace",
            timeout=TIMEOUT_S,
            start_new_session=True,  # Ctrl-C on the terminal shall not cost the report of the run that it ended
            check=False,
        )
    except subprocess.TimeoutExpired as fault:
        raise ReportFault(f"report of {judgement}: pytest did not end within {TIMEOUT_S} s") from fault
    if done.returncode not in ((0, 1) if verdicts else (0, 1, _NOTHING_COLLECTED)):
        raise ReportFault(f"report of {judgement}: pytest ended with {done.returncode}\n{done.stdout}{done.stderr}")
    for part in _PARTS.values():
        if not (judgement / part).is_file():
            raise ReportFault(f"report of {judgement}: pytest wrote no {part}\n{done.stdout}{done.stderr}")


def command(judgement: Path) -> list[str]:
    """The command line: no plugin, conftest, ini file or cache but our own; paths relative to the judgement."""
    settings = Path(__file__).with_name("templates") / "report.ini"
    plugins = [argument for name in _PLUGINS for argument in ("-p", name)]
    return [
        *(sys.executable, "-P", "-m", "pytest", "--disable-plugin-autoload", *plugins, "-p", "no:cacheprovider"),
        *("-c", str(settings), f"--rootdir={judgement}", "--noconftest", "--color=no", "-q"),
        *(f"--html={_PARTS['report.html']}", "--self-contained-html", f"--junitxml={_PARTS['junit.xml']}"),
        "verdicts.json",
    ]


def environment(own: Mapping[str, str]) -> dict[str, str]:
    """The environment without what would steer pytest, Python or matplotlib; PYTHONPATH with absolute entries only."""
    steering = ("PYTEST_", "PYTHONWARNINGS", "PYTHONINSPECT", "PYTHONOPTIMIZE", "MATPLOTLIBRC", "MPLBACKEND")
    kept = {name: value for name, value in own.items() if not name.startswith(steering)}
    if "PYTHONPATH" in kept:
        entries = [str(Path(entry).resolve()) for entry in kept["PYTHONPATH"].split(os.pathsep) if entry]
        kept["PYTHONPATH"] = os.pathsep.join(entries)
    return kept | {"PYTHONUTF8": "1", "PYTHONHASHSEED": "0"}


def _finish(judgement: Path, verdicts: Sequence[Mapping[str, Any]]) -> None:
    """Put the judgement's own times into the JUnit file and give both files their names."""
    from reports.junit import restamp

    path = judgement.parent.parent / "data" / "manifest.json"
    manifest = read_json(path) if path.exists() else {}  # a record whose run crashed has none until it is sealed
    restamp(judgement / _PARTS["junit.xml"], verdicts, read_json(judgement / "judgement.json"), manifest)
    for name, part in _PARTS.items():
        os.replace(judgement / part, judgement / name)
