"""`packmime check`: every fault of every file, the plan of a procedure, JSON Schemas."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING

import typer

from drivers.shipped import is_bare
from drivers.text.document import Mapped, Scalar, read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.nearest import unknown
from drivers.text.si import clock_time

if TYPE_CHECKING:
    from drivers.text.binding import Written
    from sequencer.engine.inputs import Asked
    from sequencer.engine.plan import Plan


def _models() -> dict[str, type[Written]]:
    from drivers.bench import Bench
    from drivers.dialect import Dialect
    from drivers.virtual.charger_file import ChargerFile
    from drivers.virtual.defects import Defect
    from sequencer.model.curves import Curve
    from sequencer.model.findings import Findings
    from sequencer.model.order import Order
    from sequencer.model.pack import Pack
    from sequencer.model.procedure import Procedure
    from sequencer.model.specification import Specification

    return {
        "procedure": Procedure,
        "specification": Specification,
        "pack": Pack,
        "bench": Bench,
        "dialect": Dialect,
        "charger": ChargerFile,
        "curve": Curve,
        "order": Order,
        "defect": Defect,
        "findings": Findings,
    }


def check_command(
    files: list[str],
    bench: str,
    spec: str,
    pack: str | None,
    charger: str | None,
    changes: list[str],
    schema: str | None,
) -> None:
    """See `packmime check --help`. Raises BadInput with all faults of all files."""
    if schema is not None:
        print_schema(schema)
        return
    from sequencer.engine.inputs import Asked, changes_of

    faults = Faults()
    if not files:
        faults.add(Place("FILE"), "a file to check was expected, or --schema KIND")
    for text in files:
        try:
            _check_one(text, Asked(text, spec, pack, bench, changes_of(changes)), charger, faults)
        except BadInput as bad:
            faults.found.extend(fault for fault in bad.faults if fault not in faults.found)
    faults.raise_if_any()


def _check_one(text: str, asked: Asked, charger: str | None, faults: Faults) -> None:
    if not is_bare(text) and not Path(text).exists():
        _check_others(asked, faults)
    kind = "procedure" if is_bare(text) else _kind_of(Path(text))
    if kind == "procedure":
        from sequencer.cli.access import rehearsal_charger
        from sequencer.engine.inputs import gather
        from sequencer.engine.plan import plan_of

        inputs = gather(asked)
        rehearsal_charger(inputs, charger, asked.specification)
        _print_plan(text, plan_of(inputs))
        return
    _check_alone(Path(text), kind, faults)


def _check_others(asked: Asked, faults: Faults) -> None:
    """The files named beside one that is not there: it may have been meant for a procedure."""
    from sequencer.engine.inputs import gather

    try:
        gather(asked)
    except BadInput as bad:
        faults.found.extend(
            fault for fault in bad.faults if fault.place.file != "PROCEDURE" and fault not in faults.found
        )


def _check_alone(path: Path, kind: str, faults: Faults) -> None:
    from drivers.bench_file import load_bench
    from drivers.text.binding import bind

    if kind == "bench":
        found = load_bench(path, faults) is not None
    else:
        found = bind(_models()[kind], read(path), kind, faults) is not None
    if found and not faults.found:
        typer.echo(f"{path}: a sound {kind} file")
        if kind == "order":
            _print_lacking(path)


def _print_lacking(path: Path) -> None:
    from sequencer.engine.inputs import rebind
    from sequencer.model.order import Order

    lacking = rebind(Order, path.read_bytes(), str(path), "order").model.lacking()
    if lacking:
        typer.echo(f"  an issued report would lack (ISO/IEC 17025:2017, 7.8.2.1): {', '.join(lacking)}")


def _kind_of(path: Path) -> str:
    document = read(path)
    head = document.root.entries.get("packmime") if isinstance(document.root, Mapped) else None
    kind = (head.text or "").split(" ")[0] if isinstance(head, Scalar) else ""
    models = _models()
    if kind not in models:
        place = head.place if head is not None else document.root.place
        faults = Faults()
        faults.add(place, f"must open with 'packmime: KIND 1', KIND one of {', '.join(models)}")
        faults.raise_if_any()
    return kind


def _print_plan(text: str, plan: Plan) -> None:
    insertions = f"{plan.insertions} insertion{'' if plan.insertions == 1 else 's'}"
    typer.echo(f"{text}: sound. {insertions}, {clock_time(plan.bench_s)} of bench time, no prompts.")
    for kind, seconds in plan.steps:
        typer.echo(f"  {kind:<8} {clock_time(seconds)}")
    typer.echo("Roles:")
    for where, name, dialect in plan.roles:
        typer.echo(f"  {where:<22} {name} ({dialect})")
    for note in plan.notes:
        typer.echo(f"Note: {note}.")


def print_schema(kind: str) -> None:
    """The JSON Schema of a kind of file, on standard output. Raises BadInput for an unknown kind."""
    models = _models()
    if kind not in models:
        faults = Faults()
        faults.add(Place(f"--schema {kind}"), unknown(kind, models, "kind"))
        faults.raise_if_any()
    schema = models[kind].model_json_schema()
    schema["properties"] = {"packmime": {"const": f"{kind} 1"}, **schema.get("properties", {})}
    schema["required"] = ["packmime", *schema.get("required", [])]
    typer.echo(
        json.dumps({"$schema": "https://json-schema.org/draft/2020-12/schema", **schema}, indent=2, ensure_ascii=False)
    )
