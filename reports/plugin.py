"""Collects judgements and procedures for pytest, one item a verdict, and writes pages through pytest-html.

Imported by every pytest of the environment: nothing but pytest here, everything else inside the functions, and no
effect on any run that was not given a judgement by name.
"""

from __future__ import annotations

from collections.abc import Generator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from reports.items import VerdictFile

_LETTERS = {
    "conditional pass": ("conditional pass", "c", "yellow"),
    "conditional fail": ("failed", "F", "red"),
    "inconclusive": ("inconclusive", "?", "purple"),
    "not run": ("not run", "-", "light"),
    "not applicable": ("not applicable", "/", "light"),
}
_TOLD = ("conditional pass", "inconclusive", "not run", "not applicable")


def _is_judgement(path: Path) -> bool:
    return path.name == "verdicts.json" and path.with_name("judgement.json").is_file()


def _named(config: pytest.Config) -> list[Path]:
    """The judgements that the command line names, each by the path of its verdicts.json."""
    return [path for path in _arguments(config) if _is_judgement(path)]


def _arguments(config: pytest.Config) -> list[Path]:
    """The files that the command line names, each once."""
    if config.args_source is not pytest.Config.ArgsSource.ARGS:
        return []
    folder = config.invocation_params.dir
    return list(dict.fromkeys((folder / argument.partition("::")[0]).resolve() for argument in config.args))


def pytest_addoption(parser: pytest.Parser) -> None:
    words = 'with a procedure, such as "--spec lantern --seed 3": options of `packmime run`'
    parser.getgroup("packmime").addoption("--packmime", metavar="OPTIONS", help=words)


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> VerdictFile | None:
    """Only what the command line names: a judgement, or a procedure. Collecting never energises anything."""
    if file_path.suffix not in (".json", ".yaml", ".yml") or file_path.resolve() not in _arguments(parent.config):
        return None
    if _is_judgement(file_path):
        from reports.items import JudgementFile

        return JudgementFile.from_parent(parent, path=file_path)
    from reports.procedure_file import ProcedureFile, is_procedure

    return ProcedureFile.from_parent(parent, path=file_path) if is_procedure(file_path) else None


@pytest.hookimpl(trylast=True)
def pytest_configure(config: pytest.Config) -> None:
    """Put our page in the place of pytest-html's, if one judgement and nothing else is reported."""
    named = _named(config)
    if len(named) != 1 or len({argument.partition("::")[0] for argument in config.args}) != 1:
        return
    if not getattr(config.option, "htmlpath", None):
        return
    from pytest_html.basereport import BaseReport

    from reports.template import PageTemplate

    for plugin in config.pluginmanager.get_plugins():
        if isinstance(plugin, BaseReport):
            plugin._template = PageTemplate(lambda: _view(named[0].parent))


def _view(folder: Path) -> Any:
    from reports.source import read_judgement
    from reports.view import build

    return build(read_judgement(folder))


def _verdict(report: Any) -> str:
    """The verdict of one of our items at the phase that decides it; empty for everything else."""
    if not getattr(report, "nodeid", "").partition("::")[0].endswith(("verdicts.json", ".yaml", ".yml")):
        return ""
    from reports.items import verdict_of

    return verdict_of(report)


@pytest.hookimpl(tryfirst=True)
def pytest_report_teststatus(report: Any, config: pytest.Config) -> tuple[str, str, Any] | None:
    """Our words for what is neither a plain pass nor a plain fail."""
    if report.when == "teardown" or (report.when == "setup" and report.outcome == "passed"):
        return None
    status = _LETTERS.get(_verdict(report))
    if status is None:
        return None
    category, letter, colour = status
    return category, letter, (_verdict(report).upper(), {colour: True})


def pytest_terminal_summary(terminalreporter: Any) -> None:
    """The reasons that pytest itself does not print: those of our own words."""
    _tell_records(terminalreporter)
    told = [(word, report) for word in _TOLD for report in terminalreporter.stats.get(word, ())]
    if not told:
        return
    terminalreporter.write_sep("=", "verdicts")
    for word, report in told:
        found = dict(report.user_properties)
        why = " ".join(str(found.get("why", "")).split())
        terminalreporter.write_line(f"{word}: {found['limit']}: {why}", **{_LETTERS[word][2]: True})


def _tell_records(terminalreporter: Any) -> None:
    """Where the records of the procedures run in this session lie; nothing where none was run."""
    if not any(path.suffix in (".yaml", ".yml") for path in _arguments(terminalreporter.config)):
        return
    from reports.procedure_file import ProcedureFile

    for record in ProcedureFile.written(terminalreporter.config):
        terminalreporter.write_line(f"record: {record} (report.html lies in it)")


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item: pytest.Item) -> Generator[None, pytest.TestReport, pytest.TestReport]:
    """A skipped limit is skipped by its verdict, not by a line of ours."""
    report = yield
    if report.skipped and isinstance(report.longrepr, tuple) and _verdict(report):
        report.longrepr = (str(item.path), 0, report.longrepr[2])
    return report
