"""The help texts are a contract: golden files hold them (PACKMIME_GOLDEN=1 rewrites them)."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

GOLDEN = Path(__file__).parent / "golden"
COMMANDS = [
    (),
    ("run",),
    ("check",),
    ("judge",),
    ("classify",),
    ("assay",),
    ("bench",),
    ("bench", "show"),
    ("bench", "safe"),
    ("bench", "serve"),
]


@pytest.mark.parametrize("words", COMMANDS, ids=lambda words: "-".join(words) or "packmime")
def test_help(packmime: Callable, words: tuple[str, ...]) -> None:
    result = packmime(*words, "--help")
    assert result.exit_code == 0
    shown = "\n".join(line.rstrip() for line in result.output.splitlines()) + "\n"
    golden = GOLDEN / f"help-{'-'.join(words) or 'packmime'}.txt"
    if os.environ.get("PACKMIME_GOLDEN"):
        golden.write_text(shown, "utf-8")
    assert shown == golden.read_text("utf-8")


def test_every_command_has_its_golden_help(packmime: Callable) -> None:
    top = packmime("--help").output
    for words in COMMANDS:
        if words:
            assert words[0] in top


def test_version(packmime: Callable) -> None:
    from importlib.metadata import version

    assert packmime("--version").output.strip() == version("packmime")
