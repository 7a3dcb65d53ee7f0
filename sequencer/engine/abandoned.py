"""The manifest of a run that never wrote one: what its first event, its inputs and its last sample still tell."""

from collections.abc import Mapping
from contextlib import suppress
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from sequencer.engine import events
from sequencer.engine.durable import sha256_of

_FILES = {"procedure": "name", "specification": "model", "pack": "name", "bench": "name"}


def abandoned_manifest(data: Path, last_sample_s: float) -> dict[str, Any]:
    """A manifest with "ended": "abandoned" for a record's data folder.

    The fields of the run-start event go in as they are; what nobody told is null or empty. A run that did not say that
    it was on a real bench counts as a rehearsal, the error that misleads nobody. Raises OSError.
    """
    happened, _ = events.read_events(data / events.NAME)
    start = next((event for event in happened if event["event"] == "run-start"), {})
    told = {key: value for key, value in start.items() if key not in ("t", "event", "start_utc", *_FILES)}
    last_s = max([0.0, last_sample_s, *(float(event["t"]) for event in happened)])
    safe = next((event.get("verified") for event in reversed(happened) if event["event"] == "safe-state"), None)
    files = {kind: _file(data, kind, name, start.get(kind)) for kind, name in _FILES.items()}
    end = {"ended_utc": None, "duration_s": last_s, "ended": "abandoned", "safe": safe}
    return {**_blank(), "started_utc": start.get("start_utc"), **files, **told, **end}


def _file(data: Path, kind: str, name: str, told: object) -> dict[str, Any]:
    if isinstance(told, Mapping):
        return dict(told)
    path = data / "inputs" / f"{kind}.yaml"
    return {name: told, "file": path.name, "sha256": sha256_of(path) if path.is_file() else None}


def _blank() -> dict[str, Any]:
    program = None
    with suppress(PackageNotFoundError):
        program = version("packmime")
    return {
        "packmime": program,
        "run": None,
        "rehearsal": True,
        "seed": None,
        "charger": None,
        "charger_file": None,
        "instruments": [],
        "hardware": {},
        "missing_hardware": [],
        "deviations": [],
        "environment": {},
        "standin": None,
        "performance": {},
        "person": None,
    }
