"""Ctrl-C and SIGTERM set a flag that the scan loop reads: every way out goes through the safe state."""

from __future__ import annotations

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

from sequencer.engine.loop import StopFlag

NAMES = {signal.SIGINT: "Ctrl-C", signal.SIGTERM: "SIGTERM"}


@contextmanager
def noted_signals(stop: StopFlag) -> Iterator[None]:
    """For as long as the block lasts, a signal is noted in `stop` and interrupts nothing."""

    def note(number: int, frame: FrameType | None) -> None:
        stop.why = f"stopped by {NAMES[signal.Signals(number)]}"

    before = {number: signal.signal(number, note) for number in NAMES}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
