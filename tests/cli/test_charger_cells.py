"""A virtual charger must be for the number of cells that the pack has; else it may be as wrong as one likes."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers.virtual.charger_file import CHARGERS
from sequencer.engine.inputs import FOLDERS

CELLS_AT = next(
    number
    for number, line in enumerate((CHARGERS / "sprayer.yaml").read_text("utf-8").splitlines(), 1)
    if line.startswith("cells:")
)
IN_PROCESS = ("--bench", "virtual-in-process")


def expect_refused(result: object) -> None:
    assert getattr(result, "exit_code", None) == 2
    said = " ".join(getattr(result, "stderr", "").split())
    assert f"sprayer.yaml:{CELLS_AT}:1: a charger for 5 cells; the pack has 3 (" in said
    assert "lantern.yaml:4:1); name a charger for 3 cells with --charger" in said


def test_a_run_refuses_a_charger_for_another_number_of_cells(packmime: Callable, tmp_path: Path) -> None:
    words = ("--spec", "lantern", "--charger", "sprayer", *IN_PROCESS)
    expect_refused(packmime("run", "acceptance", *words, "--out", tmp_path / "r"))
    assert not (tmp_path / "r").exists()


def test_check_refuses_it_too(packmime: Callable) -> None:
    expect_refused(packmime("check", "acceptance", "--spec", "lantern", "--charger", "sprayer"))
    assert packmime("check", "acceptance", "--spec", "lantern", "--charger", "lantern").exit_code == 0


def test_check_looks_at_the_charger_that_the_bench_names(packmime: Callable, tmp_path: Path) -> None:
    bench = tmp_path / "bench.yaml"
    text = (FOLDERS["bench"] / "virtual-in-process.yaml").read_text("utf-8")
    bench.write_text(text.replace("\nvirtual:\n", "\nvirtual:\n  charger: sprayer\n"), "utf-8")
    expect_refused(packmime("check", "acceptance", "--spec", "lantern", "--bench", bench))


def test_check_needs_no_charger_of_the_specifications_name(packmime: Callable, tmp_path: Path) -> None:
    """It may be meant for real instruments."""
    spec = tmp_path / "trowel.yaml"
    spec.write_text((FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8"), "utf-8")
    result = packmime("check", "charge-profile", "--spec", spec, "--pack", "sprayer")
    assert result.exit_code == 0, result.stderr
    assert packmime("check", "charge-profile", "--charger", "sprinkler").exit_code == 2


@pytest.mark.parametrize(
    ("right", "wrong", "failing"),
    [
        ("{current: 3.0 A}", "{current: 3.6 A}", "charge.current"),
        ("voltage_per_cell: 4.20 V", "voltage_per_cell: 4.26 V", "charge.voltage"),
    ],
)
def test_a_charger_that_is_wrong_on_purpose_is_rehearsed(
    packmime: Callable, tmp_path: Path, right: str, wrong: str, failing: str
) -> None:
    text = (CHARGERS / "sprayer-power.yaml").read_text("utf-8")
    assert right in text
    charger = tmp_path / "wrong.yaml"
    charger.write_text(text.replace(right, wrong), "utf-8")
    words = ("--charger", charger, "--bench", "virtual-mains-in-process", "--out", tmp_path / "r")
    result = packmime("run", "charge-profile", *words)
    assert result.exit_code == 1, result.output
    assert (tmp_path / "r/data/inputs/charger.yaml").read_bytes() == charger.read_bytes()
    assert failing in result.output
