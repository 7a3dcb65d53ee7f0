"""Charger files: those that ship, and every way in which one can be wrong."""

from __future__ import annotations

from pathlib import Path

import pytest

from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.virtual.charger_file import CHARGERS, load_charger, read_charger
from drivers.virtual.charger_plan import Stage

GOOD = """packmime: charger 1
name: hedge trimmer charger
cells: 4
algorithm: stepped-cc
stages:
  - {current: 2.0 A, until: 4.10 V}
  - {current: 500 mA, until: 4.20 V}
"""


def faults_of(text: str) -> list[str]:
    faults = Faults()
    bound = read_charger(compose(text.encode(), "c.yaml"), faults)
    assert (bound is None) == bool(faults.found)
    return [str(fault) for fault in faults.found]


@pytest.mark.parametrize("path", sorted(CHARGERS.glob("*.yaml")), ids=lambda path: path.stem)
def test_shipped_chargers_load_by_bare_name(path: Path) -> None:
    faults = Faults()
    bound = load_charger(path.stem, faults)
    faults.raise_if_any()
    assert bound is not None
    assert bound.document.content == path.read_bytes()
    assert bound.model.plan().works


def test_numbers_of_a_plan_are_of_the_whole_pack() -> None:
    bound = read_charger(compose(GOOD.encode(), "c.yaml"), Faults())
    assert bound is not None
    plan = bound.model.plan()
    assert plan.stages == (Stage(2.0, pytest.approx(16.4)), Stage(0.5, pytest.approx(16.8)))
    assert plan.limit_V == pytest.approx(4 * 4.25)  # 50 mV a cell above the highest threshold
    assert (plan.start_delay_s, plan.response_s, plan.ends, plan.cutoff_A) == (1.5, 1.0, True, None)


def test_path_beside_and_surge(tmp_path: Path) -> None:
    (tmp_path / "mine.yaml").write_text(GOOD + "overshoot: {current: 3 A, time: 200 ms}\nceiling: 4.3 V\n", "utf-8")
    faults = Faults()
    bound = load_charger("mine.yaml", faults, beside=tmp_path)
    assert bound is not None
    plan = bound.model.plan()
    assert (plan.surge_A, plan.surge_s, plan.limit_V) == (3.0, 0.2, pytest.approx(17.2))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("cells: 4", "cells: 0", 'c.yaml:3:1: cells: "0": expected a number of cells from 1 to 20'),
        ("cells: 4", "cells: 4,0", '"4,0": expected a number of cells'),
        ("cells: 4", "cels: 4", "unknown key 'cels'; did you mean 'cells'?"),
        ("stepped-cc", "cc-cv", "a cc-cv charger needs 'voltage_per_cell'"),
        ("stepped-cc", "cc-only", "a cc-only charger has one stage; 2 were given"),
        ("stepped-cc", "trickle", '"trickle" is none of'),
        ("2.0 A, until: 4.10 V", "2.0 V, until: 4.10 V", '"2.0 V" is a voltage; expected a current'),
        (", until: 4.10 V", "", "each stage needs 'until'"),
        ("cells: 4", "cells: 4\nceiling: 4.2 V", "'ceiling' must lie above every 'until'"),
        ("cells: 4", "cells: 4\ncutoff: 0.3 A", "'cutoff' belongs to a cc-cv charger"),
        ("cells: 4", "cells: 4\nresponse: 0 s", "must be above 0 s"),
        ("cells: 4", "cells: 4\nends: no", "expected true or false"),
    ],
)
def test_faults_say_where_and_what(old: str, new: str, words: str) -> None:
    assert GOOD.replace(old, new) != GOOD
    found = faults_of(GOOD.replace(old, new))
    assert any(words in fault for fault in found), found


def test_unknown_name_is_a_fault_with_the_nearest_one() -> None:
    faults = Faults()
    assert load_charger("spryer", faults) is None
    assert "did you mean 'sprayer'" in str(faults.found[0])
