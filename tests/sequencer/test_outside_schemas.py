"""The exported JSON Schemas, judged by a validator that nobody here wrote (JSON Schema 2020-12)."""

from __future__ import annotations

import io
import json
from pathlib import Path
from typing import Any

import pytest
from ruamel.yaml import YAML

from drivers.bench_file import DIALECTS
from drivers.virtual.charger_file import CHARGERS
from sequencer.cli.checking import print_schema
from sequencer.engine.inputs import FOLDERS
from sequencer.model.curves import CURVES
from sequencer.model.findings import findings_text

jsonschema = pytest.importorskip("jsonschema")

ALL = {**FOLDERS, "dialect": DIALECTS, "charger": CHARGERS, "curve": CURVES}
SHIPPED = [(kind, path) for kind, folder in ALL.items() for path in sorted(folder.glob("*.yaml"))]


@pytest.fixture
def schema_of(capsys: pytest.CaptureFixture[str]) -> Any:
    def printed(kind: str) -> Any:
        print_schema(kind)
        return json.loads(capsys.readouterr().out)

    return printed


def loaded(text: str) -> Any:
    """As an editor sees the file: numbers and booleans typed by YAML 1.2, whose core schema knows no dates."""
    return json.loads(json.dumps(YAML(typ="safe", pure=True).load(io.StringIO(text)), default=str))


def fits(schema: Any, content: Any) -> list[str]:
    jsonschema.Draft202012Validator.check_schema(schema)
    return [
        f"{error.json_path}: {error.message}" for error in jsonschema.Draft202012Validator(schema).iter_errors(content)
    ]


@pytest.mark.parametrize(("kind", "path"), SHIPPED, ids=lambda value: value if isinstance(value, str) else value.stem)
def test_what_ships_fits_its_schema(schema_of: Any, kind: str, path: Path) -> None:
    assert fits(schema_of(kind), loaded(path.read_text("utf-8"))) == []


def test_the_table_of_findings_fits_its_schema(schema_of: Any) -> None:
    assert fits(schema_of("findings"), loaded(findings_text().decode("utf-8"))) == []


@pytest.mark.parametrize(
    ("kind", "old", "new"),
    [
        ("specification", "cutoff:", "cut_off:"),
        ("specification", "rule: guarded", "rule: garded"),
        ("specification", "packmime: specification 1", "packmime: specification 2"),
        ("specification", "dwell:", "dwel:"),
        ("pack", "cells: 5", "cells: many"),
        ("procedure", "- remove: {}", "- removes: {}"),
    ],
)
def test_a_fault_does_not_fit(schema_of: Any, kind: str, old: str, new: str) -> None:
    name = "charge-profile" if kind == "procedure" else "sprayer"
    text = (FOLDERS[kind] / f"{name}.yaml").read_text("utf-8")
    assert old in text
    assert fits(schema_of(kind), loaded(text.replace(old, new))) != []
