"""The whole assay of `acceptance`: its claims are met, nobody cries wolf, and it is done in time.

Bound: 6 chargers and 12 defects in 2 minutes on 2 cores, which is so much a run; more defects take longer.
"""

from __future__ import annotations

import json
import subprocess
import sys

import pytest

from drivers.clock import wall_seconds

pytestmark = pytest.mark.benchmark
PACKMIME = (sys.executable, "-P", "-c", "from sequencer.cli import main; main()")


def test_acceptance_finds_what_it_claims_and_nothing_on_sound_chargers() -> None:
    begun_s = wall_seconds()
    done = subprocess.run([*PACKMIME, "assay", "acceptance", "--json"], capture_output=True, text=True, check=False)
    spent_s = wall_seconds() - begun_s
    assert done.returncode == 0, done.stdout + done.stderr
    shown = json.loads(done.stdout)
    found = {defect["name"]: defect["found"] for defect in shown["defects"]}
    missed = sorted(name for name, was in found.items() if not was)
    runs = len(shown["sound"]) + len(shown["defects"])
    print(f"{runs} runs in {spent_s:.0f} s; {sum(found.values())} of {len(found)} defects found, not: {missed}")
    assert [one for one in shown["sound"] if one["false_alarms"] or one["inconclusive"]] == []
    assert len(found) >= 12
    assert all(defect["found"] for defect in shown["defects"] if defect["claimed"])
    assert sum(defect["claimed"] for defect in shown["defects"]) >= 4
    assert len(shown["sound"]) >= 6
    assert spent_s / runs < 120.0 / (6 + 12)
