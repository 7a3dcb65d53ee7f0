"""What is said and which status is given where the output cannot be written, and on what is only virtual."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

FULL = Path("/dev/full")  # Linux: every write answers "no space left on device"


@pytest.mark.skipif(not FULL.exists(), reason="needs /dev/full")
def test_a_full_disk_is_told_in_a_sentence_and_is_no_fault_of_ours(tmp_path: Path) -> None:
    call = [sys.executable, "-P", "-c", "from sequencer.cli import main; main()", "check", "charge-profile"]
    with FULL.open("w") as full:
        done = subprocess.run(
            call, cwd=tmp_path, stdout=full, stderr=subprocess.PIPE, text=True, timeout=60, check=False
        )
    assert done.returncode == 3
    assert "nothing more can be written: No space left on device" in done.stderr
    assert "Traceback" not in done.stderr
    assert "Exception ignored" not in done.stderr


def test_an_empty_folder_name_is_not_the_one_we_stand_in(packmime: Callable) -> None:
    result = packmime("run", "charge-profile", "--out", "")
    assert result.exit_code == 2
    assert "--out: a folder was expected" in result.stderr


@pytest.mark.parametrize("command", ["show", "safe"])
def test_a_virtual_bench_is_marked_as_a_rehearsal(packmime: Callable, command: str) -> None:
    result = packmime("bench", command, "virtual-mains-in-process")
    assert result.exit_code == 0
    assert result.output.startswith("REHEARSAL on a virtual bench: greenhouse sprayer charger")
