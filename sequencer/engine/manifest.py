"""The manifest: what a run was, with which files, instruments and versions."""

from __future__ import annotations

import hashlib
import platform
import sys
from importlib.metadata import PackageNotFoundError, version
from typing import Any

from drivers.open_bench import OpenBench
from drivers.safe import SafeState
from drivers.text.binding import Bound
from drivers.text.document import Document
from sequencer.engine.inputs import Inputs
from sequencer.model.order import Order

PACKAGES = ("pyvisa", "pyvisa-py", "numpy", "scipy", "pyarrow", "pydantic", "ruamel.yaml", "pytest", "pytest-html")


def program_version() -> str:
    try:
        return version("packmime")
    except PackageNotFoundError:
        return "unknown"


def sha256(content: bytes) -> str:
    return hashlib.sha256(content).hexdigest()


def description_of(inputs: Inputs, bench: OpenBench, start_utc: str, seed: int | None) -> dict[str, Any]:
    """What is known when a run starts; stands in its first event, so that a record left by a crash can be judged."""
    procedure, specification, pack = inputs.procedure.model, inputs.specification.model, inputs.pack.model
    hardware = bench.file.bench.hardware
    return {
        "packmime": program_version(),
        "run": sha256(f"{start_utc}{procedure.name}{specification.model}".encode())[:12],
        "rehearsal": bench.file.bench.virtual is not None,
        "seed": seed,
        "started_utc": start_utc,
        "procedure": {"name": procedure.name, "purpose": procedure.purpose, **_file(inputs.procedure.document)},
        "specification": {"model": specification.model, **_file(inputs.specification.document)},
        "pack": {"name": pack.name, **_file(inputs.pack.document)},
        "bench": {"name": bench.file.bench.name, **_file(bench.file.bound.document)},
        "charger": bench.access.charger,
        "charger_file": None if bench.access.charger_file is None else _file(bench.access.charger_file),
        "instruments": [_instrument(bench, where, name) for where, name in _first_places(bench)],
        "hardware": dict(hardware),
        "missing_hardware": hardware.missing(),
        "deviations": [*inputs.deviations, *_overdue(bench, start_utc[:10])],
        "changes": inputs.changes,
        "environment": _environment(),
        "person": None if inputs.order is None else inputs.order.model.persons.operator,
        "order": None if inputs.order is None else _order(inputs.order),
    }


def outcome_of(
    bench: OpenBench,
    ended: str,
    why: str,
    safe: SafeState,
    stand_in: dict[str, Any] | None,
    performance: dict[str, float],
) -> dict[str, Any]:
    """What is known when it has ended."""
    return {
        "ended_utc": bench.clock.utc(),
        "duration_s": round(bench.clock.now(), 3),
        "ended": ended,
        "why": why,
        "safe": safe.verified,
        "standin": stand_in,
        "performance": performance,
    }


def _first_places(bench: OpenBench) -> list[tuple[str, str]]:
    """Each instrument once, with the first place that it has in the wiring."""
    first: dict[str, str] = {}
    for where, name in bench.file.bench.wired():
        first.setdefault(name, where)
    return [(where, name) for name, where in first.items()]


def _order(order: Bound[Order]) -> dict[str, Any]:
    """The order as it is, and what an issued report would lack."""
    content = order.model.model_dump(mode="json", exclude_none=True)
    return {**content, "lacking": order.model.lacking(), **_file(order.document)}


def _file(document: Document) -> dict[str, str]:
    # The name alone: a record goes to other machines, whose folders are nobody's business.
    return {"file": document.name.replace("\\", "/").rpartition("/")[2], "sha256": sha256(document.content)}


def _instrument(bench: OpenBench, where: str, name: str) -> dict[str, Any]:
    _, entry, dialect = bench.file.at(where)
    certificate = entry.certificate
    return {
        "name": name,
        "place": where,
        "role": dialect.role,
        "dialect": dialect.name,
        "address": entry.address,
        "identity": bench.identities.get(name),
        "certificate": None if certificate is None else certificate.model_dump(mode="json"),
    }


def _overdue(bench: OpenBench, today: str) -> list[str]:
    """Certificates that had run out on the day of the run, as deviations; dates are ISO 8601 and compare as text."""
    wired = [(name, bench.file.bench.instruments[name].certificate) for _, name in bench.file.bench.wired()]
    return [
        f"certificate {certificate.number} of {name} was due on {certificate.due}"
        for name, certificate in wired
        if certificate is not None and certificate.due < today
    ]


def _environment() -> dict[str, Any]:
    packages = {name: _version(name) for name in PACKAGES}
    return {"python": sys.version.split()[0], "platform": platform.platform(), "packages": packages}


def _version(name: str) -> str | None:
    try:
        return version(name)
    except PackageNotFoundError:
        return None
