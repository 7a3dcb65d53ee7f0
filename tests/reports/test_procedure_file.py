"""`pytest PROCEDURE.yaml`: the other door to a run. Collecting touches nothing; the bench runs in the file's setup."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from reports.procedure_file import asked_of, is_procedure
from sequencer.engine.inputs import FOLDERS

PROFILE = (FOLDERS["procedure"] / "charge-profile.yaml").read_text("utf-8")


def pytest_on(folder: Path, *words: str) -> subprocess.CompletedProcess[str]:
    call = [sys.executable, "-P", "-m", "pytest", "-p", "no:cacheprovider", "-c", "/dev/null", "--rootdir=.", *words]
    return subprocess.run(call, cwd=folder, capture_output=True, text=True, check=False)


@pytest.mark.skipif(sys.platform == "win32", reason="/dev/null as an empty ini file")
def test_a_procedure_is_run_and_judged_item_by_item(tmp_path: Path) -> None:
    (tmp_path / "mine.yaml").write_text(PROFILE, "utf-8")
    done = pytest_on(tmp_path, "mine.yaml", "--packmime", "--bench virtual-in-process --out record")
    assert "8 passed, 1 not applicable" in done.stdout, done.stdout + done.stderr
    assert "record: " in done.stdout
    assert (tmp_path / "record" / "report.html").is_file()


@pytest.mark.skipif(sys.platform == "win32", reason="/dev/null as an empty ini file")
def test_collecting_touches_nothing_and_bad_files_are_named(tmp_path: Path) -> None:
    (tmp_path / "mine.yaml").write_text(PROFILE, "utf-8")
    done = pytest_on(tmp_path, "mine.yaml", "--collect-only", "-q")
    assert "mine.yaml::v009" in done.stdout
    assert [path.name for path in tmp_path.iterdir()] == ["mine.yaml"]
    (tmp_path / "mine.yaml").write_text(PROFILE.replace("expect: charges", "expect: chrges"), "utf-8")
    done = pytest_on(tmp_path, "mine.yaml", "-q")
    assert done.returncode == 2
    assert 'expect: "chrges" is none of' in done.stdout


def test_only_procedures_are_taken(tmp_path: Path) -> None:
    for name, text, taken in (
        ("a.yaml", "# mine\n\npackmime: procedure 1\n", True),
        ("b.yaml", "packmime: bench 1\n", False),
        ("c.txt", "packmime: procedure 1\n", False),
        ("d.yaml", "", False),
    ):
        (tmp_path / name).write_text(text, "utf-8")
        assert is_procedure(tmp_path / name) is taken, name
    assert not is_procedure(tmp_path / "none.yaml")


def test_words_that_decide_the_limits_are_read_and_the_rest_is_left() -> None:
    asked = asked_of(["--spec", "lantern", "--seed", "3", "--set", "start=3.6 V", "--out=x"])
    assert (asked.spec, asked.bench, asked.set, asked.out) == ("lantern", "virtual", ["start=3.6 V"], "x")
