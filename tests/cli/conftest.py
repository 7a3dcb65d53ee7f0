"""The command as people call it: in this process for speed, in a process of its own where signals or folders matter."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from typer.testing import CliRunner, Result

from sequencer.cli import app


@pytest.fixture
def packmime(monkeypatch: pytest.MonkeyPatch) -> Callable[..., Result]:
    """packmime("check", "charge-profile") -> result with exit_code, output, stderr."""
    monkeypatch.setenv("COLUMNS", "100")
    monkeypatch.setenv("TERMINAL_WIDTH", "100")

    def call(*words: object) -> Result:
        result = CliRunner().invoke(app, [str(word) for word in words])
        if result.exception is not None and not isinstance(result.exception, SystemExit):
            raise result.exception
        return result

    return call


@pytest.fixture
def command() -> Callable[..., subprocess.Popen[str]]:
    """command("run", ..., cwd=folder) -> a started process with its output piped as text."""

    def start(*words: object, cwd: Path, **settings: str) -> subprocess.Popen[str]:
        environment = {**os.environ, "PYTHONUNBUFFERED": "1", "PYTHONUTF8": "1", **settings}
        call = [sys.executable, "-P", "-c", "from sequencer.cli import main; main()", *(str(word) for word in words)]
        return subprocess.Popen(
            call,
            cwd=cwd,
            env=environment,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            encoding="utf-8",
            preexec_fn=_hear_hangups if hasattr(signal, "SIGHUP") else None,
        )

    return start


def _hear_hangups() -> None:
    """Tests that themselves run under nohup would hand their deafness on, which the command respects."""
    signal.signal(signal.SIGHUP, signal.SIG_DFL)
