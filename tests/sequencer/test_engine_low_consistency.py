"""Start voltages that a bench cannot play are refused before a run, with their place and what would help."""

from __future__ import annotations

from pathlib import Path

import pytest

from drivers.text.faults import BadInput
from sequencer.engine.inputs import FOLDERS, Asked, gather

STEP = "  - start_low: {cell_voltage: 3.7 V, voltages: [0.2 V, 2.9 V], weak_cell: 2.0 V}\n"
HEAD = """packmime: procedure 1
name: low
purpose: Asks for too much.
steps:
  - insert: {cell_voltage: 3.7 V}
    expect: charges
  - remove: {}
"""


def faults(
    tmp_path: Path, step: str, bench: dict[str, str] | None = None, dialect: dict[str, str] | None = None
) -> str:
    procedure, wired = tmp_path / "low.yaml", tmp_path / "bench.yaml"
    procedure.write_text(f"{HEAD}{step}judge: [charges]\n", "utf-8")
    text = (FOLDERS["bench"] / "virtual-in-process.yaml").read_text("utf-8")
    for old, new in (bench or {}).items():
        assert old in text, old
        text = text.replace(old, new)
    for old, new in (dialect or {}).items():
        from drivers.bench_file import DIALECTS

        own = (DIALECTS / "scpi-tap-supply.yaml").read_text("utf-8")
        assert old in own
        (tmp_path / "own.yaml").write_text(own.replace(old, new), "utf-8")
    wired.write_text(text, "utf-8")
    with pytest.raises(BadInput) as bad:
        gather(Asked(str(procedure), "sprayer", None, str(wired), {}, 1))
    return str(bad.value)


def test_less_than_the_load_can_sink(tmp_path: Path) -> None:
    said = faults(tmp_path, STEP)
    assert "low.yaml:8:49" in said
    assert "1 V at the node is less than the load 'node_load' can sink its current at, 1.5 V: start higher" in said
    assert "2.9" not in said


def test_a_weak_cell_needs_taps(tmp_path: Path) -> None:
    step = STEP.replace("0.2 V", "2.0 V")
    taps = "\n".join(
        line for line in (FOLDERS["bench"] / "virtual-in-process.yaml").read_text("utf-8").splitlines()
        if "taps:" in line or "supply: cells" in line
    )  # fmt: skip
    assert "no cell can be low alone" in faults(tmp_path, step, {taps + "\n": ""})


def test_a_tap_supply_says_how_low_it_goes(tmp_path: Path) -> None:
    step = STEP.replace("0.2 V", "2.0 V").replace("weak_cell: 2.0 V", "weak_cell: 0.4 V")
    own = {
        "settable: {voltage: 6 V, current: 0.5 A}": "settable: {voltage: 6 V, current: 0.5 A}\nleast: {voltage: 0.5 V}"
    }
    said = faults(tmp_path, step, {"dialect: scpi-tap-supply": f"dialect: {tmp_path / 'own.yaml'}"}, own)
    assert "400 mV is less than the tap supply 'cells' gives, 500 mV" in said


def test_the_search_ends_within_the_table(tmp_path: Path) -> None:
    step = "  - start_low: {cell_voltage: 3.7 V, voltages: [2.9 V], to: 4.3 V}\n"
    assert "4.3 V lies above the pack's table" in faults(tmp_path, step)
