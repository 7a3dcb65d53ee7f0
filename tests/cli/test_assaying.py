"""`packmime assay` as people call it, small: few runs of a short procedure."""

from __future__ import annotations

import json
import signal
import sys
import time
from collections.abc import Callable, Sequence
from pathlib import Path

import pytest

from drivers.virtual.defects import DEFECTS
from sequencer.cli.assay_outcome import Outcome
from sequencer.cli.assay_plan import Trial
from sequencer.cli.assay_work import carry_out, in_memory
from sequencer.engine.loop import StopFlag


def test_json_of_two_defects(packmime: Callable, tmp_path: Path) -> None:
    kept = tmp_path / "kept"
    asked = ("--spec", "sprayer", "--defects", "no-termination,cutoff-late", "--keep", kept, "--json")
    result = packmime("assay", "charge-profile", *asked)
    shown = json.loads(result.stdout)
    assert result.exit_code == 0
    assert shown["procedure"] == "charge-profile"
    assert shown["sound"] == [{"charger": "sprayer", "seed": 1, "false_alarms": [], "inconclusive": []}]
    first, second = shown["defects"]
    assert (first["name"], first["size"], first["found"], first["by"]) == (
        "no-termination",
        None,
        True,
        ["charge.ends"],
    )
    assert (second["name"], second["found"], second["by"]) == ("cutoff-late", True, ["charge.cutoff"])
    assert 25 <= float(second["size"].removesuffix(" %")) <= 60
    records = {path.name for path in kept.iterdir()}
    assert records == {"sound-sprayer-1", "no-termination-sprayer-1", "cutoff-late-sprayer-1"}
    assert all((kept / name / "judged/001/verdicts.json").is_file() for name in records)


@pytest.fixture
def one_process(monkeypatch: pytest.MonkeyPatch) -> None:
    """The runs one after the other in this process: saves the start of others where they are not the matter."""

    def in_turn(
        trials: Sequence[Trial], keep: Path | None, stop: StopFlag, says: Callable[[Outcome], None]
    ) -> list[Outcome]:
        outcomes = [carry_out(trial, keep) for trial in trials]
        for outcome in outcomes:
            says(outcome)
        return outcomes

    monkeypatch.setattr("sequencer.cli.assaying.side_by_side", in_turn)


@pytest.mark.usefixtures("one_process")
def test_a_claim_that_is_not_kept_exits_1(packmime: Callable, tmp_path: Path) -> None:
    """A regulation 5 mV high lies well inside the declared ± 25 mV: nothing may find it."""
    defect = tmp_path / "slightly-high.yaml"
    text = (DEFECTS / "regulation-high.yaml").read_text("utf-8").replace("name: regulation-high", "name: slightly-high")
    defect.write_text(text.replace("from: 30 mV, to: 80 mV", "from: 5 mV, to: 6 mV"), "utf-8")
    procedure = tmp_path / "p.yaml"
    text = Path(DEFECTS.parents[2] / "procedures" / "charge-profile.yaml").read_text("utf-8")
    procedure.write_text(text.replace("parameters:", "claims: {slightly-high: 5 mV}\nparameters:", 1), "utf-8")
    result = packmime("assay", procedure, "--spec", "sprayer", "--defects", defect)
    assert result.exit_code == 1, result.output
    assert "on sprayer, seed 1: NOT FOUND" in result.output
    assert "sound on sprayer, seed 1: no false alarm" in result.output
    assert "0 of 1 claimed defects were found" in result.output
    assert "The claims of the procedure are NOT met." in result.output


def test_bad_input_exits_2_before_anything_runs(packmime: Callable, tmp_path: Path) -> None:
    assert packmime("assay", "charge-profile", "--defects", "deed").exit_code == 2
    (tmp_path / "something").write_text("in the way", "utf-8")
    assert packmime("assay", "charge-profile", "--keep", tmp_path).exit_code == 2


def test_records_that_nobody_keeps_stay_in_memory_where_there_is_room(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.delenv("TMPDIR", raising=False)
    assert in_memory(tmp_path, 1) == tmp_path
    assert in_memory(tmp_path, 2**62) is None
    assert in_memory(tmp_path / "absent", 1) is None
    monkeypatch.setenv("TMPDIR", str(tmp_path))
    assert in_memory(tmp_path, 1) is None


@pytest.mark.skipif(sys.platform != "linux", reason="workers are looked up in /proc")
@pytest.mark.parametrize("name", ["SIGINT", pytest.param("SIGKILL", marks=pytest.mark.benchmark)])
def test_no_worker_outlives_the_command(command: Callable, tmp_path: Path, name: str) -> None:
    started = command(
        "assay", "charge-profile", "--seeds", "20", "--defects", "dead", cwd=tmp_path, TMPDIR=str(tmp_path)
    )
    try:
        assert started.stdout.readline().startswith("charge-profile: ")
        line = started.stdout.readline()  # the first run is done, others go on
        assert "1/" in line, line
        workers = _workers(started.pid)
        assert workers
        started.send_signal(signal.Signals[name])
        rest, _ = started.communicate(timeout=20)
    finally:
        started.kill()
    if name == "SIGINT":
        assert started.returncode == 3
        assert "stopped by Ctrl-C; every run was ended" in rest
    deadline = time.monotonic() + 10.0
    while any(_runs(pid) for pid in workers) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not any(_runs(pid) for pid in workers)
    assert list(tmp_path.glob("packmime-assay-*")) == []


def _workers(pid: int) -> list[int]:
    children = [child for task in Path(f"/proc/{pid}/task").glob("*/children") for child in task.read_text().split()]
    return [int(child) for child in children if b"spawn_main" in Path(f"/proc/{child}/cmdline").read_bytes()]


def _runs(pid: int) -> bool:
    """Whether there is such a process, and it is not only waiting for its parent to take note of its end."""
    try:
        return Path(f"/proc/{pid}/stat").read_text("utf-8").rpartition(") ")[2][0] != "Z"
    except (FileNotFoundError, ProcessLookupError):
        return False
