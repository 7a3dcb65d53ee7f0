"""Writing a report: apart from the user's own files and settings, whole or not at all, the same bytes twice."""

import importlib.metadata
import json
import os
from collections.abc import Callable
from pathlib import Path

import pytest

from reports.runner import ReportFault, environment, write_report

DISTURBING = {
    "conftest.py": "raise SystemExit('the user's own conftest ran')",
    "pytest.ini": "[pytest]\naddopts = --no-such-option\njunit_suite_name = theirs\n",
    "sitecustomize.py": "raise SystemExit('theirs')",
    "pytest.py": "raise SystemExit('theirs')",
    "matplotlibrc": "axes.labelsize: 40\nsavefig.bbox: tight\n",
    "reports/__init__.py": "raise SystemExit('the user's own reports ran')",
    "procedures/__init__.py": "raise SystemExit('the user's own procedures ran')",
    "drivers/__init__.py": "raise SystemExit('the user's own drivers ran')",
}


def test_whatever_the_user_keeps_there_the_bytes_are_the_same(
    reported: Path, copied: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One more run on a copy, amid the user's own files and settings: nothing may change, not a byte."""
    for folder in (copied, copied.parent.parent, tmp_path):
        for name, text in DISTURBING.items():
            (folder / name).parent.mkdir(exist_ok=True)
            (folder / name).write_text(text, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    steering = {"PYTEST_ADDOPTS": "-k nothing", "PYTEST_PLUGINS": "no_such_plugin", "PYTHONWARNINGS": "error"}
    for name, value in (steering | {"MATPLOTLIBRC": str(tmp_path), "TZ": "Asia/Tokyo", "LANG": "C"}).items():
        monkeypatch.setenv(name, value)
    write_report(copied)
    for name in ("report.html", "junit.xml"):
        assert (copied / name).read_bytes() == (reported / name).read_bytes()


def test_nothing_but_the_two_files_is_left(reported: Path) -> None:
    assert sorted(path.name for path in reported.iterdir()) == [
        "budgets.json", "findings.json", "judgement.json", "junit.xml", "report.html", "specification.yaml",
        "verdicts.json",
    ]  # fmt: skip


def test_a_judgement_is_never_written_over(reported: Path) -> None:
    before = (reported / "report.html").read_bytes()
    with pytest.raises(ReportFault, match=r"report\.html exists; a judgement is never written over"):
        write_report(reported)
    assert (reported / "report.html").read_bytes() == before


def test_a_verdict_that_is_none_is_a_fault_with_pytest_s_words(copied: Path) -> None:
    path = copied / "verdicts.json"
    path.write_text(path.read_text(encoding="utf-8").replace('"conditional fail"', '"maybe"'), encoding="utf-8")
    with pytest.raises(ReportFault, match=r"(?s)^report of .*judged/001: .*'maybe' is no verdict; the seven are"):
        write_report(copied)
    assert not list(copied.glob("report*")) + list(copied.glob("junit*"))


def test_nothing_to_judge_still_has_a_report(content: dict, write: Callable[..., Path]) -> None:
    content["verdicts"] = {"overall": "not run", "rehearsal": True, "verdicts": []}
    judged = write(content)
    write_report(judged)
    assert "Nothing was judged." in (judged / "report.html").read_text(encoding="utf-8")


def test_a_folder_that_is_no_judgement(tmp_path: Path) -> None:
    with pytest.raises(ReportFault, match=r"verdicts\.json"):
        write_report(tmp_path)


def test_size(reported: Path) -> None:
    """Own bounds (a report is to be small enough to mail): 4,000 samples in well under 1 MB."""
    assert (reported / "report.html").stat().st_size < 400_000


def test_the_environment_keeps_what_finds_the_program(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    path = os.pathsep.join(["", "lib", str(tmp_path / "other")])
    kept = environment({"PYTHONPATH": path, "PATH": "/bin", "PYTEST_ADDOPTS": "-x", "PYTHONWARNINGS": "error"})
    assert kept["PYTHONPATH"].split(os.pathsep) == [str(tmp_path / "lib"), str(tmp_path / "other")]
    assert kept["PATH"] == "/bin"
    assert not {"PYTEST_ADDOPTS", "PYTHONWARNINGS"} & kept.keys()


def test_the_plugin_is_installed_for_every_pytest() -> None:
    (found,) = importlib.metadata.entry_points(group="pytest11", name="packmime")
    assert found.value == "reports.plugin"


def test_report_states_the_verdicts_it_was_given(reported: Path) -> None:
    html = (reported / "report.html").read_text(encoding="utf-8")
    for verdict in json.loads((reported / "verdicts.json").read_text(encoding="utf-8"))["verdicts"]:
        assert f'<span class="word {verdict["verdict"].replace(" ", "-")}">{verdict["verdict"]}</span>' in html
