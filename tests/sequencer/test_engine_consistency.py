"""What no file shows alone: pairs that do not fit. (Single faults of each file: test_engine_inputs.)"""

from __future__ import annotations

from pathlib import Path

import pytest

from drivers.bench_file import DIALECTS
from drivers.text.faults import BadInput
from sequencer.engine.inputs import FOLDERS, Asked, gather


def faults_of(tmp_path: Path, spec: dict[str, str], pack: dict[str, str], bench: dict[str, str]) -> list[str]:
    names = {
        "specification": ("sprayer", spec),
        "pack": ("sprayer", pack),
        "bench": ("virtual-mains-in-process", bench),
    }
    paths = {}
    for kind, (name, changes) in names.items():
        text = (FOLDERS[kind] / f"{name}.yaml").read_text("utf-8")
        for old, new in changes.items():
            assert old in text, old
            text = text.replace(old, new)
        paths[kind] = tmp_path / f"{kind}.yaml"
        paths[kind].write_text(text, "utf-8")
    with pytest.raises(BadInput) as bad:
        gather(Asked("charge-profile", *(str(paths[kind]) for kind in names)))
    return [str(fault).replace(f"{tmp_path}/", "") for fault in bad.value.faults]


@pytest.mark.parametrize(("role", "where"), [("meter", "voltage"), ("supply", "supply"), ("load", "load")])
def test_an_instrument_of_which_nobody_says_how_good_it_is(tmp_path: Path, role: str, where: str) -> None:
    """Found before the run: afterwards nothing could be judged."""
    dialect = (DIALECTS / f"scpi-{role}.yaml").read_text("utf-8")
    (tmp_path / "bare.yaml").write_text(dialect[: dialect.index("accuracy:")], "utf-8")
    faults = faults_of(tmp_path, {}, {}, {f"dialect: scpi-{role}": "dialect: bare.yaml"})
    assert any(fault.startswith("bench.yaml:") and "states no accuracy" in fault for fault in faults), faults
    assert any(f"'scpi-{role}'" in fault for fault in faults)


def test_a_supply_that_cannot_reach_the_full_pack(tmp_path: Path) -> None:
    faults = faults_of(tmp_path, {}, {"cells: 5": "cells: 14"}, {"node: 26 V": "node: 70 V"})
    assert any("its supply can be set to 60 V; the full pack needs 61.74 V" in fault for fault in faults), faults


def test_a_pack_larger_than_the_bench_may_charge(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, {}, {"2.5 Ah": "5.5 Ah"}, {})
    assert fault == "bench.yaml:20:37: 5 Ah is less than the pack's capacity 5.5 Ah"


def test_limits_above_the_packs_guard_bound(tmp_path: Path) -> None:
    """Such a limit could never be seen to fail: the guard ends the run first."""
    faults = faults_of(tmp_path, {"below: 4.25 V": "below: 4.40 V"}, {}, {})
    assert faults == ["specification.yaml:13:3: limit 4.4 V lies above the pack's guard bound 4.35 V per cell"]


def test_pairs_are_not_held_against_each_other_where_one_could_not_be_read(tmp_path: Path) -> None:
    faults = faults_of(tmp_path, {}, {"cells: 5": "cells: five"}, {"load: node_load": "load: nobody"})
    assert {fault.partition(":")[0] for fault in faults} == {"pack.yaml", "bench.yaml"}
