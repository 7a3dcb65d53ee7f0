"""`packmime check`: every fault of every file, the plan, the schemas."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from sequencer.engine.inputs import FOLDERS

DIALECTS = Path(__import__("drivers.dialect").__file__).parent / "dialects"


def test_a_sound_procedure_is_planned(packmime: Callable) -> None:
    result = packmime("check", "charge-profile")
    assert result.exit_code == 0
    assert "charge-profile: sound. 1 insertion" in result.output
    assert "node.supply            node_supply (scpi-supply)" in result.output
    assert "compressed charge" in result.output


@pytest.mark.parametrize("kind", ["procedure", "specification", "pack", "bench", "dialect", "charger", "findings"])
def test_every_schema_is_json(packmime: Callable, kind: str) -> None:
    schema = json.loads(packmime("check", "--schema", kind).stdout)
    assert schema["properties"]["packmime"] == {"const": f"{kind} 1"}
    assert schema["additionalProperties"] is False


def test_an_unknown_kind(packmime: Callable) -> None:
    result = packmime("check", "--schema", "proceedure")
    assert result.exit_code == 2
    assert "did you mean 'procedure'?" in result.stderr


def test_everything_that_ships_is_sound(packmime: Callable) -> None:
    shipped = [path for folder in ("specification", "pack", "bench") for path in FOLDERS[folder].glob("*.yaml")]
    shipped += [*FOLDERS["procedure"].glob("*.yaml"), *DIALECTS.glob("*.yaml")]
    assert len(shipped) >= 12
    result = packmime("check", *shipped)
    assert result.exit_code == 0, result.stderr
    assert "a sound dialect file" in result.output


def test_faults_of_all_files_at_once(packmime: Callable, tmp_path: Path) -> None:
    (tmp_path / "a.yaml").write_text("packmime: pack 1\nname: x\n", "utf-8")
    (tmp_path / "b.yaml").write_text("packmime: packs 1\n", "utf-8")
    (tmp_path / "c.yaml").write_text("packmime: [", "utf-8")
    result = packmime("check", *tmp_path.glob("*.yaml"), tmp_path / "d.yaml")
    assert result.exit_code == 2
    for said in ("'cells' is missing", "KIND one of", "is not YAML", "cannot be read"):
        assert said in result.stderr


def test_a_file_that_is_not_there_hides_no_fault_of_the_others(packmime: Callable) -> None:
    result = packmime("check", "nosuch.yaml", "--bench", "nope.yaml", "--spec", "sprayr")
    assert result.exit_code == 2
    assert "3 faults" in result.stderr
    for said in ("nosuch.yaml: cannot be read", "there is no bench file 'nope.yaml'", "sprayr"):
        assert said in result.stderr


def test_no_file(packmime: Callable) -> None:
    assert packmime("check").exit_code == 2
