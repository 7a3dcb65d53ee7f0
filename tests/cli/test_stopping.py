"""Which signals end a run by way of the safe state, and which are left alone."""

from __future__ import annotations

import os
import signal
import sys

import pytest

from sequencer.cli.stopping import noted_signals
from sequencer.engine.loop import StopFlag

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="signals to oneself are POSIX")


@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM", "SIGQUIT"])
def test_a_stop_is_heard_even_where_the_shell_had_it_ignored(name: str) -> None:
    """POSIX shells start background commands with SIGINT and SIGQUIT ignored (XCU 2.11)."""
    number = getattr(signal, name)
    before = signal.signal(number, signal.SIG_IGN)
    try:
        stop = StopFlag()
        with noted_signals(stop):
            os.kill(os.getpid(), number)
        assert stop.why == f"stopped by {'Ctrl-C' if name == 'SIGINT' else name}"
        assert signal.getsignal(number) is signal.SIG_IGN
    finally:
        signal.signal(number, before)


@pytest.mark.parametrize("ignored", [False, True])
def test_a_lost_terminal_ends_a_run_unless_nohup_says_otherwise(ignored: bool) -> None:
    before = signal.signal(signal.SIGHUP, signal.SIG_IGN if ignored else signal.SIG_DFL)
    try:
        stop = StopFlag()
        with noted_signals(stop):
            os.kill(os.getpid(), signal.SIGHUP)
        assert stop.why == (None if ignored else "stopped by SIGHUP")
    finally:
        signal.signal(signal.SIGHUP, before)
