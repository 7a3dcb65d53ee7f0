"""The judgements of a record: numbered folders beside the data, each written once, the latest shown on top."""

import os
import stat
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import Any

from sequencer.engine.documents import write_json
from sequencer.engine.durable import RecordError, replace, sync_folder
from sequencer.engine.heartbeat import is_live, writer_of

__all__ = ["changes", "judgement_folders", "latest", "new_judgement", "publish", "write_json"]

PUBLISHED = ("report.html", "verdicts.json")
VERDICTS = "verdicts.json"


def judgement_folders(record: Path) -> list[Path]:
    """All judgements of a record, finished or not, in the order of their numbers."""
    numbered = (path for path in (record / "judged").glob("*") if path.name.isascii() and path.name.isdigit())
    return sorted(filter(Path.is_dir, numbered), key=lambda path: int(path.name))


def new_judgement(record: Path) -> Path:
    """Make and return the next folder, judged/001 on; no two processes get the same.

    Raises RecordError if the record is live or unsealed, or the disk refuses.
    """
    if is_live(record):
        raise RecordError(f"{record}: is still being written by {writer_of(record)}; judge it when it has ended")
    if not (record / "data" / "manifest.json").exists():
        raise RecordError(f"{record}: is not sealed; seal it first, so that what is judged can no longer change")
    try:
        return _next_folder(record / "judged")
    except OSError as error:
        raise RecordError(f"{record}: no judgement can be written there ({error}); look at the disk") from error


def _next_folder(judged: Path) -> Path:
    judged.mkdir(exist_ok=True)
    while True:
        last = max((int(path.name) for path in judgement_folders(judged.parent)), default=0)
        folder = judged / f"{last + 1:03d}"
        with suppress(FileExistsError):  # another process was faster
            folder.mkdir()
            sync_folder(judged)
            return folder


def latest(record: Path) -> Path | None:
    """The last judgement that got as far as its verdicts, or None."""
    return next((path for path in reversed(judgement_folders(record)) if (path / VERDICTS).is_file()), None)


def publish(judgement: Path) -> None:
    """Show a finished judgement on top of its record, and make its files read-only: to be called last.

    Raises RecordError if the judgement lacks its report or verdicts, or the disk refuses; the copies shown before stay.
    """
    record = judgement.parent.parent
    try:
        contents = {name: (judgement / name).read_bytes() for name in PUBLISHED}
        for name, content in contents.items():
            replace(record / name, content)
    except FileNotFoundError as error:
        lacking = Path(error.filename).name
        raise RecordError(f"{judgement}: is not finished, {lacking} is missing; judge again") from error
    except OSError as error:
        raise RecordError(f"{record}: the judgement cannot be shown there ({error}); look at the disk") from error
    for path in judgement.rglob("*"):
        if path.is_file():
            with suppress(OSError):  # a file system without permissions
                os.chmod(path, stat.S_IRUSR | stat.S_IRGRP | stat.S_IROTH)


_IN_UNITS = ("value", "u", "low", "high", "guard_band")
_WORDS = {
    "verdict": "verdict",
    "value": "value",
    "u": "standard uncertainty",
    "expected": "expected",
    "low": "lower limit",
    "high": "upper limit",
    "rule": "decision rule",
    "guard_band": "guard band",
    "p_conform": "probability of conformity",
    "finding": "finding",
    "n": "number of readings",
    "k": "coverage factor",
    "why": "reason",
}


def changes(old: Mapping[str, Any], new: Mapping[str, Any]) -> list[str]:
    """What differs between two documents of verdicts, in words, the later one's order first; nothing gives []."""
    said = []
    if old.get("overall") != new.get("overall"):
        said.append(f"overall: {new.get('overall')}, was {old.get('overall')}")
    before, after = _by_limit(old), _by_limit(new)
    for limit, verdict in after.items():
        if limit not in before:
            said.append(f"{limit}: {verdict.get('verdict')}, was not judged before")
        else:
            said += [f"{limit}: {change}" for change in _differences(before[limit], verdict)]
    gone = {limit: verdict for limit, verdict in before.items() if limit not in after}
    return said + [f"{limit}: no longer judged, was {verdict.get('verdict')}" for limit, verdict in gone.items()]


def _by_limit(document: Mapping[str, Any]) -> dict[str, Mapping[str, Any]]:
    return {verdict["limit"]: verdict for verdict in document.get("verdicts", [])}


def _differences(old: Mapping[str, Any], new: Mapping[str, Any]) -> list[str]:
    return [f"{words} {_pair(key, old, new)}" for key, words in _WORDS.items() if old.get(key) != new.get(key)]


def _pair(key: str, old: Mapping[str, Any], new: Mapping[str, Any]) -> str:
    now, was = _said(new.get(key)), _said(old.get(key))
    if now == was:  # they differ beyond six digits
        now, was = repr(new.get(key)), repr(old.get(key))
    return f"{now}{_unit(key, new)}, was {was}{_unit(key, old)}"


def _unit(key: str, verdict: Mapping[str, Any]) -> str:
    unit = verdict.get("unit")
    bare = key not in _IN_UNITS or unit in (None, "", "1") or verdict.get(key) is None
    return "" if bare else f" {unit}"


def _said(value: Any) -> str:
    if value is None:
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:.6g}" if isinstance(value, float) else str(value)
