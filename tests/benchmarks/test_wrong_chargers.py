"""Wrong chargers through the door that people use: `packmime run acceptance` leaves with 1 and names the right limits.

Kind by kind a size is drawn by a printed seed. The limits that each must fail stand in its defect file; what fails
besides must be of the same family.
"""

from __future__ import annotations

import json
import subprocess
import sys
from fnmatch import fnmatch
from pathlib import Path

import pytest

from drivers.text.faults import Faults
from drivers.virtual.charger_file import load_charger
from drivers.virtual.defects import load_defect, spoiled

pytestmark = pytest.mark.benchmark
PACKMIME = (sys.executable, "-P", "-c", "from sequencer.cli import main; main()")
SEED = 20261201
WRONG = {  # defect: product, and families of limits that may fail with it
    "regulation-high": ("sprayer", {"charge"}),
    "step-threshold-high": ("lantern", {"charge"}),
    "start-window-hot": ("lantern", {"temperature"}),
    "tap-monitor-high": ("sprayer", {"tap_trip"}),
    "precharge-current-high": ("sprayer", {"low_start"}),
    "bleeds-through-tap": ("lantern", {"balancing"}),
}


@pytest.mark.parametrize("name", WRONG)
def test_a_wrong_charger_leaves_with_1_and_the_right_limits(name: str, tmp_path: Path) -> None:
    product, families = WRONG[name]
    faults = Faults()
    sound, defect = load_charger(product, faults), load_defect(name, faults)
    faults.raise_if_any()
    assert sound is not None
    assert defect is not None
    size = defect.model.drawn(SEED)
    wrong = spoiled(defect, size, sound, faults)
    faults.raise_if_any()
    assert wrong is not None
    (tmp_path / "wrong.yaml").write_bytes(wrong.document.content)
    command = ["run", "acceptance", "--spec", product, "--bench", "virtual-in-process", "--charger", "wrong.yaml"]
    done = subprocess.run(
        [*PACKMIME, *command, "--out", "record"], cwd=tmp_path, capture_output=True, text=True, check=False
    )
    print(f"seed {SEED}: {name} of {size} on {product}")
    assert done.returncode == 1, done.stdout + done.stderr
    verdicts = json.loads((tmp_path / "record" / "verdicts.json").read_text("utf-8"))["verdicts"]
    failed = {one["limit"] for one in verdicts if one["verdict"] in ("fail", "conditional fail")}
    for limit in defect.model.limits:
        assert any(fnmatch(one, limit) for one in failed), (limit, failed)
    assert {limit.partition(".")[0] for limit in failed} <= families
    assert not any(one["verdict"] == "inconclusive" for one in verdicts)
