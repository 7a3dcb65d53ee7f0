"""Signals that end a program set a flag that the scan loop reads: every way out goes through the safe state."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

from sequencer.engine.loop import StopFlag

#: SIGHUP comes when a terminal is closed or a connection to it is lost; Windows knows SIGBREAK in its place.
NAMES = {
    getattr(signal, name): "Ctrl-C" if name == "SIGINT" else name
    for name in ("SIGINT", "SIGTERM", "SIGHUP", "SIGQUIT", "SIGBREAK")
    if hasattr(signal, name)
}


@contextmanager
def noted_signals(stop: StopFlag) -> Iterator[None]:
    """For as long as the block lasts, a signal is noted in `stop` and interrupts nothing."""

    def note(number: int, frame: FrameType | None) -> None:
        stop.why = f"stopped by {NAMES[signal.Signals(number)]}"

    # Under nohup SIGHUP comes ignored and stays so: the run shall outlive its terminal. The others are heard whatever
    # they come as: a shell without job control ignores SIGINT for what it starts in the background.
    left = [number for number in NAMES if NAMES[number] == "SIGHUP" and signal.getsignal(number) is signal.SIG_IGN]
    heard = [number for number in NAMES if number not in left]
    before = {number: signal.signal(number, note) for number in heard}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
