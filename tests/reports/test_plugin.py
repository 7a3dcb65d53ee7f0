"""What a pytest run shows of a judgement, and that it shows nothing that was not asked for by name."""

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest


def run_pytest(folder: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    own = {name: value for name, value in os.environ.items() if not name.startswith(("PYTEST_", "COLUMNS"))}
    command = [sys.executable, "-P", "-m", "pytest", "-p", "reports.plugin", "-p", "no:cacheprovider", *arguments]
    settings = own | {"PYTEST_DISABLE_PLUGIN_AUTOLOAD": "1", "COLUMNS": "200"}
    return subprocess.run(command, cwd=folder, env=settings, capture_output=True, text=True, timeout=60, check=False)


@pytest.fixture(scope="module")
def shown(reported: Path) -> subprocess.CompletedProcess[str]:
    return run_pytest(reported.parent.parent, "-v", "-W", "error", "judged/001/verdicts.json")


def test_outcomes_of_the_seven_words(shown: subprocess.CompletedProcess[str]) -> None:
    """Pass passes, conditional pass passes with its own word, fail and conditional fail fail, ..."""
    words = re.findall(r"::(v\d+) ([A-Z ]*[A-Z])", shown.stdout)
    assert words[:9] == [
        ("v001", "PASSED"), ("v002", "PASSED"), ("v003", "CONDITIONAL PASS"), ("v004", "CONDITIONAL FAIL"),
        ("v005", "FAILED"), ("v006", "PASSED"), ("v007", "INCONCLUSIVE"), ("v008", "NOT RUN"),
        ("v009", "NOT APPLICABLE"),
    ]  # fmt: skip
    counts = "2 failed, 3 passed, 1 conditional pass, 1 inconclusive, 1 not run, 1 not applicable"
    assert counts in shown.stdout.splitlines()[-1]
    assert shown.returncode == 1


def test_every_word_but_pass_gives_its_reason_in_one_line(shown: subprocess.CompletedProcess[str]) -> None:
    lines = shown.stdout.splitlines()
    assert "fail: 2.41 A is above 2.1 A by more than the guard band of 4.2 mA." in lines
    assert "not run: charge.current_after_end: The run was stopped before the charge ended." in lines
    assert any(line.startswith("inconclusive: charge.stage1.threshold: The lag of the stand-in") for line in lines)
    assert any(line.startswith("conditional pass: charge.voltage: ") for line in lines)
    assert "Traceback" not in shown.stdout
    assert "items.py" not in shown.stdout


def test_the_limit_is_the_title(shown: subprocess.CompletedProcess[str]) -> None:
    assert re.search(r"^_+ charge\.stage1\.current _+$", shown.stdout, re.MULTILINE)


def test_a_folder_full_of_judgements_collects_none(reported: Path) -> None:
    done = run_pytest(reported.parent.parent, "-q", ".")
    assert done.returncode == 5, done.stdout  # pytest's documented exit code for "no tests collected"


def test_another_verdicts_json_is_not_ours(tmp_path: Path) -> None:
    (tmp_path / "verdicts.json").write_text("{}", encoding="utf-8")
    done = run_pytest(tmp_path, "-q", "verdicts.json")
    assert done.returncode == 4, done.stdout  # "usage error": the file was found, no plugin took it
    assert "Traceback" not in done.stdout + done.stderr


def test_the_plugin_costs_every_pytest_next_to_nothing() -> None:
    code = (
        "import pytest, sys; before = set(sys.modules); import reports.plugin\n"
        "print(*sorted(set(sys.modules) - before))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True)
    assert done.stdout.split() == ["reports", "reports.plugin"]
